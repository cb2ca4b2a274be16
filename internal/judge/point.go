package judge

import (
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// Point is one result to judge.
type Point struct {
	// Readings are the values of the subgroup, finite; one for an individuals chart or a statistic plotted as given;
	// none where there is no result.
	Readings []float64
	// Bounds has a bound for each reading, or is nil where all are measured.
	Bounds []decimal.Bound
	// Count is what a chart of counts has in place of readings, as chart.Kind.CheckCount allows it.
	Count *chart.Count
	// Material names the level of a standardised track.
	Material string
	// Centre and Sigma of the plotted statistic where they differ from the chart's; statistics as given only.
	Centre, Sigma *float64
	// Break starts a new segment here.
	Break bool
}

// Standing is what the judge says of a result: the worst consequence of the rules that complete there.
type Standing uint8

const (
	// NotJudged is never clear.
	NotJudged Standing = iota
	// Clear: judged, and no rule completed.
	Clear
	// LookAt, ActOn and StopAt are the consequences.
	LookAt
	ActOn
	StopAt
)

// String is the name used in output and storage.
func (s Standing) String() string {
	return [...]string{"NOT_JUDGED", "CLEAR", "LOOK", "ACT", "STOP"}[min(int(s), 4)]
}

// Reason says why a result was not judged.
type Reason uint8

const (
	// Judged is the reason of a result that was judged.
	Judged Reason = iota
	// NoResult: there are no readings.
	NoResult
	// NoVersion: no version was in force when it was measured.
	NoVersion
	// TooFewReadings: fewer than any trace needs.
	TooFewReadings
	// BoundProvesNothing: a less-than or greater-than result that leaves open what it would be, or that no rule watches.
	BoundProvesNothing
	// Voided: the result was voided.
	Voided
	// NoScale: nothing says how far such a result may lie from the centre. Its material is no level of the standardised
	// track, or its relative range has a mean of zero.
	NoScale
)

// String is the name used in output and storage.
func (r Reason) String() string {
	return [...]string{"", "NO_RESULT", "NO_VERSION_IN_FORCE", "TOO_FEW_READINGS", "BOUND_PROVES_NOTHING", "VOIDED", "NO_SCALE"}[min(int(r), 6)]
}

// Hit is one rule completing at a result. Backs count points of the hit's trace, see rules.Hit.
type Hit struct {
	Role chart.Role
	// Rule is the index in the trace's rules.
	Rule                  int
	Side                  rules.Side
	WindowBack, FirstBack int
}

// Verdict is what the judge says of one result.
type Verdict struct {
	Standing Standing
	Reason   Reason
	// ByBound marks a verdict that a bound proves.
	ByBound bool
	Traces  [chart.Roles]TraceVerdict
	// Hits of both traces, location first, in the order of the rules.
	Hits []Hit
}

// TraceVerdict is the point of one trace.
type TraceVerdict struct {
	// Point is false where the trace has no point at the result; the other fields are then zero.
	Point bool
	// Statistic is rounded as published; where the verdict is ByBound it is the bound.
	Statistic float64
	Scale     rules.Scale
}

// State is what the judge remembers of the current segment. It belongs to one Judge and one goroutine.
type State struct {
	traces  [chart.Roles]*rules.State
	aside   *State
	prev    float64
	hasPrev bool
	// readings and bounds are scratch for one point on the judged scale.
	readings []float64
	bounds   []decimal.Bound
}

// NewState gives the state before the first point of a segment.
func (j *Judge) NewState() *State {
	st := &State{}
	for role, p := range j.plans {
		if p != nil {
			st.traces[role] = p.Start(false)
		}
	}
	return st
}

// Reset starts a new segment. HeadStart lets CUSUMs begin at their head start: at the start of a version, and after a
// mark that asks for it.
func (j *Judge) Reset(st *State, headStart bool) {
	st.hasPrev = false
	for role, p := range j.plans {
		if p != nil {
			p.Reset(st.traces[role], headStart)
		}
	}
}

// Judge gives the verdict on the next point and takes the point into the state, if it is one. V is overwritten; its
// Hits are reused.
func (j *Judge) Judge(st *State, pt Point, v *Verdict) {
	*v = Verdict{Hits: v.Hits[:0]}
	if pt.Break {
		j.Reset(st, false)
	}
	if len(pt.Readings) == 0 && pt.Count == nil {
		v.Reason = NoResult
		return
	}
	if !j.straight {
		var ok bool
		if pt, ok = j.onScale(st, pt); !ok {
			v.Reason = NoScale
			return
		}
	}
	if bound, any := pt.bound(); any {
		j.judgeBound(st, pt, bound, v)
		return
	}
	if x, scale, ok := j.location(pt); ok {
		j.point(st, chart.Location, x, scale, v)
	}
	if x, scale, ok := j.dispersion(st, pt); ok {
		j.point(st, chart.Dispersion, x, scale, v)
	} else if j.limits.Kind == chart.RelativeRange && len(pt.Readings) > 1 {
		v.Reason = NoScale
		return
	}
	if len(pt.Readings) > 0 {
		st.prev, st.hasPrev = pt.Readings[0], true
	}
	if !j.watched(v) {
		v.Reason = TooFewReadings
		return
	}
	j.conclude(v)
}

// watched reports whether a trace that has a point here has rules: where nothing looked, nothing is clear.
func (j *Judge) watched(v *Verdict) bool {
	for role, t := range v.Traces {
		if t.Point && len(j.plans[role].Specs()) > 0 {
			return true
		}
	}
	return false
}

// Aside gives the verdict a repeat would have as the next point, and leaves the state as it is.
func (j *Judge) Aside(st *State, pt Point, v *Verdict) {
	if st.aside == nil {
		st.aside = j.NewState()
	}
	j.CopyState(st.aside, st)
	j.Judge(st.aside, pt, v)
}

// CopyState makes dst, a state of this judge, equal to src.
func (j *Judge) CopyState(dst, src *State) {
	for role, t := range src.traces {
		if t != nil {
			dst.traces[role].CopyFrom(t)
		}
	}
	dst.prev, dst.hasPrev = src.prev, src.hasPrev
}

func (j *Judge) point(st *State, role chart.Role, x float64, scale rules.Scale, v *Verdict) {
	v.Traces[role] = TraceVerdict{Point: true, Statistic: x, Scale: scale}
	one, at := [1]float64{x}, [1]rules.Scale{scale}
	j.plans[role].Judge(st.traces[role], one[:], at[:], func(h rules.Hit) {
		v.Hits = append(v.Hits, Hit{role, h.Rule, h.Side, h.WindowBack, h.FirstBack})
	})
}

func (j *Judge) conclude(v *Verdict) {
	v.Standing = Clear
	for _, h := range v.Hits {
		consequence := j.plans[h.Role].Specs()[h.Rule].Consequence
		v.Standing = max(v.Standing, StandingOf(consequence))
	}
}

// StandingOf gives the standing a consequence leads to.
func StandingOf(c rules.Consequence) Standing { return Clear + Standing(c) }

// watchesBounds reports whether a bound can enter a rule of the trace. It enters no trend, alternation, EWMA or CUSUM:
// where a trace has no other rules, nothing looks at a bound, and it is not clear.
func watchesBounds(p *rules.Plan) bool {
	return p != nil && slices.ContainsFunc(p.Specs(), func(s rules.Spec) bool {
		switch s.Kind {
		case rules.Trend, rules.Alternating, rules.EWMA, rules.CUSUM:
			return false
		}
		return true
	})
}

// judgeBound judges a result of which only a bound is known. It has a location point where the bound proves a verdict
// and a rule watches it, and never one of dispersion.
func (j *Judge) judgeBound(st *State, pt Point, bound decimal.Bound, v *Verdict) {
	v.Reason = BoundProvesNothing
	x, scale, ok := j.location(pt)
	if !ok || bound == decimal.Measured || !j.boundsWatched {
		return
	}
	proven := j.plans[chart.Location].JudgeBound(st.traces[chart.Location], x, bound, scale, func(h rules.Hit) {
		v.Hits = append(v.Hits, Hit{chart.Location, h.Rule, h.Side, h.WindowBack, h.FirstBack})
	})
	if !proven {
		return
	}
	v.Reason, v.ByBound = Judged, true
	v.Traces[chart.Location] = TraceVerdict{Point: true, Statistic: x, Scale: scale}
	st.hasPrev = false
	j.conclude(v)
}

// bound gives the bound on the mean of the readings; any is false where all are measured. Bounds of both directions in
// one subgroup bound nothing, and the answer is then Measured.
func (pt Point) bound() (b decimal.Bound, any bool) {
	for _, each := range pt.Bounds {
		switch {
		case each == decimal.Measured:
		case !any:
			b, any = each, true
		case each != b:
			return decimal.Measured, true
		}
	}
	return b, any
}
