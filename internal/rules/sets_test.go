package rules_test

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// TestSetsHoldThePublishedRules compares every set, whole, with the list of the specification: its rules numbered as
// listed, and the consequences proposed for them.
func TestSetsHoldThePublishedRules(t *testing.T) {
	const look, act, stop = rules.Look, rules.Act, rules.Stop
	with := func(c rules.Consequence, s rules.Spec) rules.Spec { s.Consequence = c; return s }
	want := []struct {
		id    string
		rules []rules.Spec
	}{
		{"shewhart-1931", []rules.Spec{with(stop, beyond(1, 1, 3))}},
		{"western-electric-1956", []rules.Spec{with(stop, beyond(1, 1, 3)), with(act, beyond(2, 3, 2)), with(act, beyond(4, 5, 1)), with(act, sameSide(8))}},
		{"nelson-1984", []rules.Spec{with(stop, beyond(1, 1, 3)), with(act, sameSide(9)), with(act, trend(6)), with(look, alternating(14)),
			with(act, beyond(2, 3, 2)), with(act, beyond(4, 5, 1)), with(look, within(15, 1)), with(look, outside(8, 1))}},
		{"action-warning", []rules.Spec{with(look, line(rules.WarningLine)), with(stop, line(rules.ActionLine)), with(act, beyond(2, 3, 2))}},
		{"run-of-seven", []rules.Spec{with(stop, beyond(1, 1, 3)), with(act, sameSide(7)), with(act, trend(7))}},
		{"harmonised-1995", []rules.Spec{with(stop, beyond(1, 1, 3)), with(act, beyond(2, 2, 2)), with(act, sameSide(9))}},
		{"nordic-handbook", []rules.Spec{with(stop, beyond(1, 1, 3)), with(act, beyond(2, 3, 2)), with(act, trend(7)), with(act, beyond(10, 11, 0))}},
	}
	sets := rules.Sets()
	if len(sets) != len(want) {
		t.Fatalf("%d sets, want %d", len(sets), len(want))
	}
	for i, w := range want {
		t.Run(w.id, func(t *testing.T) {
			got := sets[i]
			for j := range w.rules {
				w.rules[j].ID = fmt.Sprintf("%s/%d", w.id, j+1)
			}
			if got.ID != w.id || !slices.Equal(got.Rules, w.rules) {
				t.Errorf("got  %s %+v\nwant %s %+v", got.ID, got.Rules, w.id, w.rules)
			}
			if got.Title == "" || got.Source == "" || got.Provenance == "" {
				t.Errorf("title %q, source %q, provenance %q: none may be empty", got.Title, got.Source, got.Provenance)
			}
			if _, err := rules.Compile(plain(0, 1), decimal.Unrounded, got.Rules); err != nil {
				t.Errorf("does not compile: %v", err)
			}
			byID, ok := rules.SetByID(w.id)
			if !ok || !slices.Equal(byID.Rules, got.Rules) {
				t.Errorf("SetByID gives %+v, %t", byID, ok)
			}
			for _, s := range got.Rules {
				means, first := s.Advice()
				if s.Describe() == "no rule" || means == "" || first == "" {
					t.Errorf("%s: described as %q, means %q, look first %q", s.ID, s.Describe(), means, first)
				}
			}
		})
	}
	if _, ok := rules.SetByID(rules.DefaultSet); !ok || rules.DefaultSet != "action-warning" {
		t.Errorf("the default set is %q", rules.DefaultSet)
	}
	if _, ok := rules.SetByID("nelson-1985"); ok {
		t.Error("a set that does not exist is found")
	}
	t.Run("the caller owns the result", func(t *testing.T) {
		rules.Sets()[0].Rules[0].Z = 99
		if got := rules.Sets()[0].Rules[0].Z; got != 3 {
			t.Errorf("a change to an earlier answer shows: z is %v", got)
		}
	})
}

func TestDescriptionsOfAllKinds(t *testing.T) {
	seen := map[string]rules.Kind{}
	for kind := rules.Beyond; kind <= rules.CUSUM; kind++ {
		s := rules.Spec{Kind: kind, K: 2, M: 3, N: 7, Z: 2, Line: rules.ActionLine, Lambda: 0.2, Limit: 2.7, Reference: 0.5, Interval: 4}
		text := s.Describe()
		if other, twice := seen[text]; twice || text == "no rule" {
			t.Errorf("kind %d is described as %q, as is kind %d", kind, text, other)
		}
		seen[text] = kind
		if means, first := s.Advice(); !strings.HasSuffix(means, ".") || !strings.HasSuffix(first, ".") {
			t.Errorf("kind %d: advice %q, %q is no sentence", kind, means, first)
		}
	}
}

// signalsOf gives the numbers, from 1, of the points beyond the lines, as handbooks print them.
func signalsOf(tb testing.TB, trace chart.Trace, xs []float64, at []rules.Scale) (points []int) {
	tb.Helper()
	plan := mustCompile(tb, trace, decimal.Unrounded, line(rules.ActionLine))
	plan.Judge(plan.Start(false), xs, at, func(h rules.Hit) { points = append(points, h.Point+1) })
	return points
}

// TestSignalsOfPublishedExamples: data and signals of handbook examples, both recalled from memory and recomputed; limits
// as printed or at full precision as said.
func TestSignalsOfPublishedExamples(t *testing.T) {
	counts := func(xs ...float64) []float64 { return xs }
	for _, tc := range []struct {
		name          string
		centre, sigma float64
		xs            []float64
		want          []int
	}{
		{ // Limits 50.81 ± 3·1.87778/1.128; none beyond (printed).
			"flow rates, NIST/SEMATECH e-Handbook 6.3.2.2", 50.81, 1.87777777778 / 1.128,
			counts(49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1), nil},
		{ // c = 16: the upper limit is exactly 28, sample 3 lies on it, sample 24 above (computed).
			"wafer defects, NIST/SEMATECH e-Handbook 6.3.3.1", 16, 4,
			counts(16, 14, 28, 16, 12, 20, 10, 12, 10, 17, 19, 17, 14, 16, 15, 13, 14, 16, 11, 20, 11, 19, 16, 31, 13), []int{24}},
		{ // c = 516/26; 6 and 20 beyond (printed).
			"circuit boards, Montgomery", 19.8461538462, 4.454902226,
			counts(21, 24, 16, 12, 15, 5, 28, 20, 31, 25, 20, 24, 16, 19, 10, 17, 13, 22, 18, 39, 30, 24, 16, 19, 17, 15), []int{6, 20}},
		{ // p = 347/1500, n = 50, as np; 15 and 23 beyond (printed).
			"cans, Montgomery", 11.5666666667, 2.9817630,
			counts(12, 15, 8, 10, 4, 7, 16, 9, 14, 10, 5, 6, 17, 12, 22, 8, 10, 5, 13, 11, 20, 18, 24, 15, 9, 12, 7, 13, 9, 6), []int{15, 23}},
		{ // Revised without 15 and 23: p = 301/1400 = 0.215; 21 is beyond as well (printed).
			"cans, revised limits, Montgomery", 10.75, 2.9049742,
			counts(12, 15, 8, 10, 4, 7, 16, 9, 14, 10, 5, 6, 17, 12, 22, 8, 10, 5, 13, 11, 20, 18, 24, 15, 9, 12, 7, 13, 9, 6), []int{15, 21, 23}},
		{ // c = 3.4; none beyond (printed).
			"tape, ISO 8258:1991", 3.4, 1.84390889,
			counts(7, 1, 2, 5, 0, 6, 2, 0, 4, 4, 6, 3, 3, 3, 1, 6, 3, 1, 5, 6), nil},
		{ // 3.45 ± 2.66·0.38; none beyond (printed).
			"moisture, ISO 8258:1991", 3.45, 2.66 * 0.38 / 3,
			counts(2.9, 3.2, 3.6, 4.3, 3.8, 3.5, 3.0, 3.1, 3.6, 3.5), nil},
	} {
		t.Run(tc.name, func(t *testing.T) {
			if got := signalsOf(t, plain(tc.centre, tc.sigma), tc.xs, nil); !slices.Equal(got, tc.want) {
				t.Errorf("beyond the action lines: got %v, want %v", got, tc.want)
			}
		})
	}
	t.Run("dyed cloth, Montgomery, every point with a sigma of its own", func(t *testing.T) {
		// u = 153/107.5 per unit, sigma √(u/units); none beyond (printed).
		units := counts(10, 8, 13, 10, 9.5, 10, 12, 10.5, 12, 12.5)
		sigmas := counts(0.37726063, 0.42179021, 0.33087880, 0.37726063, 0.38706120, 0.37726063, 0.34438777, 0.36816864, 0.34438777, 0.33743016)
		var at []rules.Scale
		var xs []float64
		for i, found := range counts(14, 12, 20, 11, 7, 10, 21, 16, 19, 23) {
			xs, at = append(xs, found/units[i]), append(at, rules.Scale{Centre: 1.423255813953, Sigma: sigmas[i]})
		}
		if got := signalsOf(t, plain(1.423255813953, 0.37726063), xs, at); got != nil {
			t.Errorf("got %v, want none", got)
		}
	})
}
