package rules_test

import (
	"fmt"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

const (
	measured = decimal.Measured
	less     = decimal.Below // "<x"
	greater  = decimal.Above // ">x"
)

// result is one result of a series with bounds.
type result struct {
	x     float64
	bound decimal.Bound
}

func values(xs ...float64) (out []result) {
	for _, x := range xs {
		out = append(out, result{x, measured})
	}
	return out
}

// judgedBounds gives the hits of a series on a trace and which results were no points. Hits are numbered by point, as a
// result that is no point has no number.
func judgedBounds(tb testing.TB, plan *rules.Plan, series ...result) (hits []hit, unproven []int) {
	tb.Helper()
	st := plan.Start(false)
	points := 0
	for i, r := range series {
		if r.bound == measured {
			plan.Judge(st, []float64{r.x}, nil, collectInto(&hits, points))
			points++
		} else if plan.JudgeBound(st, r.x, r.bound, plan.Nominal(), collectInto(&hits, points)) {
			points++
		} else {
			unproven = append(unproven, i)
		}
	}
	return hits, unproven
}

// limitsAt is a trace with centre 10, sigma 1 and only the named action lines.
func limitsAt(upper, lower *float64) chart.Trace {
	trace := plain(10, 1)
	trace.UpperAction, trace.LowerAction = chart.Line{Basis: chart.Absent}, chart.Line{Basis: chart.Absent}
	if upper != nil {
		trace.UpperAction = chart.Line{Basis: chart.MethodCriterion, Value: *upper}
	}
	if lower != nil {
		trace.LowerAction = chart.Line{Basis: chart.MethodCriterion, Value: *lower}
	}
	return trace
}

func TestABoundIsJudgedByWhatItProves(t *testing.T) {
	hi, lo := ptr(13), ptr(7)
	cases := []struct {
		name         string
		upper, lower *float64
		r            result
		proven       bool
		side         rules.Side // NoSide: no hit
	}{
		{"above the upper line: beyond", hi, nil, result{13.1, greater}, true, upper},
		{"above a figure on the upper line: open", hi, nil, result{13, greater}, false, none},
		{"above a figure below the upper line: open", hi, nil, result{5, greater}, false, none},
		{"below a figure under the upper line, no lower line: clear", hi, nil, result{12, less}, true, none},
		{"below a figure on the upper line: not beyond it", hi, nil, result{13, less}, true, none},
		{"below a figure over the upper line: open", hi, nil, result{13.1, less}, false, none},
		{"below a figure under the upper line, with a lower line: open", hi, lo, result{12, less}, false, none},
		{"below a figure under the lower line: beyond", hi, lo, result{6.9, less}, true, lower},
		{"below a figure on the lower line: open", hi, lo, result{7, less}, false, none},
		{"above a figure on the lower line, no upper line: clear", nil, lo, result{7, greater}, true, none},
		{"above a figure under the lower line, no upper line: open", nil, lo, result{6.9, greater}, false, none},
		{"above a figure over the lower line, with an upper line: open", hi, lo, result{8, greater}, false, none},
		{"above the upper line, with a lower line: beyond", hi, lo, result{14, greater}, true, upper},
		{"no lines at all: nothing to prove, clear", nil, nil, result{14, greater}, true, none},
	}
	for _, tc := range cases {
		t.Run(tc.name, func(t *testing.T) {
			plan := mustCompile(t, limitsAt(tc.upper, tc.lower), 2, line(rules.ActionLine))
			hits, unproven := judgedBounds(t, plan, tc.r)
			var want []hit
			if tc.side != none {
				want = []hit{only(0, tc.side)}
			}
			wantHits(t, hits, want...)
			if got := len(unproven) == 0; got != tc.proven {
				t.Errorf("proven %t, want %t", got, tc.proven)
			}
		})
	}
}

func TestARuleThatWatchesOneSideLeavesTheOtherAlone(t *testing.T) {
	plan := mustCompile(t, plain(10, 1), 2, onSides(beyond(1, 1, 3), rules.UpperOnly))
	hits, unproven := judgedBounds(t, plan, result{12, less}, result{14, less}, result{14, greater}, result{12, greater})
	wantHits(t, hits, only(1, upper)) // the second result is no point, so the third is point 1
	if fmt.Sprint(unproven) != "[1 3]" {
		t.Errorf("not proven: %v, want 1 and 3", unproven)
	}
}

func TestARuleLeftOpenMattersOnlyIfItCouldBeWorse(t *testing.T) {
	warning, action := line(rules.WarningLine), line(rules.ActionLine)
	warning.Consequence, action.Consequence = rules.Look, rules.Stop
	plan := mustCompile(t, plain(10, 1), 2, warning, action)
	// >12.5 is beyond the warning line at 12; the action line at 13 is open and worse.
	if hits, unproven := judgedBounds(t, plan, result{12.5, greater}); len(hits) != 0 || len(unproven) != 1 {
		t.Errorf("hits %v, not proven %v; want a result that is not judged", hits, unproven)
	}
	// >13.5 is beyond both.
	hits, _ := judgedBounds(t, plan, result{13.5, greater})
	wantHits(t, hits, only(0, upper), only(0, upper))
	// With the consequences exchanged, >12.5 proves the worst there can be.
	warning.Consequence, action.Consequence = rules.Stop, rules.Look
	plan = mustCompile(t, plain(10, 1), 2, warning, action)
	hits, unproven := judgedBounds(t, plan, result{12.5, greater})
	wantHits(t, hits, only(0, upper))
	if len(unproven) != 0 {
		t.Error("the open rule is milder than the proven one, and yet the result is not judged")
	}
}

func TestABoundThatIsNotProvenNeitherCountsNorBreaks(t *testing.T) {
	open := result{12, less} // not proven against the lower line at 7
	for name, tc := range map[string]struct {
		spec   rules.Spec
		series []result
		want   hit
	}{
		"k of m":    {beyond(2, 3, 2), []result{{12.5, measured}, open, {12.5, measured}}, hit{1, upper, 0, 0}},
		"same side": {sameSide(3), []result{{11, measured}, {11, measured}, open, {11, measured}}, hit{2, upper, 0, 0}},
		"trend":     {trend(3), []result{{11, measured}, {12, measured}, open, {12.5, measured}}, hit{2, upper, 0, 0}},
		"cusum":     {cusum(0.5, 4), []result{{12.9, measured}, open, {12.9, measured}}, hit{1, upper, 0, 0}},
	} {
		t.Run(name, func(t *testing.T) {
			stop := beyond(1, 1, 3)
			stop.Consequence = rules.Stop
			hits, unproven := judgedBounds(t, mustCompile(t, plain(10, 1), 2, tc.spec, stop), tc.series...)
			wantHits(t, hits, tc.want)
			if len(unproven) != 1 {
				t.Errorf("not proven: %v, want the bound", unproven)
			}
		})
	}
}

func TestABoundHasASideInARunIfItFixesOne(t *testing.T) {
	run := mustCompile(t, plain(10, 1), 2, sameSide(3))
	series := func(r result) []result { return append(values(11, 11), r) }
	for _, tc := range []struct {
		r    result
		want []hit
	}{
		{result{10.01, greater}, []hit{{2, upper, 0, 0}}},
		{result{10, greater}, nil},     // the figure is on the centre: published, the value may be too
		{result{9, greater}, nil},      // either side
		{result{11, less}, nil},        // either side
		{result{9.99, less}, nil},      // the other side
		{result{10.004, less}, nil},    // rounds to the centre
		{result{10.004, greater}, nil}, // so does this
	} {
		r := tc.r
		r.x = decimal.Round(r.x, 2)
		hits, unproven := judgedBounds(t, run, series(r)...)
		wantHits(t, hits, tc.want...)
		if len(unproven) != 0 {
			t.Errorf("%+v is not judged; a run alone leaves nothing open", tc.r)
		}
	}
	t.Run("and ends the run if not", func(t *testing.T) {
		hits, _ := judgedBounds(t, run, append(series(result{9, greater}), values(11, 11, 11)...)...)
		wantHits(t, hits, hit{5, upper, 3, 3})
	})
	t.Run("points beyond by bound count among k of m", func(t *testing.T) {
		hits, _ := judgedBounds(t, mustCompile(t, plain(10, 1), 2, beyond(2, 3, 2)), result{12.1, greater}, result{10, measured}, result{12.5, measured})
		wantHits(t, hits, hit{2, upper, 0, 0})
	})
	t.Run("points beyond by bound count outside, and none inside", func(t *testing.T) {
		hits, _ := judgedBounds(t, mustCompile(t, plain(10, 1), 2, outside(3, 1), within(3, 1)),
			result{11.1, greater}, result{8.5, measured}, result{12, measured}, result{10, measured}, result{10, greater}, result{10, measured}, result{10, measured})
		wantHits(t, hits, hit{2, none, 0, 0})
	})
}

func TestKOfMIsOpenWhereOnlyTheBoundIsLacking(t *testing.T) {
	plan := mustCompile(t, plain(10, 1), 2, beyond(2, 3, 2))
	// With none beyond before it, one point cannot complete 2 of 3, so >11 leaves nothing open.
	if _, unproven := judgedBounds(t, plan, append(values(10, 10), result{11, greater})...); len(unproven) != 0 {
		t.Error("2 of 3 cannot complete here, and yet the result is not judged")
	}
	// With one beyond before it, it might.
	if _, unproven := judgedBounds(t, plan, append(values(12.5, 10), result{11, greater})...); len(unproven) != 1 {
		t.Error("2 of 3 may complete here, and yet the result is judged")
	}
	if hits, _ := judgedBounds(t, plan, append(values(12.5, 10), result{12.01, greater})...); len(hits) != 1 {
		t.Errorf("2 of 3 completes for certain: hits %v", hits)
	}
}

func TestSpanIsOpenWhereOnlyTheBoundIsLacking(t *testing.T) {
	plan := mustCompile(t, plain(10, 1), 2, span(4))
	if _, unproven := judgedBounds(t, plan, append(values(7.5), result{11, greater})...); len(unproven) != 1 {
		t.Error("the predecessor is beyond on the other side, and yet >11 is judged")
	}
	if _, unproven := judgedBounds(t, plan, append(values(10), result{11, greater})...); len(unproven) != 0 {
		t.Error("the predecessor is inside, and yet >11 is not judged")
	}
	hits, _ := judgedBounds(t, plan, append(values(7.5), result{12.1, greater})...)
	wantHits(t, hits, hit{1, upper, 0, 0})
}

func TestABoundNeverEntersATrendOrAnAlternation(t *testing.T) {
	plan := mustCompile(t, plain(10, 1), 2, trend(3))
	hits, _ := judgedBounds(t, plan, append(values(8, 9), result{20, greater})...)
	wantHits(t, hits)
	hits, _ = judgedBounds(t, plan, append(append(values(8, 9), result{9.5, greater}), values(10, 11, 12)...)...)
	wantHits(t, hits, hit{5, upper, 3, 3}) // the trend begins anew after it
	plan = mustCompile(t, plain(10, 1), 2, alternating(3))
	hits, _ = judgedBounds(t, plan, append(append(values(8, 9), result{1, less}), values(9, 8, 9)...)...)
	wantHits(t, hits, hit{5, none, 3, 3})
}

func TestABoundNeverEntersAnEWMAOrACUSUM(t *testing.T) {
	for _, spec := range []rules.Spec{ewma(0.3, 3), cusum(0.5, 4)} {
		plan := mustCompile(t, plain(10, 1), 2, spec)
		with, without := plan.Start(false), plan.Start(false)
		plan.Judge(with, []float64{11, 12}, nil, func(rules.Hit) {})
		plan.Judge(without, []float64{11, 12}, nil, func(rules.Hit) {})
		if !plan.JudgeBound(with, 99, greater, plan.Nominal(), func(rules.Hit) { t.Error("a sum completes at a bound") }) {
			t.Error("a sum leaves nothing open, and yet the bound is not judged")
		}
		if got, want := fmt.Sprint(with.Slots()[:2]), fmt.Sprint(without.Slots()[:2]); got != want {
			t.Errorf("accumulators %s after the bound, %s without it", got, want)
		}
	}
	t.Run("yet it lies between the first counting point and the signal", func(t *testing.T) {
		plan := mustCompile(t, plain(10, 1), 2, cusum(0.5, 4))
		hits, _ := judgedBounds(t, plan, result{9, measured}, result{12.5, measured}, result{99, greater}, result{13, measured})
		wantHits(t, hits, hit{3, upper, 1, 1})
		hits, _ = judgedBounds(t, plan, result{9, measured}, result{99, greater}, result{15, measured})
		wantHits(t, hits, only(2, upper))
	})
}
