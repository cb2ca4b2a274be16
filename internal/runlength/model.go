package runlength

import (
	"errors"
	"math"
	"slices"

	"limitary/internal/rules"
	"limitary/internal/runlength/automaton"
	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/data"
	"limitary/internal/runlength/effort"
	"limitary/internal/runlength/forward"
	"limitary/internal/runlength/integral"
)

// errOutOfReach says that no exact method fits; a simulation answers instead.
var errOutOfReach = errors.New("runlength: out of reach of the exact methods")

// model is the rules of one trace made ready: whatever does not depend on the distribution of the points.
type model struct {
	specs    []rules.Spec
	lines    Lines
	alphabet *alphabet
	// machine reads zones, or with ordered set the letters of moves.
	machine *automaton.DFA
	ordered bool
	moves   [][]automaton.Move
	// accumulator is the one EWMA or CUSUM; the other rules are then the limits lo and hi on single points.
	accumulator *rules.Spec
	lo, hi      float64
	memory      int
}

// modelKind says what a model is for: points rounded so that they lie on lines, a machine that goes on after a signal,
// or a distribution that changes during the run.
type modelKind struct{ rounded, continuing, changing bool }

// newModel prepares the rules of one trace.
func newModel(w automaton.Work, specs []rules.Spec, lines Lines, how modelKind) (*model, error) {
	m := &model{specs: specs, lines: lines, memory: 1}
	rounded, continuing := how.rounded, how.continuing
	for _, s := range specs {
		m.memory = max(m.memory, s.Window())
	}
	for i, s := range specs {
		if accumulates(s) {
			return m, m.accumulate(i, rounded || continuing)
		}
	}
	m.alphabet = newAlphabet(specs, lines, rounded)
	if how.changing && slices.ContainsFunc(specs, looksAtOrder) {
		m.alphabet.refine()
	}
	zone, order, err := m.join(w, continuing)
	if err != nil {
		return m, reach(err)
	}
	if order == nil {
		m.machine = zone
		return m, nil
	}
	if rounded {
		return m, errOutOfReach // equal neighbours are neither up nor down
	}
	m.ordered = true
	m.moves = orderMoves(m.alphabet.letters())
	m.machine, err = automaton.Carry(w, zone, order, nil, m.moves)
	return m, reach(err)
}

// reach turns the ways in which exact methods give up into one.
func reach(err error) error {
	if errors.Is(err, automaton.ErrTooLarge) || errors.Is(err, integral.ErrTooFine) {
		return errOutOfReach
	}
	return err
}

// join gives the machines over zones and over order; the latter is nil where no rule looks at order.
func (m *model) join(w automaton.Work, continuing bool) (zone, order *automaton.DFA, err error) {
	var zones, orders []*automaton.DFA
	for _, s := range m.specs {
		if looksAtOrder(s) {
			d, err := orderMachine(w, s, continuing)
			if err != nil {
				return nil, nil, err
			}
			orders = append(orders, d)
			continue
		}
		list, err := m.alphabet.machines(w, s, m.lines, continuing)
		if err != nil {
			return nil, nil, err
		}
		zones = append(zones, list...)
	}
	if zone, err = automaton.Join(w, m.alphabet.letters(), continuing, zones); err != nil || len(orders) == 0 {
		return zone, nil, err
	}
	order, err = automaton.Join(w, automaton.Orders, continuing, orders)
	return zone, order, err
}

// orderMoves lists the letters of panels that are whole zones: the next point in another zone, or above or below the
// latest one in the same.
func orderMoves(zones int) [][]automaton.Move {
	moves := make([][]automaton.Move, zones+1)
	for from := range moves {
		for to := range zones {
			switch move := (automaton.Move{Panel: to, Zone: to, Order: -1, Class: -1}); {
			case from == zones:
				moves[from] = append(moves[from], move)
			case from == to:
				rise, fall := move, move
				rise.Order, fall.Order = automaton.Rising, automaton.Falling
				moves[from] = append(moves[from], rise, fall)
			default:
				move.Order = automaton.Rising
				if to < from {
					move.Order = automaton.Falling
				}
				moves[from] = append(moves[from], move)
			}
		}
	}
	return moves
}

// accumulate prepares an EWMA or CUSUM with limits on single points beside it.
func (m *model) accumulate(index int, never bool) error {
	if never {
		return errOutOfReach
	}
	m.accumulator = &m.specs[index]
	m.lo, m.hi = math.Inf(-1), math.Inf(1)
	for i, s := range m.specs {
		if i == index {
			continue
		}
		if !looksAtOnePoint(s) {
			return errOutOfReach
		}
		lo, hi := -s.Z, s.Z
		if s.Kind == rules.BeyondLine {
			lo, hi = m.lines.of(s.Line)
		}
		if s.Sides != rules.LowerOnly {
			m.hi = min(m.hi, hi)
		}
		if s.Sides != rules.UpperOnly {
			m.lo = max(m.lo, lo)
		}
	}
	return nil
}

// law is the distribution of a point with its mean and standard deviation.
type law struct {
	data.Distribution
	mean, sd float64
}

// run is what a curve is computed for.
type run struct {
	law law
	// before is the law in control where the run starts from the steady state.
	before *law
	start  Start
}

// curve gives the distribution of the run length.
func (m *model) curve(r run, meter *effort.Meter) (curve.Curve, error) {
	switch {
	case m.accumulator != nil:
		c, err := m.accumulated(r, meter)
		return c, reach(err)
	case m.ordered:
		return m.orderedCurve(r, meter)
	}
	var state []float64
	var before curve.Curve
	if r.before != nil {
		chain := forward.NewZoneChain(m.machine, m.alphabet.probabilities(r.before.Distribution), nil)
		var err error
		if before, err = curve.Follow(chain, m.memory, meter); err != nil {
			return before, err
		}
		state = chain.State()
	}
	c, err := curve.Follow(forward.NewZoneChain(m.machine, m.alphabet.probabilities(r.law.Distribution), state), m.memory, meter)
	c.RelativeError += before.RelativeError
	return c, err
}

const (
	// termsFirst is how many Legendre terms a density may have at first, termsMore what is added while what they leave
	// out could be seen, termsMax where that ends.
	termsFirst, termsMore, termsMax = 12, 8, 44
	// cutTolerance is the relative error of the mean that more terms are meant to undercut.
	cutTolerance = 1e-10
)

// orderedCurve raises the number of terms until the error is small.
func (m *model) orderedCurve(r run, meter *effort.Meter) (c curve.Curve, err error) {
	for terms := termsFirst; ; terms += termsMore {
		if c, err = m.orderedWith(terms, r, meter); err != nil || c.RelativeError < cutTolerance || terms >= termsMax {
			return c, err
		}
	}
}

func (m *model) orderedWith(terms int, r run, meter *effort.Meter) (curve.Curve, error) {
	layout := m.layout(r.law, terms)
	if r.before == nil {
		return curve.Follow(forward.NewPanelChain(m.machine, layout), m.memory, meter)
	}
	chain := forward.NewPanelChain(m.machine, m.layout(*r.before, terms))
	before, err := curve.Follow(chain, m.memory, meter)
	if err != nil {
		return before, err
	}
	c, err := curve.Follow(forward.Continue(chain, m.changeLayout(*r.before, r.law, terms), layout), m.memory, meter)
	c.RelativeError += before.RelativeError
	return c, err
}

// layout gives the panels under a law.
func (m *model) layout(l law, terms int) *forward.Layout {
	probability := m.alphabet.probabilities(l.Distribution)
	out := &forward.Layout{Moves: m.moves, Terms: terms}
	for _, p := range probability {
		out.Moments = append(out.Moments, []float64{p})
	}
	out.Moments = append(out.Moments, []float64{1})
	for from, moves := range m.moves {
		operators := make([]forward.Operator, len(moves))
		for i, move := range moves {
			switch {
			case move.Panel != from:
				operators[i].Kind = forward.Whole
			case move.Order == automaton.Rising:
				operators[i].Kind = forward.Rise
			default:
				operators[i].Kind = forward.Fall
			}
		}
		out.Operators = append(out.Operators, operators)
	}
	return out
}

// changeNodes is the quadrature of the one step at which the law changes, where densities are no polynomials.
const changeNodes = 120

// changeLayout gives the step from a point under one law to the next under another: within a panel the place of the
// former in its u is read at the latter's value.
func (m *model) changeLayout(before, after law, terms int) *forward.Layout {
	out := m.layout(after, terms)
	for from, operators := range out.Operators {
		if from >= m.alphabet.letters() {
			continue
		}
		lo, hi := m.alphabet.bounds(from)
		old, fresh := before.Between(lo, hi), after.Between(lo, hi)
		if old == 0 || fresh == 0 {
			continue
		}
		place := func(t float64) float64 { // t of the same value under the law before
			x := invert(after.Distribution, lo, hi, (1+t)/2*fresh)
			return 2*before.Between(lo, x)/old - 1
		}
		for i := range operators {
			if operators[i].Kind == forward.Whole {
				continue
			}
			fall := operators[i].Kind == forward.Fall
			operators[i] = forward.Operator{Kind: forward.Mapped, Map: forward.Project(terms, terms, changeNodes, func(t float64, into []float64) {
				below(place(t), old, into)
				for n := range into {
					if fall {
						into[n] = -into[n]
					}
				}
				if fall {
					into[0] += old
				}
			})}
		}
	}
	return out
}

// below fills into with the integrals of P_n over the part of a panel of probability width that lies below t.
func below(t, width float64, into []float64) {
	p := make([]float64, len(into)+1)
	forward.Legendre(t, p)
	into[0] = width / 2 * (1 + t)
	for n := 1; n < len(into); n++ {
		into[n] = width / 2 * (p[n+1] - p[n-1]) / float64(2*n+1)
	}
}

// invert gives the x with P(lo < X < x) = p, by bisection.
func invert(d data.Distribution, lo, hi, p float64) float64 {
	from, to := d.Support()
	a, b := max(lo, from), min(hi, to)
	for range 100 {
		mid := a + (b-a)/2
		if mid == a || mid == b {
			break
		}
		if d.Between(lo, mid) < p {
			a = mid
		} else {
			b = mid
		}
	}
	return a + (b-a)/2
}
