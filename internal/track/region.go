package track

import (
	"bytes"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
)

// Judged is an item with its new outcome.
type Judged struct {
	Item *Item
	Outcome
	// Verdict is the outcome's stored form.
	Verdict []byte
	// Began is set where the item begins a segment.
	Began bool
	// VerdictChanged is set where version, verdict or hits differ from what is stored; StateChanged where only what the
	// judge remembers does.
	VerdictChanged, StateChanged bool
	// was is the stored outcome where it differs.
	was *Outcome
}

// Region is a stretch of a track judged anew.
type Region struct {
	Items []*Judged
	// Resumed are the rules that completed at the newest points before the stretch.
	Resumed [chart.Roles][]EpisodeKey
	// Removed are results that left the track, set by the caller.
	Removed []Removed
	// Agrees is set where the stretch ended because everything after it in its segment stands as stored; it is not set
	// where the track or the segment ended.
	Agrees bool
}

// Removed is the place and the hits a result had on the track it left.
type Removed struct {
	Key  []byte
	Hits []Hit
}

// JudgeRegion judges items from next, in their order, until next gives nil or until everything after stands as stored.
// It does not stop before an item whose key is at or after until (nil: anywhere), and counts all items before it as
// changed: until lies behind the last place a result was taken from and the last moment another version is in force.
// Then it goes on until verdict and state agree with what is stored and no window can reach a changed item any more.
func JudgeRegion(r *Runner, until []byte, next func() (*Item, error)) (*Region, error) {
	reg := &Region{Resumed: r.last}
	// since counts the points of a trace behind the latest one that differs, dirty is set where there is one.
	var since [chart.Roles]int
	var dirty [chart.Roles]bool
	for {
		it, err := next()
		if err != nil || it == nil {
			return reg, err
		}
		within := bytes.Compare(it.Key, until) < 0
		if len(reg.Items) > 0 && !within && !it.Force && it.Stored != nil && r.beginsSegment(it, until) {
			return reg, nil // a new segment knows nothing of this one
		}
		j, err := r.judged(it)
		if err != nil {
			return nil, err
		}
		if len(reg.Items) == 0 && !within && !it.Force {
			dirty = [chart.Roles]bool{true, true} // what changed is that a result before this one left
		}
		reg.Items = append(reg.Items, j)
		for role := range since {
			switch role := chart.Role(role); {
			case j.counts(role) && (within || j.differs(role)):
				since[role], dirty[role] = 0, true
			case j.Traces[role].Point && !it.Repeat:
				since[role]++
			}
		}
		if !within && !j.VerdictChanged && !j.StateChanged && !it.Force && r.settled(since, dirty) {
			reg.Agrees = true
			return reg, nil
		}
	}
}

// judged judges one item and compares it with what is stored.
func (r *Runner) judged(it *Item) (*Judged, error) {
	o, err := r.Step(it)
	if err != nil {
		return nil, err
	}
	j := &Judged{Item: it, Outcome: *o, Verdict: o.Encode(), Began: r.began, VerdictChanged: true, StateChanged: true}
	if it.Stored == nil {
		return j, nil
	}
	j.VerdictChanged = it.Stored.Version != o.Version || !bytes.Equal(it.Stored.Verdict, j.Verdict)
	j.StateChanged = !bytes.Equal(it.Stored.State, o.State)
	if j.VerdictChanged {
		j.was, err = Decode(it.Stored.Verdict)
	}
	return j, err
}

// differs reports whether the item's point on a trace is another than the stored one.
func (j *Judged) differs(role chart.Role) bool {
	if j.Item.Force || j.Item.Stored == nil {
		return true
	}
	return j.was != nil && j.was.Traces[role] != j.Traces[role]
}

// counts reports whether the item is or was a point of a trace, which later hits could refer to.
func (j *Judged) counts(role chart.Role) bool {
	is := j.Traces[role].Point
	was := is
	if j.was != nil {
		was = j.was.Traces[role].Point
	}
	s := j.Item.Stored
	return is && !j.Item.Repeat || s != nil && was && !s.Repeat
}

// oldHits are the stored hits of the item.
func (j *Judged) oldHits() []Hit {
	switch {
	case j.Item.Stored == nil || j.Item.Stored.Repeat:
		return nil
	case j.was != nil:
		return j.was.Hits
	}
	return j.Hits
}

// beginsSegment reports whether the item begins a segment that lies wholly behind until: a result taken from the new
// segment may have been its first.
func (r *Runner) beginsSegment(it *Item, until []byte) bool {
	span := r.timeline.At(it.At)
	if span == r.span {
		return false
	}
	if isBreak, _ := r.timeline.boundary(r.span, span); !isBreak {
		return false
	}
	for !r.timeline.Spans[span].Break {
		span-- // a version of the same numbers only continues the segment
	}
	return bytes.Compare(until, definition.KeyTime(r.timeline.Spans[span].From)) <= 0
}

// settled reports whether no coming hit can refer to a changed point.
func (r *Runner) settled(since [chart.Roles]int, dirty [chart.Roles]bool) bool {
	for role := range since {
		if dirty[role] && since[role] < r.reach(chart.Role(role)) {
			return false
		}
	}
	return true
}

// NewlyStops reports whether the item asks for a stop now and did not as stored.
func (j *Judged) NewlyStops() bool {
	if j.Standing != judge.StopAt || !j.VerdictChanged {
		return false
	}
	return j.was == nil || j.was.Standing != judge.StopAt
}
