package automaton

import (
	"errors"
	"fmt"
)

const (
	// StatesMax bounds the states of any machine before it is minimised.
	StatesMax = 600_000
	// TransitionsMax bounds its transitions: minimising that many takes some two hundred megabytes.
	TransitionsMax = 6_000_000
)

// ErrTooLarge says that the rules remember too much for an exact machine.
var ErrTooLarge = errors.New("automaton: the rules need more states than the limit")

// Work bounds the building of machines: Spend records operations and fails where there have been enough.
type Work interface{ Spend(units int64) error }

// letterUnits is the work of following one letter and of minimising what comes of it.
const letterUnits = 100

// DFA is a complete deterministic machine. State 0 is the start.
type DFA struct {
	Letters int
	// Next holds for each state and letter the state that follows, at state*Letters+letter. It is negative where the
	// rules fire: -1 where that ends the machine, the complement of the state that follows where it goes on.
	Next []int32
	// Panel holds for each state what its letters mean; nil where they mean the same in every state.
	Panel []int32
	// Continuing machines go on after firing.
	Continuing bool
}

// Fired is the entry of Next where a machine that is not continuing ends.
const Fired = int32(-1)

// States gives the number of states.
func (d *DFA) States() int { return len(d.Next) / d.Letters }

// Step gives the state after a letter and whether the rules fired. A machine that is not continuing has no state after
// firing; it is then given as 0.
func (d *DFA) Step(state int32, letter int) (next int32, fired bool) {
	next = d.Next[int(state)*d.Letters+letter]
	if next < 0 {
		return ^next, true
	}
	return next, false
}

// CanFire reports whether any state fires.
func (d *DFA) CanFire() bool {
	for _, n := range d.Next {
		if n < 0 {
			return true
		}
	}
	return false
}

// explore builds a machine from a rule's own description of its states.
func explore[K comparable](w Work, letters int, continuing bool, start K, step func(K, int) (K, bool)) (*DFA, error) {
	index := map[K]int32{}
	return exploreIn(w, letters, continuing, start, step, func(state K, fresh int32) int32 {
		at, known := index[state]
		if !known {
			index[state] = fresh
			return fresh
		}
		return at
	})
}

// denseMax is up to how many possible states a table finds them by their number, where a map would do it more slowly.
const denseMax = 8_000_000

// exploreNumbered is explore for states numbered 0 to possible-1.
func exploreNumbered(w Work, letters int, continuing bool, possible int, start int, step func(int, int) (int, bool)) (*DFA, error) {
	if possible > denseMax {
		return explore(w, letters, continuing, start, step)
	}
	index := make([]int32, possible) // one more than the number given to a state, 0 for none
	return exploreIn(w, letters, continuing, start, step, func(state int, fresh int32) int32 {
		if index[state] == 0 {
			index[state] = fresh + 1
		}
		return index[state] - 1
	})
}

// exploreIn numbers states as find does, which gives the number of a known state and fresh to one it has not seen.
func exploreIn[K comparable](w Work, letters int, continuing bool, start K, step func(K, int) (K, bool), find func(state K, fresh int32) int32) (*DFA, error) {
	d := &DFA{Letters: letters, Continuing: continuing}
	find(start, 0)
	queue := []K{start}
	for i := 0; i < len(queue); i++ {
		if err := w.Spend(int64(letters) * letterUnits); err != nil {
			return nil, err
		}
		for letter := range letters {
			next, fired := step(queue[i], letter)
			if fired && !continuing {
				d.Next = append(d.Next, Fired)
				continue
			}
			at := find(next, int32(len(queue)))
			if int(at) == len(queue) {
				if len(queue) >= StatesMax || len(d.Next) >= TransitionsMax {
					return nil, ErrTooLarge
				}
				queue = append(queue, next)
			}
			if fired {
				at = ^at
			}
			d.Next = append(d.Next, at)
		}
	}
	return d, nil
}

// Product gives the machine that fires where a or b does, minimised. Both read the same letters and are of one kind.
func Product(w Work, a, b *DFA) (*DFA, error) {
	if a.Letters != b.Letters || a.Continuing != b.Continuing {
		panic(fmt.Sprintf("automaton: product of machines with %d and %d letters", a.Letters, b.Letters))
	}
	width := b.States()
	d, err := exploreNumbered(w, a.Letters, a.Continuing, a.States()*width, 0, func(p, letter int) (int, bool) {
		na, fa := a.Step(int32(p/width), letter)
		nb, fb := b.Step(int32(p%width), letter)
		return int(na)*width + int(nb), fa || fb
	})
	if err != nil {
		return nil, err
	}
	return d.Minimise(), nil
}

// Join gives the product of all machines; with none it is the machine of one state that never fires.
func Join(w Work, letters int, continuing bool, machines []*DFA) (*DFA, error) {
	joined := &DFA{Letters: letters, Next: make([]int32, letters), Continuing: continuing}
	for _, m := range machines {
		var err error
		if joined, err = Product(w, joined, m); err != nil {
			return nil, err
		}
	}
	return joined, nil
}

// Onset gives the continuing machine that fires where d does and did not at the point before: at the first point of each
// episode.
func (d *DFA) Onset(w Work) (*DFA, error) {
	type state struct {
		at    int32
		fired bool
	}
	panels := []int32{}
	seen := map[state]bool{}
	note := func(s state) {
		if d.Panel != nil && !seen[s] {
			seen[s] = true
			panels = append(panels, d.Panel[s.at])
		}
	}
	note(state{})
	o, err := explore(w, d.Letters, true, state{}, func(s state, letter int) (state, bool) {
		next, fired := d.Step(s.at, letter)
		to := state{next, fired}
		note(to)
		return to, fired && !s.fired
	})
	if err != nil {
		return nil, err
	}
	if d.Panel != nil {
		o.Panel = panels
	}
	return o.Minimise(), nil
}
