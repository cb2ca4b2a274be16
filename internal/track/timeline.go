// Package track judges the ordered results of one track under the versions and marks of its timeline, and finds what a
// change to one of them does to verdicts and signals.
//
// Everything here is a pure function of results, versions and marks. Whole judges a track from its first result;
// Region judges from a changed place on, resuming the state stored before it, until what it finds agrees with what is
// stored. Both give the same, which is what makes the state of a track depend on what was posted and not on how.
package track

import (
	"slices"
	"sort"
	"time"

	"limitary/internal/definition"
	"limitary/internal/judge"
)

// Version is a version of limits ready to judge. It is immutable.
type Version struct {
	definition.Content
	Compiled  *judge.Judge
	Withdrawn bool
}

// Mark is an event that can end a segment.
type Mark struct {
	At  time.Time
	Lot string
	// Break starts a new segment, Restart one in which CUSUMs begin at their head start.
	Break, Restart bool
}

// Span is a stretch of a track's time axis, up to the next span, in which one version is in force.
type Span struct {
	// From is the first moment of the span; zero is the beginning of time.
	From time.Time
	// Version is nil where none is in force.
	Version *Version
	// Break starts a new segment; HeadStart lets its CUSUMs begin at their head start.
	Break, HeadStart bool
}

// Timeline is the succession of spans of one track.
type Timeline struct{ Spans []Span }

// BuildTimeline puts together the timeline of a lot's track from the versions approved for its chart, withdrawn ones
// included, and the marks that were not voided.
//
// In force at a moment is the version with the latest effective-from not after it, for the lot or for every lot, the
// higher number where two begin together. Withdrawing it leaves nothing in force until the next begins. A version with
// the numbers of the one before it continues that one's segment.
func BuildTimeline(lot string, versions []*Version, marks []Mark) Timeline {
	applies := func(of string) bool { return of == "" || of == lot }
	moments := []time.Time{{}}
	var mine []*Version
	for _, v := range versions {
		if applies(v.Lot) {
			mine = append(mine, v)
			moments = append(moments, v.EffectiveFrom)
		}
	}
	for _, m := range marks {
		if applies(m.Lot) && (m.Break || m.Restart) {
			moments = append(moments, m.At)
		}
	}
	slices.SortFunc(moments, time.Time.Compare)
	moments = slices.CompactFunc(moments, time.Time.Equal)
	var t Timeline
	for i, at := range moments {
		span := Span{From: at, Version: inForce(mine, at)}
		if i > 0 {
			span.join(t.Spans[i-1])
		}
		for _, m := range marks {
			if applies(m.Lot) && m.At.Equal(at) && (m.Break || m.Restart) {
				span.Break, span.HeadStart = true, span.HeadStart || m.Restart
			}
		}
		t.Spans = append(t.Spans, span)
	}
	return t
}

// join decides whether the span continues the segment of the one before it.
func (s *Span) join(before Span) {
	switch {
	case s.Version == nil:
		s.Break = before.Version != nil
	case before.Version == nil || !s.Version.SameNumbers(before.Version.Content):
		s.Break, s.HeadStart = true, true
	}
}

func inForce(versions []*Version, at time.Time) *Version {
	var best *Version
	for _, v := range versions {
		if v.EffectiveFrom.After(at) {
			continue
		}
		if best == nil || v.EffectiveFrom.After(best.EffectiveFrom) ||
			v.EffectiveFrom.Equal(best.EffectiveFrom) && v.Number > best.Number {
			best = v
		}
	}
	if best == nil || best.Withdrawn {
		return nil
	}
	return best
}

// At gives the index of the span a moment lies in.
func (t Timeline) At(moment time.Time) int {
	return sort.Search(len(t.Spans), func(i int) bool { return t.Spans[i].From.After(moment) }) - 1
}

// InForce gives the version in force at a moment, nil where there is none.
func (t Timeline) InForce(moment time.Time) *Version {
	if i := t.At(moment); i >= 0 {
		return t.Spans[i].Version
	}
	return nil
}

// SegmentStart gives the first moment of the segment that a moment lies in; zero is the beginning of time.
func (t Timeline) SegmentStart(moment time.Time) time.Time {
	i := t.At(moment)
	for i > 0 && !t.Spans[i].Break {
		i--
	}
	if i < 0 {
		return time.Time{}
	}
	return t.Spans[i].From
}

// boundary reports whether a new segment starts after span a, up to and including span b, and whether it starts at head
// starts.
func (t Timeline) boundary(a, b int) (isBreak, headStart bool) {
	for i := a + 1; i <= b; i++ {
		if t.Spans[i].Break {
			isBreak, headStart = true, t.Spans[i].HeadStart
		}
	}
	return isBreak, headStart
}
