package track_test

import (
	"bytes"
	"slices"

	"limitary/internal/track"
)

// hits are the results at which a live signal has its hits, in order.
type hits struct {
	signal
	at []int64
}

func (h *hits) shares(other *hits) bool {
	return slices.ContainsFunc(h.at, func(id int64) bool { return slices.Contains(other.at, id) })
}

// hits gives the live signals of some keys with their hits, in order of their first one.
func (t *trackModel) hits(keys []track.EpisodeKey) (list []hits) {
	for _, s := range t.signals {
		if !s.live() || !slices.Contains(keys, s.EpisodeKey) {
			continue
		}
		h := hits{signal: *s}
		for _, p := range t.places[t.find(s.FirstHit.Key):t.find(after(s.LastHit.Key))] {
			if slices.Contains(p.keys, s.EpisodeKey) {
				h.at = append(h.at, p.ID)
			}
		}
		list = append(list, h)
	}
	slices.SortFunc(list, func(a, b hits) int { return bytes.Compare(a.FirstHit.Key, b.FirstHit.Key) })
	return list
}

// checkIdentity compares what a region did to the ids of signals with the rule: an episode sharing a hit keeps the oldest
// id, others are merged into it; of a split one the part with the earliest hit keeps the id; none left is retracted. Ids
// from first on are those given in the region.
func (m *model) checkIdentity(t *trackModel, keys []track.EpisodeKey, old []hits, changes []track.Change, first int64) {
	now := t.hits(keys)
	heir := map[int64]int{} // the index of the new episode that an old one goes on in
	for i := range now {
		for k := range old {
			if _, has := heir[old[k].ID]; !has && old[k].EpisodeKey == now[i].EpisodeKey && old[k].shares(&now[i]) {
				heir[old[k].ID] = i
			}
		}
	}
	for i, s := range now {
		var want int64
		for id, to := range heir {
			if to == i && (want == 0 || id < want) {
				want = id
			}
		}
		switch {
		case want == 0 && s.ID < first:
			m.problem("signal %d shares no hit with what it was, want a new id: %s", s.ID, episodeText(&s.Episode))
		case want != 0 && s.ID != want:
			m.problem("signal %d continues signal %d: %s", s.ID, want, episodeText(&s.Episode))
		}
	}
	for _, was := range old {
		s := t.signals[was.ID]
		i, lives := heir[was.ID]
		switch {
		case !lives && s.status != "RETRACTED":
			m.problem("signal %d has no hit left and is %s", was.ID, s.status)
		case lives && now[i].ID == was.ID && s.status != was.status:
			m.problem("signal %d goes on and is %s, was %s", was.ID, s.status, was.status)
		case lives && now[i].ID != was.ID && (s.status != "MERGED" || s.mergedInto != now[i].ID):
			m.problem("signal %d became part of %d, and is %s into %d", was.ID, now[i].ID, s.status, s.mergedInto)
		}
		m.checkEvents(was, s, changes)
	}
}

// checkEvents compares the changes listed of a signal with what became of it.
func (m *model) checkEvents(was hits, s *signal, changes []track.Change) {
	var told []track.ChangeKind
	for _, c := range changes {
		if c.ID == was.ID && c.Kind != track.Unchanged {
			told = append(told, c.Kind)
		}
	}
	var want []track.ChangeKind
	switch {
	case s.status == "MERGED":
		want = []track.ChangeKind{track.Merged}
	case s.status == "RETRACTED":
		want = []track.ChangeKind{track.Retracted}
	case episodeText(&s.Episode) != episodeText(&was.Episode):
		want = []track.ChangeKind{track.Changed}
	}
	if !slices.Equal(told, want) {
		m.problem("signal %d was\n    %s\n  is\n    %s\n  (%s) and was told of as %v, want %v", was.ID, episodeText(&was.Episode), episodeText(&s.Episode), s.status, told, want)
	}
	if closed := was.status == "CLOSED"; s.changedAfterClosing != (was.changedAfterClosing || closed && len(want) > 0) {
		m.problem("signal %d: changed after closing is %v", was.ID, s.changedAfterClosing)
	}
}
