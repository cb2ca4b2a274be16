package track

import (
	"bytes"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/rules"
)

// Episode is a signal as it stands: hits of one rule, trace and side at consecutive points of one segment.
type Episode struct {
	// ID is 0 for an episode that has none yet.
	ID int64
	EpisodeKey
	Consequence rules.Consequence
	// Version judged the first hit.
	Version int
	// FirstPoint is the first point that counts for the first hit.
	FirstPoint, FirstHit, LastHit Ref
	// Closed is set where a person has decided on it; matching does not care.
	Closed bool
}

func (e *Episode) covers(key []byte) bool {
	return bytes.Compare(e.FirstHit.Key, key) <= 0 && bytes.Compare(key, e.LastHit.Key) <= 0
}

// Change is what a region does to one signal.
type Change struct {
	Episode
	Kind ChangeKind
	// Into is the index in the list of changes of the episode a merged one is now part of.
	Into int
}

// ChangeKind says what happened to a signal.
type ChangeKind uint8

const (
	// Unchanged is listed only because another signal merged into it.
	Unchanged ChangeKind = iota
	Opened
	Changed
	Merged
	Retracted
)

// String is the name used in storage.
func (k ChangeKind) String() string {
	return [...]string{"", "OPENED", "CHANGED", "MERGED", "RETRACTED"}[k]
}

// Keys lists the episode keys the region touches: those of old and new hits and those it resumed.
func (reg *Region) Keys() []EpisodeKey {
	var keys []EpisodeKey
	add := func(k EpisodeKey) {
		if !slices.Contains(keys, k) {
			keys = append(keys, k)
		}
	}
	for _, resumed := range reg.Resumed {
		for _, k := range resumed {
			add(k)
		}
	}
	for _, gone := range reg.Removed {
		for _, h := range gone.Hits {
			add(h.EpisodeKey)
		}
	}
	for _, j := range reg.Items {
		for _, h := range j.oldHits() {
			add(h.EpisodeKey)
		}
		if !j.Item.Repeat {
			for _, h := range j.Hits {
				add(h.EpisodeKey)
			}
		}
	}
	return keys
}

// run is a stretch of consecutive hits of one key, partly in the region.
type run struct {
	key EpisodeKey
	// left is the episode it continues from before the region, right the one it continues into after it.
	left, right *Episode
	first, last *Judged // nil where no hit lies in the region
	shares      []*Episode
}

// Episodes matches the region's hits with the episodes stored for its keys: for each key the one that began last before
// the region and all that begin in it. Removed are the stored places and hits of results that left the track. LastPoint
// gives the newest point of a trace before the region.
//
// An episode that shares a hit with a stored one keeps its id, the oldest of several, into which the others merge; where
// one was split, the part with the earliest hit keeps the id; a stored one that no hit is left of is retracted.
func (reg *Region) Episodes(stored []*Episode, lastPoint func(chart.Role) (Ref, error)) ([]Change, error) {
	if len(reg.Items) == 0 && len(reg.Removed) == 0 {
		return nil, nil // no result lies there, so every episode stands
	}
	var changes []Change
	for _, key := range reg.Keys() {
		var mine []*Episode
		for _, e := range stored {
			if e.EpisodeKey == key {
				mine = append(mine, e)
			}
		}
		if len(mine) > 0 {
			slices.SortFunc(mine, func(a, b *Episode) int { return bytes.Compare(a.FirstHit.Key, b.FirstHit.Key) })
		}
		runs := reg.runs(key, mine)
		assigned, err := assign(runs, mine, lastPoint, len(changes), reg)
		if err != nil {
			return nil, err
		}
		changes = append(changes, assigned...)
	}
	return changes, nil
}

// runs finds the stretches of consecutive hits of a key that lie in the region or touch it.
func (reg *Region) runs(key EpisodeKey, stored []*Episode) (runs []*run) {
	var open *run
	if slices.Contains(reg.Resumed[key.Role], key) {
		open = &run{key: key, left: beginningBefore(stored, reg.From())}
		open.share(open.left)
		runs = append(runs, open)
	}
	for _, j := range reg.Items {
		if j.Began {
			open = nil
		}
		if j.Item.Repeat || !j.Traces[key.Role].Point {
			continue
		}
		if !j.has(key) {
			open = nil
			continue
		}
		if open == nil {
			open = &run{key: key}
			runs = append(runs, open)
		}
		if open.first == nil {
			open.first = j
		}
		open.last = j
		if j.had(key) {
			open.share(covering(stored, j.Item.Stored.Key))
		}
	}
	if open != nil && reg.Agrees {
		// The newest point stands as stored, so the episode that has it goes on as it was.
		at := open.left
		if open.last != nil {
			at = covering(stored, open.last.Item.Key)
		}
		open.right = at
		open.share(at)
	}
	return runs
}

// lowest is the first place the item has or had.
func (j *Judged) lowest() []byte {
	if s := j.Item.Stored; s != nil && bytes.Compare(s.Key, j.Item.Key) < 0 {
		return s.Key
	}
	return j.Item.Key
}

func (j *Judged) has(key EpisodeKey) bool {
	return slices.ContainsFunc(j.Hits, func(h Hit) bool { return h.EpisodeKey == key })
}

func (j *Judged) had(key EpisodeKey) bool {
	return slices.ContainsFunc(j.oldHits(), func(h Hit) bool { return h.EpisodeKey == key })
}

func (r *run) share(e *Episode) {
	if e != nil && !slices.Contains(r.shares, e) {
		r.shares = append(r.shares, e)
	}
}

func covering(stored []*Episode, key []byte) *Episode {
	for _, e := range stored {
		if e.covers(key) {
			return e
		}
	}
	return nil
}

// beginningBefore gives the episode that begins last before a place.
func beginningBefore(stored []*Episode, key []byte) (last *Episode) {
	for _, e := range stored {
		if bytes.Compare(e.FirstHit.Key, key) < 0 {
			last = e
		}
	}
	return last
}

// assign gives the runs of one key their ids and says what became of the stored episodes. Base is the index the first
// change will have in the whole list.
func assign(runs []*run, stored []*Episode, lastPoint func(chart.Role) (Ref, error), base int, reg *Region) (changes []Change, err error) {
	claims := map[*Episode]int{} // the run with the earliest hit that shares one with the episode
	for i, r := range runs {
		for _, e := range r.shares {
			if _, claimed := claims[e]; !claimed {
				claims[e] = i
			}
		}
	}
	for i, r := range runs {
		now, err := r.episode(reg, lastPoint)
		if err != nil {
			return nil, err
		}
		owner := oldest(r.shares, claims, i)
		c := Change{Episode: now, Kind: Opened}
		if owner != nil {
			c.ID, c.Kind, c.Closed = owner.ID, Changed, owner.Closed
			if now.same(owner) {
				c.Kind = Unchanged
			}
		}
		into := base + len(changes)
		changes = append(changes, c)
		for _, e := range r.shares {
			if e != owner && claims[e] == i {
				changes = append(changes, Change{Episode: *e, Kind: Merged, Into: into})
			}
		}
	}
	for _, e := range stored {
		if _, claimed := claims[e]; !claimed && reg.touches(e) {
			changes = append(changes, Change{Episode: *e, Kind: Retracted})
		}
	}
	return changes, nil
}

func oldest(shares []*Episode, claims map[*Episode]int, run int) (owner *Episode) {
	for _, e := range shares {
		if claims[e] == run && (owner == nil || e.ID < owner.ID) {
			owner = e
		}
	}
	return owner
}

// touches reports whether any hit of the episode lay in the region: an episode that ended before it stands.
func (reg *Region) touches(e *Episode) bool {
	return bytes.Compare(e.LastHit.Key, reg.From()) >= 0
}

// From is the first place the region has or had; nil where it has none.
func (reg *Region) From() (from []byte) {
	lower := func(key []byte) {
		if from == nil || bytes.Compare(key, from) < 0 {
			from = key
		}
	}
	for _, gone := range reg.Removed {
		lower(gone.Key)
	}
	for _, j := range reg.Items {
		lower(j.lowest())
	}
	return from
}

// To is the last place the region has or had; nil where it has none.
func (reg *Region) To() (to []byte) {
	higher := func(key []byte) {
		if bytes.Compare(key, to) > 0 {
			to = key
		}
	}
	for _, gone := range reg.Removed {
		higher(gone.Key)
	}
	for _, j := range reg.Items {
		higher(j.Item.Key)
		if s := j.Item.Stored; s != nil {
			higher(s.Key)
		}
	}
	return to
}

func (e *Episode) same(other *Episode) bool {
	return e.Version == other.Version && e.FirstPoint.ID == other.FirstPoint.ID &&
		e.FirstHit.ID == other.FirstHit.ID && e.LastHit.ID == other.LastHit.ID &&
		bytes.Equal(e.FirstPoint.Key, other.FirstPoint.Key) &&
		bytes.Equal(e.FirstHit.Key, other.FirstHit.Key) && bytes.Equal(e.LastHit.Key, other.LastHit.Key)
}

// episode gives what the run is now, without id.
func (r *run) episode(reg *Region, lastPoint func(chart.Role) (Ref, error)) (e Episode, err error) {
	switch {
	case r.left != nil:
		e = *r.left
	case r.first != nil:
		hit := r.first.hit(r.key)
		e = Episode{EpisodeKey: r.key, Consequence: hit.Consequence, Version: r.first.Version,
			FirstPoint: hit.FirstCounting, FirstHit: r.first.Item.Ref}
	}
	e.ID, e.Closed = 0, false
	switch {
	case r.right != nil:
		e.LastHit = r.right.LastHit
	case r.last != nil:
		e.LastHit = r.last.Item.Ref
	case bytes.Compare(e.LastHit.Key, reg.From()) >= 0:
		e.LastHit, err = lastPoint(r.key.Role) // the rest of it lay in the region and is gone
	}
	return e, err
}

func (j *Judged) hit(key EpisodeKey) Hit {
	i := slices.IndexFunc(j.Hits, func(h Hit) bool { return h.EpisodeKey == key })
	return j.Hits[i]
}
