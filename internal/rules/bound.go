package rules

import (
	"math"
	"math/bits"

	"limitary/internal/decimal"
)

// JudgeBound takes one point of which only a bound is known: the value lies below x (decimal.Below) or above it
// (decimal.Above). A rule about the point's own place completes where the bound proves it; for a run the point has a
// side if the bound fixes one, and ends the run if not; it is never part of a trend, an alternation, an EWMA or a CUSUM.
//
// Proven is false where a rule that the bound leaves open could be worse than everything it proves: then the point is
// no point, hit is not called and the state stays as it was.
func (p *Plan) JudgeBound(st *State, x float64, bound decimal.Bound, at Scale, hit func(Hit)) (proven bool) {
	lines := p.linesAt(st, at)
	for i, f := range p.bits {
		st.now[i] = 0
		if f.provenBy(x, bound, lines[i]) {
			st.now[i] = 1
		}
	}
	worst, open := Consequence(0), Consequence(0)
	for k := range p.steps {
		s := &p.steps[k]
		c := p.specs[s.rule].Consequence
		st.found[k] = found{}
		if s.slot < 0 {
			st.found[k] = p.complete(st, s)
		}
		if f := st.found[k]; f.upper|f.lower|f.none != 0 {
			worst = max(worst, c)
		} else if p.open(st, s, lines, x, bound) {
			open = max(open, c)
		}
	}
	if open > worst {
		return false
	}
	for k := range p.steps {
		p.report(st, k, 0, 0, hit)
	}
	p.advance(st, 1)
	p.passBy(st)
	st.hasLast = false
	return true
}

// passBy lets a point go by that enters no CUSUM: it lies between the point where a sum began and the next one.
func (p *Plan) passBy(st *State) {
	for k := range p.steps {
		s := &p.steps[k]
		if s.slot < 0 || p.specs[s.rule].Kind != CUSUM {
			continue
		}
		for since := s.slot + 2; since < s.slot+cusumSlots; since++ {
			if st.slots[since] > 0 {
				st.slots[since]++
			}
		}
	}
}

// provenBy reports whether every value the bound allows has the feature.
func (f feature) provenBy(x float64, bound decimal.Bound, t threshold) bool {
	switch f.kind {
	case above, aboveAction, aboveWarning:
		return bound == decimal.Above && x > t.lo
	case below, belowAction, belowWarning:
		return bound == decimal.Below && x < t.hi
	}
	return false // inside two lines, rising and falling need the value
}

// open reports whether a rule about the point's own place might complete for some value the bound allows. Rounding
// keeps order, so a value below x is, once rounded, not above a line that x is not above.
func (p *Plan) open(st *State, s *step, lines []threshold, x float64, bound decimal.Bound) bool {
	spec := &p.specs[s.rule]
	// lacking reports whether the point itself is all that a side of the rule waits for.
	lacking := func(feature, opposite int, unwatched Sides) bool {
		switch {
		case feature < 0 || spec.Sides == unwatched || st.now[feature] != 0:
			return false
		case spec.Kind == Beyond:
			return st.before(feature, spec.M-1) >= spec.K-1
		case spec.Kind == Span:
			return st.before(opposite, 1) == 1
		}
		return spec.Kind == BeyondLine
	}
	if lacking(s.upper, s.lower, LowerOnly) {
		lo := lines[s.upper].lo
		if bound == decimal.Above && !math.IsInf(lo, 1) || bound == decimal.Below && x > lo {
			return true
		}
	}
	if lacking(s.lower, s.upper, UpperOnly) {
		hi := lines[s.lower].hi
		if bound == decimal.Below && !math.IsInf(hi, -1) || bound == decimal.Above && x < hi {
			return true
		}
	}
	return false
}

// before counts the points with a feature among the latest n before the newest.
func (st *State) before(feature, n int) int {
	if n == 0 {
		return 0
	}
	return bits.OnesCount64(st.past[feature] >> (64 - n))
}
