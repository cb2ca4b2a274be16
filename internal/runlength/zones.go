package runlength

import (
	"math"
	"slices"

	"limitary/internal/rules"
	"limitary/internal/runlength/automaton"
	"limitary/internal/runlength/data"
)

// alphabet is the zones between the lines that the rules of a trace name, in sigmas from its centre. Rank 2i is the
// zone below line i and above the one before, rank 2i+1 the line itself; points lie on lines only where they are
// rounded. Letters are numbered by rank where they are, else by zone.
type alphabet struct {
	lines   []float64
	rounded bool
}

func (a *alphabet) letters() int {
	if a.rounded {
		return 2*len(a.lines) + 1
	}
	return len(a.lines) + 1
}

// rank gives the rank of a letter.
func (a *alphabet) rank(letter int) int {
	if a.rounded {
		return letter
	}
	return 2 * letter
}

// bounds gives the lines a letter lies between.
func (a *alphabet) bounds(letter int) (lo, hi float64) {
	rank := a.rank(letter)
	lo, hi = math.Inf(-1), math.Inf(1)
	if rank > 0 {
		lo = a.lines[(rank-1)/2]
	}
	if rank/2 < len(a.lines) {
		hi = a.lines[rank/2]
	}
	return lo, hi
}

// probabilities gives the probability of each letter.
func (a *alphabet) probabilities(d data.Distribution) []float64 {
	p := make([]float64, a.letters())
	for letter := range p {
		lo, hi := a.bounds(letter)
		if lattice, ok := d.(data.Rounded); ok && a.rank(letter)%2 == 1 {
			p[letter] = lattice.On(lo)
		} else {
			p[letter] = d.Between(lo, hi)
		}
	}
	return p
}

// feature marks the letters for which holds is true of the place of their points relative to a line.
func (a *alphabet) feature(line float64, up bool) automaton.Feature {
	has := make(automaton.Feature, a.letters())
	at, _ := slices.BinarySearch(a.lines, line)
	for letter := range has {
		if up {
			has[letter] = !math.IsInf(line, 1) && a.rank(letter) > 2*at+1
		} else {
			has[letter] = !math.IsInf(line, -1) && a.rank(letter) < 2*at+1
		}
	}
	return has
}

// addLines adds the lines a rule reads.
func (a *alphabet) addLines(s rules.Spec, lines Lines) {
	add := func(zs ...float64) {
		for _, z := range zs {
			if !math.IsInf(z, 0) {
				a.lines = append(a.lines, z+0)
			}
		}
	}
	switch s.Kind {
	case rules.Beyond, rules.Within, rules.Outside:
		add(s.Z, -s.Z)
	case rules.BeyondLine:
		add(lines.of(s.Line))
	case rules.SameSide:
		add(0)
	case rules.Span:
		add(s.Z/2, -s.Z/2)
	}
}

// newAlphabet gives the zones of a list of rules.
func newAlphabet(specs []rules.Spec, lines Lines, rounded bool) *alphabet {
	a := &alphabet{rounded: rounded}
	for _, s := range specs {
		a.addLines(s, lines)
	}
	slices.Sort(a.lines)
	a.lines = slices.Compact(a.lines)
	return a
}

const (
	// refineWidth is the widest zone, and refineReach how far out, in sigmas, zones are made so narrow.
	refineWidth, refineReach = 1.5, 6.0
)

// refine adds lines that no rule names, so that inside each zone one distribution is a smooth function of another:
// over an unbounded zone their ratio is not.
func (a *alphabet) refine() {
	lines := append([]float64{-refineReach, refineReach}, a.lines...)
	slices.Sort(lines)
	lines = slices.Compact(lines)
	a.lines = lines[:1:1]
	for _, line := range lines[1:] {
		last := a.lines[len(a.lines)-1]
		for parts, i := math.Ceil((line-last)/refineWidth), 1.0; i < parts && line <= refineReach; i++ {
			a.lines = append(a.lines, last+(line-last)*i/parts)
		}
		a.lines = append(a.lines, line)
	}
}

// of gives the position of a pair of lines, which makes add of addLines read well.
func (l Lines) of(kind rules.LineKind) (lower, upper float64) {
	if kind == rules.ActionLine {
		return l.LowerAction, l.UpperAction
	}
	return l.LowerWarning, l.UpperWarning
}

// machines gives the machines of one windowed rule over the zones; a rule that looks at order has none.
func (a *alphabet) machines(w automaton.Work, s rules.Spec, lines Lines, continuing bool) (list []*automaton.DFA, err error) {
	add := func(d *automaton.DFA, failed error) {
		if err == nil {
			if err = failed; err == nil {
				list = append(list, d.Minimise())
			}
		}
	}
	upper, lower := s.Sides != rules.LowerOnly, s.Sides != rules.UpperOnly
	// each adds a machine for each side watched.
	each := func(lo, hi float64, machine func(automaton.Feature) (*automaton.DFA, error)) {
		if upper {
			add(machine(a.feature(hi, true)))
		}
		if lower {
			add(machine(a.feature(lo, false)))
		}
	}
	run := func(n int) func(automaton.Feature) (*automaton.DFA, error) {
		return func(has automaton.Feature) (*automaton.DFA, error) { return automaton.Run(w, n, has, continuing) }
	}
	switch s.Kind {
	case rules.Beyond:
		each(-s.Z, s.Z, func(has automaton.Feature) (*automaton.DFA, error) {
			return automaton.AtLeast(w, s.K, s.M, has, continuing)
		})
	case rules.BeyondLine:
		lo, hi := lines.of(s.Line)
		each(lo, hi, run(1))
	case rules.SameSide:
		each(0, 0, run(s.N))
	case rules.Within:
		in, under := a.feature(-s.Z, true), a.feature(s.Z, false)
		for letter := range in {
			in[letter] = in[letter] && under[letter]
		}
		add(automaton.Run(w, s.N, in, continuing))
	case rules.Outside:
		add(automaton.Outside(w, s.N, a.feature(s.Z, true), a.feature(-s.Z, false), s.OneSideOK, continuing))
	case rules.Span:
		add(automaton.Opposite(w, a.feature(s.Z/2, true), a.feature(-s.Z/2, false), upper, lower, continuing))
	}
	return list, err
}

// orderMachine gives the machine of a rule over the order of neighbours.
func orderMachine(w automaton.Work, s rules.Spec, continuing bool) (*automaton.DFA, error) {
	if s.Kind == rules.Trend {
		return automaton.Trend(w, s.N, s.Sides != rules.LowerOnly, s.Sides != rules.UpperOnly, continuing)
	}
	return automaton.Alternating(w, s.N, continuing)
}

// looksAtOrder reports whether a rule compares neighbours.
func looksAtOrder(s rules.Spec) bool { return s.Kind == rules.Trend || s.Kind == rules.Alternating }

// accumulates reports whether a rule's statistic has no window.
func accumulates(s rules.Spec) bool { return s.Kind == rules.EWMA || s.Kind == rules.CUSUM }

// looksAtOnePoint reports whether a rule is a limit on single points.
func looksAtOnePoint(s rules.Spec) bool {
	return s.Kind == rules.BeyondLine || s.Kind == rules.Beyond && s.K == 1
}
