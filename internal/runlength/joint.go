package runlength

import (
	"math"
	"slices"

	"limitary/internal/rules"
	"limitary/internal/runlength/automaton"
	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/effort"
	"limitary/internal/runlength/forward"
)

// joint is a chart of individuals with moving ranges. A moving range is the distance of two neighbours, so the place of
// the latest point inside its panel is carried, as for rules that look at order; panels are parts of the zones, linear
// in the value, and end where a distance that a rule names reaches from the end of another.
type joint struct {
	location, spread *model
	machine          *automaton.DFA
	edges            []float64
	moves            [][]automaton.Move
	// distances between neighbours at which the class of a moving range changes, in sigmas.
	distances []float64
	memory    int
}

const (
	// jointReach is where the outermost panels end, in standard deviations of the points beyond the shift: less than
	// 1e-15 lies outside, and counts for nothing.
	jointReach = 8.2
	// jointWidth is the widest panel in sigmas, jointWidthLeast the narrowest that a break may make.
	jointWidth, jointWidthLeast = 1.6, 1e-6
	// jointGenerations is how often breaks are carried on by the distance, where there is one; with several distances one
	// generation has to do, and more terms make up for it.
	jointGenerations = 2
)

// newJoint prepares individuals with moving ranges.
func newJoint(w automaton.Work, r *Request, continuing bool) (*joint, error) {
	j := &joint{memory: 2}
	for _, s := range slices.Concat(r.Location.Rules, r.Dispersion.Rules) {
		if accumulates(s) {
			return nil, errOutOfReach
		}
		j.memory = max(j.memory, s.Window()+1)
	}
	for _, s := range r.Dispersion.Rules {
		if looksAtOrder(s) {
			return nil, errOutOfReach
		}
	}
	j.location = &model{specs: r.Location.Rules, lines: r.Location.lines()}
	j.spread = &model{specs: r.Dispersion.Rules, lines: r.Dispersion.lines()}
	for _, m := range []*model{j.location, j.spread} {
		m.alphabet = newAlphabet(m.specs, m.lines, false)
	}
	centre, sigma := r.spreadScale()
	for _, z := range j.spread.alphabet.lines {
		j.distances = append(j.distances, centre+sigma*z) // not positive: a line no range can pass from above
	}
	j.lay(r, continuing)
	zone, order, err := j.location.join(w, continuing)
	if err != nil {
		return nil, reach(err)
	}
	classes, _, err := j.spread.join(w, continuing)
	if err != nil {
		return nil, reach(err)
	}
	j.listMoves(order != nil)
	j.machine, err = automaton.Carry(w, zone, order, classes, j.moves)
	return j, reach(err)
}

// lay sets the edges of the panels.
func (j *joint) lay(r *Request, continuing bool) {
	lo, hi := 0.0, 0.0
	for _, shift := range append([]float64{0}, r.Shifts...) {
		shift *= r.perShift()
		spread := jointReach * max(1, r.SigmaRatio)
		lo, hi = min(lo, shift-spread), max(hi, shift+spread)
	}
	if !continuing {
		limits := j.limits()
		lo, hi = max(lo, limits[0]), min(hi, limits[1])
	}
	latest := append([]float64{lo, hi}, j.location.alphabet.lines...)
	edges := slices.Clone(latest)
	generations := jointGenerations
	if len(j.distances) > 1 {
		generations = 1
	}
	for range generations {
		var next []float64
		for _, e := range latest {
			for _, d := range j.distances {
				next = append(next, e-d, e+d)
			}
		}
		edges, latest = append(edges, next...), next
	}
	slices.Sort(edges)
	j.edges = nil
	for _, e := range edges {
		if e < lo || e > hi || len(j.edges) > 0 && e-j.edges[len(j.edges)-1] < jointWidthLeast {
			continue
		}
		if n := len(j.edges); n > 0 {
			last := j.edges[n-1]
			parts := math.Ceil((e - last) / jointWidth)
			for i := 1.0; i < parts; i++ {
				j.edges = append(j.edges, last+(e-last)*i/parts)
			}
		}
		j.edges = append(j.edges, e)
	}
}

// limits gives the places beyond which a single point signals, so that no latest point lies there.
func (j *joint) limits() [2]float64 {
	out := [2]float64{math.Inf(-1), math.Inf(1)}
	for _, s := range j.location.specs {
		if !looksAtOnePoint(s) {
			continue
		}
		lo, hi := -s.Z, s.Z
		if s.Kind == rules.BeyondLine {
			lo, hi = j.location.lines.of(s.Line)
		}
		if s.Sides != rules.LowerOnly {
			out[1] = min(out[1], hi)
		}
		if s.Sides != rules.UpperOnly {
			out[0] = max(out[0], lo)
		}
	}
	return out
}

// panels gives the number of panels.
func (j *joint) panels() int { return len(j.edges) - 1 }

// zoneOf gives the zone a panel lies in.
func (j *joint) zoneOf(panel int) int {
	mid := (j.edges[panel] + j.edges[panel+1]) / 2
	at, _ := slices.BinarySearch(j.location.alphabet.lines, mid)
	return at
}

// span is a class of distances: more than from, less than to.
type span struct {
	class    int
	from, to float64
}

// spans gives the classes of moving ranges that two panels allow.
func (j *joint) spans(a, b int) (list []span) {
	least := max(0, j.edges[max(a, b)]-j.edges[min(a, b)+1])
	most := j.edges[max(a, b)+1] - j.edges[min(a, b)]
	for class := range len(j.distances) + 1 {
		s := span{class, math.Inf(-1), math.Inf(1)}
		if class > 0 {
			s.from = j.distances[class-1]
		}
		if class < len(j.distances) {
			s.to = j.distances[class]
		}
		if s.from < most-jointWidthLeast && s.to > least+jointWidthLeast {
			list = append(list, s)
		}
	}
	return list
}

// listMoves lists the letters of every panel.
func (j *joint) listMoves(ordered bool) {
	n := j.panels()
	for a := range n {
		var moves []automaton.Move
		for b := range n {
			for _, s := range j.spans(a, b) {
				move := automaton.Move{Panel: b, Zone: j.zoneOf(b), Order: -1, Class: s.class}
				switch {
				case !ordered:
					moves = append(moves, move)
				case a != b:
					move.Order = automaton.Rising
					if b < a {
						move.Order = automaton.Falling
					}
					moves = append(moves, move)
				default:
					rise, fall := move, move
					rise.Order, fall.Order = automaton.Rising, automaton.Falling
					moves = append(moves, rise, fall)
				}
			}
		}
		j.moves = append(j.moves, moves)
	}
	var start []automaton.Move
	for b := range n {
		start = append(start, automaton.Move{Panel: b, Zone: j.zoneOf(b), Order: -1, Class: -1})
	}
	j.moves = append(j.moves, start)
}

// jointNodes is the quadrature over a part of a panel.
const jointNodes = 24

// jointTerms are the numbers of Legendre terms tried in turn, until the mean changes by less than cutTolerance.
var jointTerms = []int{6, 9, 13}

// curve gives the run length with more and more terms; the last change is the error told.
func (j *joint) curve(r run, meter *effort.Meter) (last curve.Curve, err error) {
	for i, terms := range jointTerms {
		c, err := j.with(terms, r, meter)
		if err != nil {
			return c, err
		}
		if i > 0 {
			change := math.Abs(c.Mean()/last.Mean() - 1)
			if c.RelativeError += change; change < cutTolerance {
				return c, nil
			}
		}
		last = c
	}
	return last, nil
}

func (j *joint) with(terms int, r run, meter *effort.Meter) (curve.Curve, error) {
	layout := j.layout(r.law, r.law, terms)
	if r.before == nil {
		return curve.Follow(j.leak(forward.NewPanelChain(j.machine, layout), r.law), j.memory, meter)
	}
	chain := forward.NewPanelChain(j.machine, j.layout(*r.before, *r.before, terms))
	before, err := curve.Follow(j.leak(chain, *r.before), j.memory, meter)
	if err != nil {
		return before, err
	}
	next := forward.Continue(chain, j.layout(*r.before, r.law, terms), layout)
	c, err := curve.Follow(j.leak(next, r.law), j.memory, meter)
	c.RelativeError += before.RelativeError
	return c, err
}

// leaking is a chain whose points may lie outside all panels, where they signal at once with the same probability from
// every state.
type leaking struct {
	*forward.PanelChain
	outside float64
}

// leak gives the chain of points under a law.
func (j *joint) leak(chain *forward.PanelChain, l law) *leaking {
	return &leaking{chain, l.Between(math.Inf(-1), j.edges[0]) + l.Between(j.edges[j.panels()], math.Inf(1))}
}

// Advance takes one point.
func (l *leaking) Advance() (signalled, misplaced float64) {
	out := l.Mass() * l.outside
	signalled, misplaced = l.PanelChain.Advance()
	return signalled + out, misplaced
}

// layout gives the maps from points under one law to points under another.
func (j *joint) layout(from, to law, terms int) *forward.Layout {
	out := &forward.Layout{Moves: j.moves, Terms: terms}
	for p := range j.panels() {
		out.Moments = append(out.Moments, j.moments(to, p, terms))
	}
	out.Moments = append(out.Moments, []float64{1})
	for a, moves := range j.moves {
		operators := make([]forward.Operator, len(moves))
		for i, move := range moves {
			if a < j.panels() {
				operators[i] = j.operator(from, a, move, terms)
			}
		}
		out.Operators = append(out.Operators, operators)
	}
	return out
}

// moments integrates P_0, P_1, ... over a panel.
func (j *joint) moments(l law, panel, terms int) []float64 {
	out := make([]float64, terms)
	j.integrate(l, panel, j.edges[panel], j.edges[panel+1], 1, out)
	return out
}

// integrate adds sign times the integrals of P_n of a panel over lo to hi to into.
func (j *joint) integrate(l law, panel int, lo, hi, sign float64, into []float64) {
	a, b := j.edges[panel], j.edges[panel+1]
	lo, hi = max(lo, a), min(hi, b)
	if lo >= hi {
		return
	}
	basis := make([]float64, len(into))
	ts, ws := forward.Nodes(jointNodes)
	mid, half := (lo+hi)/2, (hi-lo)/2
	for i, t := range ts {
		x := mid + half*t
		w := sign * half * ws[i] * l.Density(x)
		forward.Legendre((2*x-a-b)/(b-a), basis)
		for n, p := range basis {
			into[n] += w * p
		}
	}
}

// operator gives the map of one move: which places of the latest point in panel a lead to x in panel b with a moving
// range of the class, and above or below it where order counts.
func (j *joint) operator(l law, a int, move automaton.Move, terms int) forward.Operator {
	var class span
	all := j.spans(a, move.Panel)
	for _, s := range all {
		if s.class == move.Class {
			class = s
		}
	}
	if len(all) == 1 && a != move.Panel {
		return forward.Operator{Kind: forward.Whole}
	}
	bottom, top := j.edges[move.Panel], j.edges[move.Panel+1]
	return forward.Operator{Kind: forward.Mapped, Map: forward.Project(terms, terms, terms+4, func(t float64, into []float64) {
		x := (bottom+top)/2 + t*(top-bottom)/2
		if move.Order != automaton.Falling { // the latest point lies below
			j.integrate(l, a, x-class.to, min(x, x-class.from), 1, into)
		}
		if move.Order != automaton.Rising {
			j.integrate(l, a, max(x, x+class.from), x+class.to, 1, into)
		}
	})}
}
