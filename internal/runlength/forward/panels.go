package forward

import (
	"math"

	"limitary/internal/runlength/automaton"
)

// Kind is what a move asks of the latest point within its panel.
type Kind uint8

const (
	// Whole asks nothing: every place in the panel leads there.
	Whole Kind = iota
	// Rise asks that it lies below the next point in the same panel, Fall above it. The panel is linear in u.
	Rise
	Fall
	// Mapped asks what a matrix says.
	Mapped
)

// Operator is the linear map of one move.
type Operator struct {
	Kind Kind
	// Map takes coefficients of the latest point's density to those of the next one's. Mapped only.
	Map *Matrix
}

// Layout says how densities over panels move. Entries of the slices belong to panels; the last one is the start, which
// stands for a chart without points and has mass but no place.
type Layout struct {
	Moves     [][]automaton.Move
	Operators [][]Operator
	// Moments gives for each panel the integrals of P_0, P_1, ... over it; later ones are 0. For panels linear in u it is
	// the probability of the panel alone.
	Moments [][]float64
	// Terms is the number of coefficients a density may have.
	Terms int
}

// PanelChain is a carried machine reading independent points.
type PanelChain struct {
	machine *automaton.DFA
	layout  *Layout
	// arrive are the moments of the panels that points come to, depart those they leave; they differ where the
	// distribution has just changed. held are those that belong to now.
	arrive, depart, held [][]float64
	// first is the offset of each state's coefficients.
	first     []int32
	now, then []float64
	image     []float64
	states    []exits
	// next is the layout that follows the first step.
	next *Layout
	cost int64
}

// exits is where a state's moves lead.
type exits struct {
	// whole lists the first coefficients of the states that whole panels lead to, fires is the probability that such a
	// move fires, and rest lists the other moves.
	whole []int32
	fires float64
	rest  []exit
}

// exit is a move that depends on the place in the panel.
type exit struct {
	letter, panel int
	to            int32
	fired         bool
}

// NewPanelChain starts a carried machine.
func NewPanelChain(machine *automaton.DFA, layout *Layout) *PanelChain {
	c := &PanelChain{machine: machine, layout: layout, arrive: layout.Moments, depart: layout.Moments, held: layout.Moments}
	c.allot(layout)
	c.now[c.first[0]] = 1
	return c
}

// Continue starts a machine from the state of another chain of the same machine, whose points had another
// distribution. Change is the layout of the step at which the distribution changes, layout that of all later ones.
func Continue(from *PanelChain, change, layout *Layout) *PanelChain {
	c := &PanelChain{machine: from.machine, layout: change, next: layout, arrive: layout.Moments, depart: from.layout.Moments, held: from.layout.Moments}
	c.allot(change)
	scale := 1 / from.Mass()
	for s := range c.machine.States() {
		old := from.now[from.first[s]:from.first[s+1]]
		mine := c.now[c.first[s]:c.first[s+1]]
		for i := range min(len(old), len(mine)) {
			mine[i] = old[i] * scale
		}
	}
	return c
}

// allot gives each state the coefficients its densities can have, and lists its moves.
func (c *PanelChain) allot(layout *Layout) {
	terms := c.terms(layout)
	c.first = make([]int32, len(terms)+1)
	for s, n := range terms {
		c.first[s+1] = c.first[s] + n
	}
	c.states = make([]exits, len(terms))
	for s := range c.states {
		c.list(int32(s), layout)
		c.cost += int64(len(c.states[s].whole) + 2 + len(c.states[s].rest)*4*int(terms[s]))
		for _, e := range c.states[s].rest {
			if layout.Operators[c.machine.Panel[s]][e.letter].Kind == Mapped {
				c.cost += int64(terms[s]) * int64(layout.Terms)
			}
		}
	}
	size := int(c.first[len(terms)])
	c.now, c.then, c.image = make([]float64, size), make([]float64, size), make([]float64, layout.Terms+1)
}

// list sorts the moves of a state.
func (c *PanelChain) list(s int32, layout *Layout) {
	out, panel := &c.states[s], c.machine.Panel[s]
	for letter, op := range layout.Operators[panel] {
		to, fired := c.machine.Step(s, letter)
		target := layout.Moves[panel][letter].Panel
		if op.Kind != Whole {
			out.rest = append(out.rest, exit{letter, target, to, fired})
			continue
		}
		if fired {
			out.fires += c.arrive[target][0]
		}
		if !fired || c.machine.Continuing {
			out.whole = append(out.whole, c.first[to])
		}
	}
}

// terms gives how many coefficients the density of each state has: a state that can only be entered from other panels is
// uniform, each further point in the same panel adds a degree, and maps need all.
func (c *PanelChain) terms(layout *Layout) []int32 {
	terms := make([]int32, c.machine.States())
	for s := range terms {
		terms[s] = 1
	}
	for changed := true; changed; {
		changed = false
		for s := range terms {
			panel := c.machine.Panel[s]
			for letter, op := range layout.Operators[panel] {
				to, fired := c.machine.Step(int32(s), letter)
				if fired && !c.machine.Continuing || op.Kind == Whole {
					continue
				}
				want := min(terms[s]+1, int32(layout.Terms))
				if op.Kind == Mapped {
					want = int32(layout.Terms)
				}
				if terms[to] < want {
					terms[to], changed = want, true
				}
			}
		}
	}
	return terms
}

// Advance takes one point.
func (c *PanelChain) Advance() (signalled, misplaced float64) {
	c.now, c.then = c.then, c.now
	clear(c.now)
	for s, panel := range c.machine.Panel {
		density := c.then[c.first[s]:c.first[s+1]]
		if density[0] == 0 {
			continue
		}
		fired, cut := c.leave(int32(s), int(panel), density)
		signalled += fired
		misplaced += cut
	}
	c.held = c.arrive
	if c.next != nil {
		c.layout, c.depart, c.next = c.next, c.next.Moments, nil
	}
	return signalled, misplaced
}

// leave moves the density of one state to the states that follow.
func (c *PanelChain) leave(s int32, panel int, density []float64) (signalled, misplaced float64) {
	mass, out := dot(density, c.depart[panel]), &c.states[s]
	for _, at := range out.whole {
		c.now[at] += mass
	}
	signalled = mass * out.fires
	risen := false
	for i := range out.rest {
		e := &out.rest[i]
		op := &c.layout.Operators[panel][e.letter]
		var image []float64
		if op.Kind == Mapped {
			image, risen = c.image[:c.layout.Terms], false
			clear(image)
			op.Map.AddTo(image, density)
		} else {
			if !risen {
				c.rise(density, c.depart[panel][0])
				risen = true
			}
			image = c.image[:len(density)+1]
		}
		if e.fired {
			signalled += c.fires(op.Kind, image, mass, c.arrive[e.panel])
			if !c.machine.Continuing {
				continue
			}
		}
		misplaced += c.enter(op.Kind, e.to, image, mass, c.arrive[e.panel][0])
	}
	return signalled, misplaced
}

// rise integrates a density over a panel of probability width from its lower end.
func (c *PanelChain) rise(density []float64, width float64) {
	half, out := width/2, c.image
	for n := range len(density) + 1 {
		v := 0.0
		if n < len(density) && n == 0 {
			v = density[0]
		}
		if n > 0 {
			v = density[n-1] / float64(2*n-1)
		}
		if n+1 < len(density) {
			v -= density[n+1] / float64(2*n+3)
		}
		out[n] = half * v
	}
}

// fires gives the probability of a firing move.
func (c *PanelChain) fires(kind Kind, image []float64, mass float64, arrive []float64) float64 {
	switch kind {
	case Rise:
		return image[0] * arrive[0]
	case Fall:
		return (mass - image[0]) * arrive[0]
	}
	return dot(image, arrive)
}

// enter adds the density after a move to a state, and gives what its series has no room for.
func (c *PanelChain) enter(kind Kind, to int32, image []float64, mass, width float64) (misplaced float64) {
	into := c.now[c.first[to]:c.first[to+1]]
	if len(into) < len(image) && kind != Mapped {
		misplaced = math.Abs(image[len(into)]) * width
		image = image[:len(into)]
	}
	if kind == Fall {
		into[0] += mass
		for n, v := range image {
			into[n] -= v
		}
		return misplaced
	}
	for n, v := range image {
		into[n] += v
	}
	return misplaced
}

// Mass gives the probability that the machine is still running.
func (c *PanelChain) Mass() (mass float64) {
	for s, panel := range c.machine.Panel {
		mass += dot(c.now[c.first[s]:c.first[s+1]], c.held[panel])
	}
	return mass
}

// Change bounds the change of all densities: that of a series by the sum of its coefficients, since |P_n| <= 1.
func (c *PanelChain) Change(factor float64) (total float64) {
	for s, panel := range c.machine.Panel {
		state := 0.0
		for i := c.first[s]; i < c.first[s+1]; i++ {
			state += math.Abs(c.now[i] - factor*c.then[i])
		}
		total += state * c.arrive[panel][0]
	}
	return total
}

// Cost is the work of one Advance.
func (c *PanelChain) Cost() int64 { return c.cost }

// Size gives the number of coefficients.
func (c *PanelChain) Size() int { return len(c.now) }

func dot(a, b []float64) (total float64) {
	for i := range min(len(a), len(b)) {
		total += a[i] * b[i]
	}
	return total
}
