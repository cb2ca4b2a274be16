package rules_test

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

func TestCheckNamesTheFieldAndTheLimit(t *testing.T) {
	ok := func(s rules.Spec) rules.Spec { s.ID, s.Consequence = "a", rules.Act; return s }
	change := func(s rules.Spec, change func(*rules.Spec)) rules.Spec { s = ok(s); change(&s); return s }
	nan := math.NaN()
	for _, tc := range []struct {
		spec rules.Spec
		want string // empty where the rule is right
	}{
		{ok(beyond(1, 1, 3)), ""}, {ok(beyond(64, 64, 100)), ""}, {ok(beyond(1, 1, 0)), ""},
		{ok(sameSide(2)), ""}, {ok(sameSide(64)), ""}, {ok(trend(2)), ""}, {ok(alternating(3)), ""}, {ok(within(64, 0.001)), ""},
		{ok(outside(2, 0)), ""}, {ok(span(4)), ""}, {ok(ewma(1, 100)), ""}, {ok(cusum(0, 0.1)), ""},
		{change(cusum(0.5, 4), func(s *rules.Spec) { s.HeadStart = 4 }), ""},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.ID = strings.Repeat("x", 64) }), ""},
		{rules.Spec{}, `id: "": want 1 to 64 characters`},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.ID = strings.Repeat("x", 65) }), "id: "},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.ID = "Nelson/1" }), `id: "Nelson/1"`},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.ID = "a\n" }), "id: "},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.ID = "/a" }), "id: "},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.Consequence = 0 }), "consequence: is not set"},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.Consequence = 4 }), "consequence: "},
		{change(beyond(1, 1, 3), func(s *rules.Spec) { s.Sides = 3 }), "sides: unknown value 3"},
		{change(within(3, 1), func(s *rules.Spec) { s.Sides = rules.UpperOnly }), "sides: a pattern of this kind"},
		{change(outside(3, 1), func(s *rules.Spec) { s.Sides = rules.LowerOnly }), "sides: "},
		{change(alternating(3), func(s *rules.Spec) { s.Sides = rules.LowerOnly }), "sides: "},
		{ok(rules.Spec{}), "rule: is not set"},
		{ok(rules.Spec{Kind: 11}), "rule: is not set"},
		{ok(beyond(0, 1, 3)), "beyond.k: 0: want 1 to m, which is 1"},
		{ok(beyond(4, 3, 3)), "beyond.k: 4: want 1 to m, which is 3"},
		{ok(beyond(1, 0, 3)), "beyond.m: 0: want 1 to 64 points"},
		{ok(beyond(1, 65, 3)), "beyond.m: 65: want 1 to 64 points"},
		{ok(beyond(1, 1, -1)), "beyond.z: -1: want 0 to 100 sigmas"},
		{ok(beyond(1, 1, 100.1)), "beyond.z: 100.1: want 0 to 100 sigmas"},
		{ok(beyond(1, 1, nan)), "beyond.z: NaN: want 0 to 100 sigmas"},
		{ok(beyond(1, 1, math.Inf(1))), "beyond.z: +Inf: "},
		{ok(line(0)), "beyond_line.line: is not set"},
		{ok(line(3)), "beyond_line.line: is not set"},
		{ok(sameSide(1)), "same_side.n: 1: want 2 to 64 points"},
		{ok(sameSide(65)), "same_side.n: 65: want 2 to 64 points"},
		{ok(trend(1)), "trend.n: 1: want 2 to 64 points"},
		{ok(alternating(2)), "alternating.n: 2: want 3 to 64 points"},
		{ok(within(1, 1)), "within.n: 1: want 2 to 64 points"},
		{ok(within(15, 0)), "within.z: 0: want more than 0 and at most 100 sigmas"},
		{ok(within(15, nan)), "within.z: NaN: "},
		{ok(outside(1, 1)), "outside.n: 1: "},
		{ok(outside(8, -1)), "outside.z: -1: "},
		{ok(span(0)), "span.z: 0: "},
		{ok(ewma(0, 3)), "ewma.lambda: 0: want more than 0 and at most 1"},
		{ok(ewma(1.1, 3)), "ewma.lambda: 1.1: "},
		{ok(ewma(nan, 3)), "ewma.lambda: NaN: "},
		{ok(ewma(0.2, 0)), "ewma.limit: 0: "},
		{ok(cusum(-0.1, 4)), "cusum.k: -0.1: "},
		{ok(cusum(0.5, 0)), "cusum.h: 0: "},
		{change(cusum(0.5, 4), func(s *rules.Spec) { s.HeadStart = 4.1 }), "cusum.head_start: 4.1: want 0 to h, which is 4"},
		{change(cusum(0.5, 4), func(s *rules.Spec) { s.HeadStart = nan }), "cusum.head_start: NaN: "},
	} {
		t.Run(fmt.Sprintf("%+v", tc.spec), func(t *testing.T) {
			err := tc.spec.Check()
			if tc.want == "" {
				if err != nil {
					t.Error(err)
				}
				return
			}
			var e *rules.SpecError
			if !errors.As(err, &e) || !strings.HasPrefix(err.Error(), tc.want) {
				t.Errorf("got %v, want %s...", err, tc.want)
			}
		})
	}
}

func TestCompileNamesTheRule(t *testing.T) {
	centreOnly := chart.Trace{Centre: ptr(1)}
	named := func(id string, s rules.Spec) rules.Spec { s.ID, s.Consequence = id, rules.Act; return s }
	var many []rules.Spec
	for i := range rules.RulesMax + 1 {
		many = append(many, named(fmt.Sprint("r", i), beyond(1, 1, 3)))
	}
	for _, tc := range []struct {
		trace chart.Trace
		specs []rules.Spec
		want  string
	}{
		{plain(0, 1), nil, ""},
		{plain(0, 1), many[:rules.RulesMax], ""},
		{plain(0, 1), many, "rules: 33 rules, the limit is 32"},
		{plain(0, 1), []rules.Spec{named("a", sameSide(3)), named("a", trend(3))}, `rules[1].id: "a" is already the id of rules[0]`},
		{plain(0, 1), []rules.Spec{named("a", sameSide(3)), named("b", trend(1))}, "rules[1].trend.n: 1: want 2 to 64 points"},
		{chart.Trace{}, []rules.Spec{named("a", sameSide(3))}, "rules[0].rule: a needs a centre, and the trace has none"},
		{chart.Trace{}, []rules.Spec{named("a", trend(3)), named("b", alternating(3)), named("c", line(rules.ActionLine))}, ""},
		{centreOnly, []rules.Spec{named("a", sameSide(3)), named("b", beyond(2, 3, 0)), named("c", outside(3, 0))}, ""},
		{centreOnly, []rules.Spec{named("a", beyond(1, 1, 3))}, "rules[0].rule: a measures in sigmas, and the trace has no sigma"},
		{centreOnly, []rules.Spec{named("a", within(3, 1))}, "rules[0].rule: a measures in sigmas"},
		{centreOnly, []rules.Spec{named("a", span(4))}, "rules[0].rule: a measures in sigmas"},
		{centreOnly, []rules.Spec{named("a", ewma(0.2, 3))}, "rules[0].rule: a measures in sigmas"},
		{centreOnly, []rules.Spec{named("a", cusum(0.5, 4))}, "rules[0].rule: a measures in sigmas"},
	} {
		_, err := rules.Compile(tc.trace, 2, tc.specs)
		if got := fmt.Sprint(err); tc.want == "" && err != nil || !strings.HasPrefix(got, tc.want) {
			t.Errorf("got %v, want %q", err, tc.want)
		}
	}
}

func TestAPlanKeepsItsOwnRules(t *testing.T) {
	specs := []rules.Spec{{ID: "a", Kind: rules.Beyond, Consequence: rules.Act, K: 1, M: 1, Z: 3}}
	plan, err := rules.Compile(plain(0, 1), decimal.Unrounded, specs)
	if err != nil {
		t.Fatal(err)
	}
	specs[0].Consequence = rules.Stop
	if plan.Specs()[0].Consequence != rules.Act {
		t.Error("a change to the caller's rules shows in the plan")
	}
}

func TestLoadStateRefusesWhatItDidNotWrite(t *testing.T) {
	sums := mustCompile(t, plain(0, 1), decimal.Unrounded, trend(6), cusum(0.5, 4))
	st := sums.Start(false)
	sums.Judge(st, []float64{1, 2, 3}, nil, func(rules.Hit) {})
	form := sums.AppendState([]byte("prefix"), st)
	if !bytes.HasPrefix(form, []byte("prefix")) {
		t.Fatalf("AppendState does not append: %q", form)
	}
	form = form[len("prefix"):]
	for n := range form {
		if _, err := sums.LoadState(form[:n], sums.Start(false)); err == nil {
			t.Errorf("the first %d of %d bytes are loaded", n, len(form))
		}
	}
	for at, wrong := range map[int]byte{0: 2, 1: 65, 2: 2} {
		bad := bytes.Clone(form)
		bad[at] = wrong
		if _, err := sums.LoadState(bad, sums.Start(false)); err == nil {
			t.Errorf("byte %d set to %d is loaded", at, wrong)
		}
	}
	notANumber := bytes.Clone(form)
	for i := len(form) - 8; i < len(form); i++ {
		notANumber[i] = 0xFF
	}
	if _, err := sums.LoadState(notANumber, sums.Start(false)); err == nil {
		t.Error("a sum that is not a number is loaded")
	}
	windows := mustCompile(t, plain(0, 1), decimal.Unrounded, beyond(1, 1, 3))
	if _, err := windows.LoadState(form, windows.Start(false)); err == nil {
		t.Error("the state of other rules is loaded")
	}
}

func TestJudgeTakesNoPoints(t *testing.T) {
	plan := mustCompile(t, plain(0, 1), decimal.Unrounded, beyond(1, 1, 3), trend(2), cusum(0.5, 4))
	st := plan.Start(false)
	before := plan.AppendState(nil, st)
	plan.Judge(st, nil, nil, func(rules.Hit) { t.Error("a hit without a point") })
	if after := plan.AppendState(nil, st); !bytes.Equal(before, after) {
		t.Errorf("state %x becomes %x", before, after)
	}
	if st.Count() != 0 {
		t.Errorf("count %d", st.Count())
	}
}

// FuzzLoadState: no stored form, however broken, may panic, then or when judging goes on from it.
func FuzzLoadState(f *testing.F) {
	specs, _ := rules.SetByID("nelson-1984")
	plan := mustCompile(f, plain(0, 1), decimal.Unrounded, append(specs.Rules, rules.Spec{ID: "e", Kind: rules.EWMA, Lambda: 0.2, Limit: 3},
		rules.Spec{ID: "c", Kind: rules.CUSUM, Reference: 0.5, Interval: 4})...)
	st := plan.Start(false)
	plan.Judge(st, []float64{1, 2, 3}, nil, func(rules.Hit) {})
	f.Add(plan.AppendState(nil, st))
	f.Add(plan.AppendState(nil, plan.Start(true)))
	f.Fuzz(func(t *testing.T, form []byte) {
		st := plan.Start(false)
		rest, err := plan.LoadState(form, st)
		if err != nil {
			return
		}
		if again := plan.AppendState(nil, st); len(again)+len(rest) != len(form) {
			t.Fatalf("%d bytes loaded, %d left, %d stored again", len(form), len(rest), len(again))
		}
		plan.Judge(st, []float64{1, -2, 3, 0.5, 1e300, -1e300}, nil, func(rules.Hit) {})
		plan.JudgeBound(st, 5, decimal.Above, rules.Scale{Centre: 1, Sigma: 2}, func(rules.Hit) {})
	})
}
