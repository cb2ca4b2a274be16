package rules

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Scale is the centre and sigma of the plotted statistic at one point.
type Scale struct {
	Centre, Sigma float64
	// Inspected is how much was looked at, where the statistic is a count or comes from one; else 0.
	Inspected float64
}

// LineFunc gives the unrounded line z sigmas above the centre, z not 0, where lines do not simply follow from centre and
// sigma; infinite where nothing can lie beyond it.
type LineFunc func(at Scale, z float64) float64

// Plan is a list of rules compiled for one trace. It is immutable and safe for concurrent use.
type Plan struct {
	specs   []Spec
	bits    []feature
	steps   []step
	trace   chart.Trace
	places  int
	nominal Scale
	// lineAt is nil where lines follow from centre and sigma.
	lineAt LineFunc
	// lines are the nominal thresholds, one an entry of bits.
	lines []threshold
	// gates are the keys of the nominal lines in order, reads the gates of each entry of bits.
	gates []uint64
	reads []reads
	// window is the longest window of any rule in points; the state remembers window-1 points.
	window int
	// slots is the number of accumulators of EWMA and CUSUM rules.
	slots int
	// arms is the number of CUSUM rules.
	arms int
	// differences is set where a rule compares neighbours.
	differences bool
}

// feature is one bit known of every point.
type feature struct {
	kind featureKind
	z    float64
}

type featureKind uint8

const (
	above featureKind = iota
	below
	inside
	aboveAction
	belowAction
	aboveWarning
	belowWarning
	rising
	falling
)

// threshold bounds a feature: above is x > lo, below is x < hi, inside is both.
type threshold struct{ lo, hi float64 }

// step is a rule with the positions of its features in Plan.bits and its accumulators in State.slots.
type step struct {
	rule         int
	upper, lower int // the upper and lower (or rising and falling) feature; -1 where the side is not watched
	inside       int
	slot, arms   int
}

// Compile checks the rules against each other and the trace, and prepares them. Places is the number of published
// decimals that lines are rounded to, or decimal.Unrounded. Errors are *SpecError, the field prefixed "rules[i].".
func Compile(trace chart.Trace, places int, specs []Spec) (*Plan, error) {
	return CompileLines(trace, places, specs, 0, nil)
}

// CompileLines is Compile for a trace whose lines are given by a function. Inspected is that of a nominal point.
func CompileLines(trace chart.Trace, places int, specs []Spec, inspected float64, lineAt LineFunc) (*Plan, error) {
	p := &Plan{specs: append([]Spec(nil), specs...), trace: trace, places: places, lineAt: lineAt, window: 1}
	p.nominal.Inspected = inspected
	if err := p.check(); err != nil {
		return nil, err
	}
	if trace.Centre != nil {
		p.nominal.Centre = *trace.Centre
	}
	if trace.Sigma != nil {
		p.nominal.Sigma = *trace.Sigma
	}
	for i, s := range p.specs {
		p.window = max(p.window, s.Window())
		p.steps = append(p.steps, p.step(i, s))
	}
	p.lines = make([]threshold, len(p.bits))
	p.thresholds(p.nominal, p.lines)
	p.setGates()
	return p, nil
}

func (p *Plan) check() error {
	bad := func(i int, field, format string, args ...any) error {
		return &SpecError{fmt.Sprintf("rules[%d].%s", i, field), fmt.Sprintf(format, args...)}
	}
	if len(p.specs) > RulesMax {
		return &SpecError{"rules", fmt.Sprintf("%d rules, the limit is %d", len(p.specs), RulesMax)}
	}
	seen := map[string]int{}
	for i, s := range p.specs {
		if err := s.Check(); err != nil {
			e := err.(*SpecError)
			return bad(i, e.Field, "%s", e.Problem)
		}
		if j, twice := seen[s.ID]; twice {
			return bad(i, "id", "%q is already the id of rules[%d]", s.ID, j)
		}
		seen[s.ID] = i
		if s.NeedsCentre() && p.trace.Centre == nil {
			return bad(i, "rule", "%s needs a centre, and the trace has none", s.ID)
		}
		if s.NeedsSigma() && p.trace.Sigma == nil {
			return bad(i, "rule", "%s measures in sigmas, and the trace has no sigma", s.ID)
		}
	}
	return nil
}

// step assigns the features a rule reads, sharing those that several rules read.
func (p *Plan) step(i int, s Spec) step {
	st := step{rule: i, upper: -1, lower: -1, inside: -1, slot: -1}
	pair := func(up, down feature) {
		if s.Sides != LowerOnly {
			st.upper = p.feature(up)
		}
		if s.Sides != UpperOnly {
			st.lower = p.feature(down)
		}
	}
	switch s.Kind {
	case Beyond, Outside:
		pair(feature{above, s.Z}, feature{below, s.Z})
	case SameSide:
		pair(feature{above, 0}, feature{below, 0})
	case BeyondLine:
		if s.Line == ActionLine {
			pair(feature{kind: aboveAction}, feature{kind: belowAction})
		} else {
			pair(feature{kind: aboveWarning}, feature{kind: belowWarning})
		}
	case Trend:
		p.differences = true
		pair(feature{kind: rising}, feature{kind: falling})
	case Alternating:
		p.differences = true
		st.upper, st.lower = p.feature(feature{kind: rising}), p.feature(feature{kind: falling})
	case Within:
		st.inside = p.feature(feature{inside, s.Z})
	case Span:
		// Both halves are read whatever side is watched: the predecessor lies on the other one.
		st.upper, st.lower = p.feature(feature{above, s.Z / 2}), p.feature(feature{below, s.Z / 2})
	case EWMA:
		st.slot, p.slots = p.slots, p.slots+ewmaSlots
	case CUSUM:
		st.slot, p.slots = p.slots, p.slots+cusumSlots
		st.arms, p.arms = p.arms, p.arms+1
	}
	return st
}

func (p *Plan) feature(f feature) int {
	for i, have := range p.bits {
		if have == f {
			return i
		}
	}
	p.bits = append(p.bits, f)
	return len(p.bits) - 1
}

// thresholds fills into with the bounds of every feature at a scale.
func (p *Plan) thresholds(at Scale, into []threshold) {
	for i, f := range p.bits {
		switch f.kind {
		case above:
			into[i].lo = p.line(at, f.z)
		case below:
			into[i].hi = p.line(at, -f.z)
		case inside:
			into[i] = threshold{p.line(at, -f.z), p.line(at, f.z)}
		case aboveAction:
			into[i].lo = p.upper(p.trace.UpperAction, at, chart.ActionMultiple)
		case belowAction:
			into[i].hi = p.lower(p.trace.LowerAction, at, chart.ActionMultiple)
		case aboveWarning:
			into[i].lo = p.upper(p.trace.UpperWarning, at, chart.WarningMultiple)
		case belowWarning:
			into[i].hi = p.lower(p.trace.LowerWarning, at, chart.WarningMultiple)
		}
	}
}

// linesAt gives the thresholds at a scale.
func (p *Plan) linesAt(st *State, at Scale) []threshold {
	if at == p.nominal {
		return p.lines
	}
	if !st.sized || at != st.linesAt {
		p.thresholds(at, st.lines)
		st.linesAt, st.sized = at, true
	}
	return st.lines
}

func (p *Plan) line(at Scale, z float64) float64 {
	switch {
	case z == 0:
		return decimal.Round(at.Centre, p.places)
	case p.lineAt != nil:
		return p.rounded(p.lineAt(at, z))
	}
	return decimal.Line(at.Centre, z, at.Sigma, p.places)
}

// rounded leaves a line that does not exist at infinity.
func (p *Plan) rounded(line float64) float64 {
	if math.IsInf(line, 0) {
		return line
	}
	return decimal.Round(line, p.places)
}

func (p *Plan) upper(l chart.Line, at Scale, multiple float64) float64 {
	if v, ok := p.Where(l, at, multiple); ok {
		return v
	}
	return math.Inf(1) // nothing is above a line that does not exist
}

func (p *Plan) lower(l chart.Line, at Scale, multiple float64) float64 {
	if v, ok := p.Where(l, at, -multiple); ok {
		return v
	}
	return math.Inf(-1)
}

// Where gives the position of a line at a scale, rounded as published; ok is false where there is no such line.
func (p *Plan) Where(l chart.Line, at Scale, multiple float64) (value float64, ok bool) {
	switch {
	case l.Basis == chart.Absent:
		return 0, false
	case l.Fixed() && (l.Basis != chart.TailProbability || p.lineAt == nil):
		return decimal.Round(l.Value, p.places), true
	case p.trace.Centre == nil || p.trace.Sigma == nil:
		return 0, false
	case p.lineAt != nil:
		value = p.rounded(p.lineAt(at, multiple))
		return value, !math.IsInf(value, 0)
	}
	return decimal.Line(at.Centre, multiple, at.Sigma, p.places), true
}

// Specs gives the rules in their order. The caller must not change them.
func (p *Plan) Specs() []Spec { return p.specs }

// Nominal gives the scale of a full subgroup.
func (p *Plan) Nominal() Scale { return p.nominal }

// Window gives the longest window of any rule, in points. A difference in one point changes no hit of a windowed rule
// further away than this.
func (p *Plan) Window() int { return p.window }
