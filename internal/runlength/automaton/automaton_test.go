package automaton_test

import (
	"errors"
	"math/rand/v2"
	"testing"

	"limitary/internal/runlength/automaton"
)

const seed = 20260102

// free is work without a limit.
type free struct{}

func (free) Spend(int64) error { return nil }

// random gives a machine with a few states, panels and firing transitions.
func random(r *rand.Rand, continuing, panels bool) *automaton.DFA {
	states, letters := 1+r.IntN(12), 1+r.IntN(3)
	d := &automaton.DFA{Letters: letters, Continuing: continuing}
	for range states * letters {
		next := int32(r.IntN(states))
		if r.IntN(4) == 0 {
			next = ^next
			if !continuing {
				next = automaton.Fired
			}
		}
		d.Next = append(d.Next, next)
	}
	if panels {
		for range states {
			d.Panel = append(d.Panel, int32(r.IntN(2)))
		}
	}
	return d
}

// differ reports whether two states of machines can be told apart by some word: a search over pairs of states.
func differ(a, b *automaton.DFA, s, t int32) bool {
	type pair struct{ s, t int32 }
	seen := map[pair]bool{{s, t}: true}
	for queue := []pair{{s, t}}; len(queue) > 0; queue = queue[1:] {
		p := queue[0]
		if a.Panel != nil && a.Panel[p.s] != b.Panel[p.t] {
			return true
		}
		for letter := range a.Letters {
			ns, fs := a.Step(p.s, letter)
			nt, ft := b.Step(p.t, letter)
			if fs != ft {
				return true
			}
			if next := (pair{ns, nt}); (!fs || a.Continuing) && !seen[next] {
				seen[next] = true
				queue = append(queue, next)
			}
		}
	}
	return false
}

func TestMinimisedMachinesAreEquivalentAndMinimal(t *testing.T) {
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	smaller := 0
	for trial := range 2000 {
		d := random(r, trial%2 == 0, trial%3 == 0)
		m := d.Minimise()
		if differ(d, m, 0, 0) {
			t.Fatalf("trial %d: %+v is not %+v", trial, m, d)
		}
		for s := range m.States() {
			for other := range s {
				if !differ(m, m, int32(s), int32(other)) {
					t.Fatalf("trial %d: states %d and %d of %+v have the same future", trial, s, other, m)
				}
			}
		}
		if m.States() < d.States() {
			smaller++
		}
	}
	if smaller < 500 {
		t.Errorf("only %d machines became smaller", smaller)
	}
}

func TestOnsetFiresAtTheFirstOfEachEpisode(t *testing.T) {
	r := rand.New(rand.NewPCG(seed, 2))
	for range 200 {
		d := random(r, true, false)
		onset, err := d.Onset(free{})
		if err != nil {
			t.Fatal(err)
		}
		var s, o int32
		before := false
		for range 100 {
			letter := r.IntN(d.Letters)
			var fired, first bool
			s, fired = d.Step(s, letter)
			o, first = onset.Step(o, letter)
			if first != (fired && !before) {
				t.Fatalf("onset %v after %v and %v", first, before, fired)
			}
			before = fired
		}
	}
}

// The minimal numbers of states are those of the notes in testdata/arl.csv, of another program.
func TestPublishedSetsHaveTheKnownNumberOfStates(t *testing.T) {
	lines := []float64{-3, -2, -1, 0, 1, 2, 3}
	up := func(z float64) automaton.Feature {
		f := make(automaton.Feature, len(lines)+1)
		for i := range f {
			f[i] = i > 0 && lines[i-1] >= z
		}
		return f
	}
	down := func(z float64) automaton.Feature {
		f := make(automaton.Feature, len(lines)+1)
		for i := range f {
			f[i] = i < len(lines) && lines[i] <= -z
		}
		return f
	}
	type rule struct {
		k, m int
		z    float64
	}
	for _, c := range []struct {
		rules  []rule
		states int
	}{
		{[]rule{{1, 1, 3}}, 1},
		{[]rule{{1, 1, 3}, {2, 3, 2}}, 7},
		{[]rule{{1, 1, 3}, {8, 8, 0}}, 15},
		{[]rule{{1, 1, 3}, {2, 2, 2}}, 3},
		{[]rule{{1, 1, 3}, {2, 3, 2}, {4, 5, 1}}, 71},
		{[]rule{{1, 1, 3}, {2, 3, 2}, {4, 5, 1}, {8, 8, 0}}, 215},
	} {
		var all []*automaton.DFA
		for _, r := range c.rules {
			for _, has := range []automaton.Feature{up(r.z), down(r.z)} {
				d, err := automaton.AtLeast(free{}, r.k, r.m, has, false)
				if err != nil {
					t.Fatal(err)
				}
				all = append(all, d)
			}
		}
		d, err := automaton.Join(free{}, len(lines)+1, false, all)
		if err != nil || d.States() != c.states {
			t.Errorf("%v: %d states, %v; want %d", c.rules, d.States(), err, c.states)
		}
	}
}

func TestTooManyStatesAreRefused(t *testing.T) {
	if _, err := automaton.AtLeast(free{}, 30, 60, automaton.Feature{true, false}, true); !errors.Is(err, automaton.ErrTooLarge) {
		t.Errorf("got %v, want ErrTooLarge", err)
	}
}
