package forward

import (
	"math"

	"limitary/internal/runlength/automaton"
)

// ZoneChain is a machine over zones reading independent points.
type ZoneChain struct {
	machine    *automaton.DFA
	probable   []zone
	now, then  []float64
	continuing bool
}

// zone is a letter that can come.
type zone struct {
	letter      int
	probability float64
}

// NewZoneChain starts a machine. Probability has an entry a letter. State is the distribution over states to begin with,
// nil for the start state.
func NewZoneChain(machine *automaton.DFA, probability, state []float64) *ZoneChain {
	c := &ZoneChain{machine: machine, continuing: machine.Continuing}
	for letter, p := range probability {
		if p > 0 {
			c.probable = append(c.probable, zone{letter, p})
		}
	}
	c.now, c.then = make([]float64, machine.States()), make([]float64, machine.States())
	if state == nil {
		c.now[0] = 1
	} else {
		copy(c.now, state)
	}
	return c
}

// Advance takes one point.
func (c *ZoneChain) Advance() (signalled, misplaced float64) {
	c.now, c.then = c.then, c.now
	clear(c.now)
	letters, next := c.machine.Letters, c.machine.Next
	for s, p := range c.then {
		if p == 0 {
			continue
		}
		row := next[s*letters : (s+1)*letters]
		for _, z := range c.probable {
			to := row[z.letter]
			if to < 0 {
				signalled += p * z.probability
				if !c.continuing {
					continue
				}
				to = ^to
			}
			c.now[to] += p * z.probability
		}
	}
	return signalled, 0
}

// Mass gives the probability that the machine is still running.
func (c *ZoneChain) Mass() float64 { return sum(c.now) }

// Change is as curve.Chain wants it.
func (c *ZoneChain) Change(factor float64) float64 {
	total := 0.0
	for s, p := range c.now {
		total += math.Abs(p - factor*c.then[s])
	}
	return total
}

// Cost is the work of one Advance.
func (c *ZoneChain) Cost() int64 { return int64(len(c.now) * (len(c.probable) + 2)) }

// State gives the distribution over states, scaled to 1.
func (c *ZoneChain) State() []float64 {
	out, mass := make([]float64, len(c.now)), c.Mass()
	for s, p := range c.now {
		out[s] = p / mass
	}
	return out
}

func sum(xs []float64) (total float64) {
	for _, x := range xs {
		total += x
	}
	return total
}
