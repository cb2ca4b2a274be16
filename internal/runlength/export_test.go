package runlength

import (
	"context"
	"math"

	"limitary/internal/rules"
	"limitary/internal/runlength/automaton"
	"limitary/internal/runlength/data"
	"limitary/internal/runlength/effort"
)

// Machine gives a function that takes values one by one and says whether the exact machine of the rules fires. A machine
// that is not continuing must not be asked again after that.
func Machine(specs []rules.Spec, lines Lines, rounded, continuing bool) (func(x float64) bool, error) {
	m, err := newModel(effort.New(context.Background(), 0), specs, lines, modelKind{rounded, continuing, false})
	if err != nil {
		return nil, err
	}
	state, last, latest := int32(0), -1, 0.0
	return func(x float64) bool {
		letter := -1
		zone := m.letterOf(x)
		if !m.ordered {
			letter = zone
		} else if last < 0 {
			letter = zone
		} else {
			for i, move := range m.moves[last] {
				order := automaton.Rising
				if x < latest {
					order = automaton.Falling
				}
				if move.Panel == zone && move.Order == order {
					letter = i
				}
			}
		}
		last, latest = zone, x
		next, fired := m.machine.Step(state, letter)
		state = next
		return fired
	}, nil
}

func (m *model) letterOf(x float64) int {
	for letter := range m.alphabet.letters() {
		lo, hi := m.alphabet.bounds(letter)
		if m.alphabet.rank(letter)%2 == 1 && x == lo {
			return letter
		}
		if m.alphabet.rank(letter)%2 == 0 && x > lo && x < hi {
			return letter
		}
	}
	panic("value on a line of an alphabet without lines")
}

// MeanWithTerms gives the ARL of order rules with a number of Legendre terms.
func MeanWithTerms(specs []rules.Spec, shift float64, terms int) (mean, relativeError float64, err error) {
	m, err := newModel(effort.New(context.Background(), 0), specs, CustomaryLines(), modelKind{})
	if err != nil {
		return 0, 0, err
	}
	c, err := m.orderedWith(terms, run{law: law{data.Normal{Mean: shift, SD: 1}, shift, 1}}, effort.New(context.Background(), 0))
	return c.Mean(), c.RelativeError, err
}

// Chain gives the transition matrix of a zone machine among states without a signal, by rows.
func Chain(specs []rules.Spec, shift float64) (matrix []float64, states int, err error) {
	m, err := newModel(effort.New(context.Background(), 0), specs, CustomaryLines(), modelKind{})
	if err != nil {
		return nil, 0, err
	}
	states = m.machine.States()
	matrix = make([]float64, states*states)
	for s := range states {
		for letter, p := range m.alphabet.probabilities(data.Normal{Mean: shift, SD: 1}) {
			if next, fired := m.machine.Step(int32(s), letter); !fired {
				matrix[s*states+int(next)] += p
			}
		}
	}
	return matrix, states, nil
}

// Infinite is no line.
var Infinite = math.Inf(1)
