package track_test

import (
	"bytes"
	"maps"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/track"
)

// stir is what an operation does to one track before judging, as in the store.
type stir struct {
	changed     []*track.Item
	gone        map[int64]bool
	removed     []track.Removed
	from, until []byte
}

func (st stir) start() []byte {
	from := st.from
	lower := func(key []byte) {
		if from == nil || bytes.Compare(key, from) < 0 {
			from = key
		}
	}
	for _, it := range st.changed {
		lower(it.Key)
		if it.Stored != nil {
			lower(it.Stored.Key)
		}
	}
	for _, r := range st.removed {
		lower(r.Key)
	}
	return from
}

func (st *stir) pass(reg *track.Region) []byte {
	st.from, st.until, st.removed = nil, nil, nil
	if n := len(reg.Items); n > 0 {
		for len(st.changed) > 0 && bytes.Compare(st.changed[0].Key, reg.Items[n-1].Item.Key) <= 0 {
			st.changed = st.changed[1:]
		}
	}
	return st.start()
}

// judge judges what a stir touches, region by region, and keeps what it finds.
func (m *model) judge(t *trackModel, st stir) {
	for from := st.start(); from != nil; {
		m.regions++
		if m.regions > 1000 {
			panic("judging does not end")
		}
		reg, changes, err := m.region(t, st, from)
		if err != nil {
			m.problem("region of lot %q: %v", t.lot, err)
			return
		}
		m.judged += len(reg.Items)
		if reg.Agrees {
			m.agreed++
		}
		if m.watch != nil {
			m.watch(t, st, reg)
		}
		m.keep(t, st, reg, changes)
		m.changes = append(m.changes, changes...)
		from = st.pass(reg)
	}
}

func (m *model) region(t *trackModel, st stir, from []byte) (*track.Region, []track.Change, error) {
	earlier := t.earlier(from)
	runner := track.NewRunner(m.timeline(t.lot), earlier)
	i := t.find(from)
	if i > 0 {
		if err := runner.Resume(t.places[i-1].At, t.places[i-1].state); err != nil {
			return nil, nil, err
		}
	}
	reg, err := track.JudgeRegion(runner, st.until, merged(t.places[i:], st.changed, st.gone))
	if err != nil {
		return nil, nil, err
	}
	reg.Removed = st.removed
	keys := reg.Keys()
	if len(keys) == 0 {
		return reg, nil, nil
	}
	changes, err := reg.Episodes(t.episodes(keys, reg.From(), reg.To()), func(role chart.Role) (track.Ref, error) {
		refs, err := earlier(role, 1)
		if err == nil && len(refs) == 0 {
			err = errNoPoint
		}
		if err != nil {
			return track.Ref{}, err
		}
		return refs[0], nil
	})
	return reg, changes, err
}

type modelError string

func (e modelError) Error() string { return string(e) }

const errNoPoint = modelError("no point before a region that continues a signal")

// find gives the index of the first place at or after a key.
func (t *trackModel) find(key []byte) int {
	i, _ := slices.BinarySearchFunc(t.places, key, func(p place, key []byte) int { return bytes.Compare(p.Key, key) })
	return i
}

func (t *trackModel) drop(ids map[int64]bool) {
	t.places = slices.DeleteFunc(t.places, func(p place) bool { return ids[p.ID] })
}

func (p *place) stored() *track.Stored {
	return &track.Stored{Key: p.Key, Version: p.version, Verdict: p.verdict, State: p.state, Repeat: p.Repeat}
}

// earlier gives the points of a trace before a key, from the stored verdicts.
func (t *trackModel) earlier(before []byte) track.Earlier {
	return func(role chart.Role, n int) ([]track.Ref, error) {
		var found []track.Ref
		for i := t.find(before) - 1; i >= 0 && len(found) < n; i-- {
			p := &t.places[i]
			o, err := track.Decode(p.verdict)
			if err != nil {
				return nil, err
			}
			if o.Traces[role].Point && !p.Repeat {
				found = append(found, p.Ref)
			}
		}
		slices.Reverse(found)
		return found, nil
	}
}

// merged gives stored places and changed items in one order; stored ones that are gone are passed over.
func merged(stored []place, changed []*track.Item, gone map[int64]bool) func() (*track.Item, error) {
	return func() (*track.Item, error) {
		for len(stored) > 0 && gone[stored[0].ID] {
			stored = stored[1:]
		}
		if len(changed) > 0 && (len(stored) == 0 || bytes.Compare(changed[0].Key, stored[0].Key) < 0) {
			it := changed[0]
			changed = changed[1:]
			return it, nil
		}
		if len(stored) == 0 {
			return nil, nil
		}
		it := stored[0].Item
		it.Stored = stored[0].stored()
		stored = stored[1:]
		return &it, nil
	}
}

// episodes gives for each key the live signal that began last before a place and all that begin between two places.
func (t *trackModel) episodes(keys []track.EpisodeKey, from, to []byte) (list []*track.Episode) {
	if from == nil {
		return nil // as SQL compares with null
	}
	for _, key := range keys {
		var last *track.Episode
		for _, id := range slices.Sorted(maps.Keys(t.signals)) {
			s := t.signals[id]
			if !s.live() || s.EpisodeKey != key {
				continue
			}
			e := s.Episode
			switch first := e.FirstHit.Key; {
			case bytes.Compare(first, from) < 0:
				if last == nil || bytes.Compare(first, last.FirstHit.Key) > 0 {
					last = &e
				}
			case bytes.Compare(first, to) <= 0:
				list = append(list, &e)
			}
		}
		if last != nil {
			list = append(list, last)
		}
	}
	slices.SortFunc(list, func(a, b *track.Episode) int { return int(a.ID - b.ID) })
	return list
}

// keep stores what judging a region found.
func (m *model) keep(t *trackModel, st stir, reg *track.Region, changes []track.Change) {
	var old []hits
	keys := reg.Keys()
	if m.checked {
		old = t.hits(keys)
	}
	for _, j := range reg.Items {
		if s := j.Item.Stored; s != nil && !bytes.Equal(s.Key, j.Item.Key) {
			i := t.find(s.Key)
			t.places = slices.Delete(t.places, i, i+1)
		}
		p := place{Item: *j.Item, version: j.Version, verdict: j.Verdict, state: j.State}
		p.Stored, p.Force = nil, false
		if !p.Repeat {
			for _, h := range j.Hits {
				p.keys = append(p.keys, h.EpisodeKey)
			}
		}
		i := t.find(p.Key)
		switch same := i < len(t.places) && bytes.Equal(t.places[i].Key, p.Key); {
		case !same:
			t.places = slices.Insert(t.places, i, p)
		case j.Item.Force || j.VerdictChanged || j.StateChanged:
			t.places[i] = p
		}
	}
	if len(st.removed) > 0 {
		t.drop(st.gone)
	}
	first := m.lastSignal + 1
	m.signal(t, changes)
	if m.checked {
		m.checkIdentity(t, keys, old, changes, first)
	}
}

// signal keeps what became of signals.
func (m *model) signal(t *trackModel, changes []track.Change) {
	for i := range changes {
		if c := &changes[i]; c.Kind == track.Opened {
			if c.ID != 0 {
				m.problem("an opened signal has an id, %d", c.ID)
			}
			m.lastSignal++
			c.ID = m.lastSignal
			t.signals[c.ID] = &signal{Episode: c.Episode, status: "OPEN"}
		}
	}
	for _, c := range changes {
		s := t.signals[c.ID]
		if s == nil || !s.live() {
			m.problem("%v of signal %d, which is not live", c.Kind, c.ID)
			continue
		}
		if c.Closed != s.Closed {
			m.problem("%v of signal %d says closed %v, it is %v", c.Kind, c.ID, c.Closed, s.Closed)
		}
		if c.Kind != track.Opened && c.Kind != track.Unchanged {
			s.changedAfterClosing = s.changedAfterClosing || s.Closed
		}
		switch c.Kind {
		case track.Changed:
			closed := s.Closed
			s.Episode = c.Episode
			s.Closed = closed
		case track.Merged:
			s.status, s.mergedInto = "MERGED", changes[c.Into].ID
		case track.Retracted:
			s.status = "RETRACTED"
		}
	}
}
