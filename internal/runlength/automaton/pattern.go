package automaton

import "math/bits"

// Feature says for each letter whether a point with it has the feature.
type Feature []bool

// Run fires where the latest n points have the feature.
func Run(w Work, n int, has Feature, continuing bool) (*DFA, error) {
	return explore(w, len(has), continuing, 0, func(run, letter int) (int, bool) {
		if !has[letter] {
			return 0, false
		}
		run = min(run+1, n)
		return run, run == n
	})
}

// AtLeast fires where a point has the feature and at least k of the latest m do.
//
// The state is a word of the latest m-1 points, the newest in bit 0. A point that has the feature but will have left
// the window before k of them can come together is forgotten, which keeps the machine near its least size.
func AtLeast(w Work, k, m int, has Feature, continuing bool) (*DFA, error) {
	if k == m {
		return Run(w, m, has, continuing)
	}
	window := uint64(1)<<(m-1) - 1
	return explore(w, len(has), continuing, 0, func(past uint64, letter int) (uint64, bool) {
		now := past << 1
		fired := false
		if has[letter] {
			now |= 1
			fired = bits.OnesCount64(past)+1 >= k
		}
		now &= window
		if continuing {
			return now, fired
		}
		return useful(now, k, m), fired
	})
}

// useful clears the points of the word that cannot be part of k in m any more. After t more points only those of age at
// most m-t count, an age being 1 for bit 0; even if all t have the feature there must be k.
func useful(word uint64, k, m int) uint64 {
	keep := uint64(0)
	for t := 1; t < m; t++ {
		left := word & (uint64(1)<<(m-t) - 1)
		if bits.OnesCount64(left)+t >= k {
			keep |= left
		}
	}
	return keep
}

// Outside fires where the latest n points are all up or down, and unless oneSide is allowed both are present.
func Outside(w Work, n int, up, down Feature, oneSide, continuing bool) (*DFA, error) {
	if oneSide {
		either := make(Feature, len(up))
		for i := range either {
			either[i] = up[i] || down[i]
		}
		return Run(w, n, either, continuing)
	}
	// The run of points out, and how many of its latest lie on one side: up positive, down negative.
	type state struct{ run, same int }
	return explore(w, len(up), continuing, state{}, func(s state, letter int) (state, bool) {
		switch {
		case up[letter]:
			s.same = min(max(s.same, 0)+1, n)
		case down[letter]:
			s.same = max(min(s.same, 0)-1, -n)
		default:
			return state{}, false
		}
		s.run = min(s.run+1, n)
		return s, s.run == n && s.same > -n && s.same < n
	})
}

// Opposite fires where a point is up after one down, or down after one up, as far as the sides are watched.
func Opposite(w Work, up, down Feature, watchUp, watchDown, continuing bool) (*DFA, error) {
	return explore(w, len(up), continuing, 0, func(before, letter int) (int, bool) {
		switch {
		case up[letter]:
			return 1, before == -1 && watchUp
		case down[letter]:
			return -1, before == 1 && watchDown
		}
		return 0, false
	})
}

// Rising and Falling are the letters of machines that look at the order of neighbours. The first point of a segment has
// no neighbour and is not shown to them.
const (
	Rising = iota
	Falling
	Orders
)

// Trend fires where the latest n points rise, or fall, as far as the sides are watched.
func Trend(w Work, n int, watchUp, watchDown, continuing bool) (*DFA, error) {
	return explore(w, Orders, continuing, 0, func(run, letter int) (int, bool) {
		if letter == Rising {
			run = min(max(run, 0)+1, n-1)
			if !watchUp {
				run = 0
			}
			return run, run == n-1 && watchUp
		}
		run = max(min(run, 0)-1, 1-n)
		if !watchDown {
			run = 0
		}
		return run, run == 1-n && watchDown
	})
}

// Alternating fires where the latest n points go up and down by turns.
func Alternating(w Work, n int, continuing bool) (*DFA, error) {
	type state struct{ last, turns int }
	return explore(w, Orders, continuing, state{last: -1}, func(s state, letter int) (state, bool) {
		turns := 0
		if s.last >= 0 && letter != s.last {
			turns = min(s.turns+1, n-2)
		}
		return state{letter, turns}, turns == n-2
	})
}
