package judge_test

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

// TestTheTwoExamplesOfTheContract judges the two evaluations that the contract prints, and gets the hits it prints.
func TestTheTwoExamplesOfTheContract(t *testing.T) {
	t.Run("a series with a missing value", func(t *testing.T) {
		j := mustNew(t, given(10, 1, set(t, "nelson-1984")...))
		got := j.Series([]float64{10.2, math.NaN(), 13.4})
		want := []judge.SeriesHit{{Point: 2, Role: chart.Location, Rule: 0, Side: rules.Upper, WindowFirst: 2, FirstCounting: 2}}
		if !slices.Equal(got, want) {
			t.Errorf("got %+v, want %+v", got, want)
		}
		if id := j.Plan(chart.Location).Specs()[got[0].Rule].ID; id != "nelson-1984/1" {
			t.Errorf("rule %s, want nelson-1984/1", id)
		}
	})
	t.Run("points with a sigma of their own and a break", func(t *testing.T) {
		j := mustNew(t, given(0, 1, beyond(2, 3, 2)))
		wide := measured(2.9)
		wide.Sigma = ptr(1.2)
		broken := measured(1)
		broken.Break = true
		got := verdictsOf(j, j.NewState(), measured(0), measured(2.1), wide, broken)
		if want := []judge.Standing{judge.Clear, judge.Clear, judge.ActOn, judge.Clear}; !slices.Equal(standings(got), want) {
			t.Errorf("standings %v, want %v", standings(got), want)
		}
		// windowFirst 0, firstCounting 1.
		want := []judge.Hit{{Role: chart.Location, Rule: 0, Side: rules.Upper, WindowBack: 2, FirstBack: 1}}
		if !slices.Equal(got[2].Hits, want) {
			t.Errorf("hits %+v, want %+v", got[2].Hits, want)
		}
	})
}

func TestStandingIsTheWorstOfBothTraces(t *testing.T) {
	with := func(c rules.Consequence, s rules.Spec) rules.Spec { s.Consequence = c; return s }
	j := mustNew(t, judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: 2, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, with(rules.Look, beyond(1, 1, 2)), with(rules.Act, beyond(1, 1, 3))),
		trace(1.13, 0.85, with(rules.Stop, beyond(1, 1, 3))),
	}})
	got := standings(verdictsOf(j, j.NewState(), measured(10), measured(12.5), measured(13.5), measured(9), measured(9.1)))
	// The last range but one is 4.5, beyond 1.13 + 3·0.85 = 3.68.
	want := []judge.Standing{judge.Clear, judge.LookAt, judge.ActOn, judge.StopAt, judge.Clear}
	if !slices.Equal(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestAResultThatIsNoPointNeitherCountsNorBreaks(t *testing.T) {
	j := mustNew(t, judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: 2, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, beyond(2, 2, 1), beyond(1, 1, 3)), trace(1.13, 0.85, beyond(1, 1, 3))}})
	for name, between := range map[string]judge.Point{"no result": {}, "a bound that proves nothing": less(11)} {
		t.Run(name, func(t *testing.T) {
			st := j.NewState()
			got := verdictsOf(j, st, measured(11.5), between, measured(11.6))
			if got[1].Standing != judge.NotJudged || got[1].Reason == judge.Judged || len(got[1].Hits) > 0 || got[1].Traces[chart.Location].Point {
				t.Errorf("in between: %+v, want it not judged", got[1])
			}
			if got[2].Standing != judge.ActOn {
				t.Errorf("2 of 2 around it: %v, want ACT", got[2].Standing)
			}
			if mr := got[2].Traces[chart.Dispersion]; !mr.Point || mr.Statistic != 0.1 {
				t.Errorf("moving range %+v, want 0.1 to the point before it", mr)
			}
			plain := verdictsOf(j, j.NewState(), measured(11.5), measured(11.6))
			if fmt.Sprint(got[2]) != fmt.Sprint(plain[1]) {
				t.Errorf("the point after it: %+v, without it %+v", got[2], plain[1])
			}
		})
	}
	if v := verdictsOf(j, j.NewState(), judge.Point{})[0]; v.Reason != judge.NoResult {
		t.Errorf("no readings: reason %v", v.Reason)
	}
	if v := verdictsOf(j, j.NewState(), less(11))[0]; v.Reason != judge.BoundProvesNothing || v.ByBound {
		t.Errorf("a bound that proves nothing: %+v", v)
	}
}

func TestAMovingRangeReachesAcrossNoBreakAndNoBound(t *testing.T) {
	upperOnly := rules.Spec{Kind: rules.Beyond, K: 1, M: 1, Z: 3, Sides: rules.UpperOnly}
	j := mustNew(t, judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: 2, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, upperOnly), trace(1.13, 0.85, beyond(1, 1, 3))}})
	ranges := func(points ...judge.Point) (out []any) {
		for _, v := range verdictsOf(j, j.NewState(), points...) {
			if mr := v.Traces[chart.Dispersion]; mr.Point {
				out = append(out, mr.Statistic)
			} else {
				out = append(out, "none")
			}
		}
		return out
	}
	broken := measured(12)
	broken.Break = true
	brokenGap := judge.Point{Break: true}
	for _, tc := range []struct {
		name   string
		points []judge.Point
		want   string
	}{
		{"neighbours", []judge.Point{measured(10), measured(12), measured(11.5)}, "[none 2 0.5]"},
		{"a break", []judge.Point{measured(10), broken, measured(11.5)}, "[none none 0.5]"},
		{"a break at a missing result", []judge.Point{measured(10), brokenGap, measured(12), measured(12.25)}, "[none none none 0.25]"},
		{"a bound that is judged", []judge.Point{measured(10), less(12), measured(12), measured(12.25)}, "[none none none 0.25]"},
		{"0.3 less 0.2", []judge.Point{measured(0.2), measured(0.3)}, "[none 0.1]"},
		{"falling", []judge.Point{measured(0.3), measured(-0.1)}, "[none 0.4]"},
	} {
		if got := fmt.Sprint(ranges(tc.points...)); got != tc.want {
			t.Errorf("%s: moving ranges %s, want %s", tc.name, got, tc.want)
		}
	}
	if v := verdictsOf(j, j.NewState(), less(12))[0]; v.Standing != judge.Clear || !v.ByBound || v.Traces[chart.Location].Statistic != 12 {
		t.Errorf("<12 with an upper line at 13 only: %+v, want CLEAR by bound", v)
	}
	if v := verdictsOf(j, j.NewState(), greater(13.01))[0]; v.Standing != judge.ActOn || !v.ByBound || len(v.Hits) != 1 {
		t.Errorf(">13.01 with an upper line at 13: %+v, want ACT by bound", v)
	}
}

// TestABoundIsClearOnlyWhereARuleWatchesIt: a bound enters the rules about its own place and about runs. Where there are
// no others it is not judged, is no point, and leaves the state as it was.
func TestABoundIsClearOnlyWhereARuleWatchesIt(t *testing.T) {
	sums := []rules.Spec{trend(6), {Kind: rules.Alternating, N: 14}, {Kind: rules.EWMA, Lambda: 0.2, Limit: 3}, {Kind: rules.CUSUM, Reference: 0.5, Interval: 5}}
	for _, tc := range []struct {
		name  string
		rules []rules.Spec
		want  judge.Standing
	}{
		{"no rule", nil, judge.NotJudged},
		{"rules that need values", sums, judge.NotJudged},
		{"a line", []rules.Spec{{Kind: rules.Beyond, K: 1, M: 1, Z: 3, Sides: rules.UpperOnly}}, judge.Clear},
		{"a run beside rules that need values", append(slices.Clone(sums), sameSide(8)), judge.Clear},
		{"a span", []rules.Spec{{Kind: rules.Span, Z: 2}}, judge.Clear},
		{"points within", []rules.Spec{{Kind: rules.Within, N: 15, Z: 1}}, judge.Clear},
		{"points outside", []rules.Spec{{Kind: rules.Outside, N: 8, Z: 1}}, judge.Clear},
	} {
		t.Run(tc.name, func(t *testing.T) {
			j := mustNew(t, judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: 2, Traces: [chart.Roles]*judge.Trace{
				trace(10, 1, tc.rules...), trace(1.13, 0.85, beyond(1, 1, 3))}})
			st, before := j.NewState(), j.NewState()
			verdictsOf(j, st, measured(10.2))
			j.CopyState(before, st)
			v := verdictsOf(j, st, less(12))[0]
			if v.Standing != tc.want {
				t.Fatalf("<12: %v %v, want %v", v.Standing, v.Reason, tc.want)
			}
			if tc.want == judge.NotJudged {
				if v.Reason != judge.BoundProvesNothing || v.ByBound || v.Traces[chart.Location].Point {
					t.Errorf("<12: %+v, want no point, BOUND_PROVES_NOTHING", v)
				}
				if got, want := j.AppendState(nil, st), j.AppendState(nil, before); !bytes.Equal(got, want) {
					t.Errorf("state %x, before it %x", got, want)
				}
			}
		})
	}
}

func TestBoundsInSubgroupsBoundTheMean(t *testing.T) {
	upperOnly := rules.Spec{Kind: rules.Beyond, K: 1, M: 1, Z: 3, Sides: rules.UpperOnly}
	j := mustNew(t, judge.Limits{Kind: chart.XbarR, SubgroupSize: 2, Places: 2, ProcessSigma: 1, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, upperOnly), trace(1.13, 0.85, beyond(1, 1, 3))}})
	const m, b, a = decimal.Measured, decimal.Below, decimal.Above
	for _, tc := range []struct {
		readings []float64
		bounds   []decimal.Bound
		standing judge.Standing
		mean     float64
	}{
		{[]float64{12, 10}, []decimal.Bound{b, m}, judge.Clear, 11},
		{[]float64{12, 10}, []decimal.Bound{b, b}, judge.Clear, 11},
		{[]float64{14, 13}, []decimal.Bound{a, m}, judge.ActOn, 13.5},
		{[]float64{14, 13}, []decimal.Bound{b, m}, judge.NotJudged, 0},
		{[]float64{10, 10}, []decimal.Bound{a, m}, judge.NotJudged, 0},
		{[]float64{10, 10}, []decimal.Bound{a, b}, judge.NotJudged, 0}, // both ways: nothing is known of the mean
		{[]float64{10, 10}, []decimal.Bound{m, m}, judge.Clear, 10},
	} {
		v := verdictsOf(j, j.NewState(), judge.Point{Readings: tc.readings, Bounds: tc.bounds})[0]
		if v.Standing != tc.standing || v.Traces[chart.Location].Statistic != tc.mean {
			t.Errorf("%v %v: %+v, want %v with mean %v", tc.readings, tc.bounds, v, tc.standing, tc.mean)
		}
		hasBound := slices.Contains(tc.bounds, a) || slices.Contains(tc.bounds, b)
		if v.Traces[chart.Dispersion].Point == hasBound {
			t.Errorf("%v %v: dispersion point %t", tc.readings, tc.bounds, v.Traces[chart.Dispersion].Point)
		}
	}
}

func TestASubgroupOfOneReadingHasALocationOnly(t *testing.T) {
	l := judge.Limits{Kind: chart.XbarR, SubgroupSize: 4, Places: 3, ProcessSigma: 2, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, beyond(1, 1, 3)), trace(4.118, 1.76, beyond(1, 1, 3))}}
	j := mustNew(t, l)
	v := verdictsOf(j, j.NewState(), measured(15.9), measured(16.1), measured(13.01, 13.01, 13.01, 13.01))
	// One reading has sigma 2: its line is at 16; four have sigma 1: theirs is at 13.
	if got, want := standings(v), []judge.Standing{judge.Clear, judge.ActOn, judge.ActOn}; !slices.Equal(got, want) {
		t.Errorf("standings %v, want %v", got, want)
	}
	if v[0].Traces[chart.Dispersion].Point || !v[2].Traces[chart.Dispersion].Point {
		t.Error("one reading has a range, or four have none")
	}
	l.Traces[chart.Location] = nil
	j = mustNew(t, l)
	if v := verdictsOf(j, j.NewState(), measured(16.1))[0]; v.Standing != judge.NotJudged || v.Reason != judge.TooFewReadings {
		t.Errorf("one reading with a dispersion trace only: %+v", v)
	}
	t.Run("without a process sigma a smaller subgroup is not judged", func(t *testing.T) {
		l := judge.Limits{Kind: chart.XbarR, SubgroupSize: 4, Places: 3, Traces: [chart.Roles]*judge.Trace{trace(10, 1, beyond(1, 1, 3)), nil}}
		j := mustNew(t, l)
		got := verdictsOf(j, j.NewState(), measured(10, 11, 10), measured(10, 11, 10, 11))
		if got[0].Standing != judge.NotJudged || got[0].Reason != judge.TooFewReadings || got[1].Standing != judge.Clear {
			t.Errorf("got %+v", got)
		}
	})
}

func TestWhatIsPublishedIsWhatIsJudged(t *testing.T) {
	// The mean of 0.125 and 0.126 is 0.1255; published to three decimals it is 0.126, and so is the line at 0.12551.
	action := rules.Spec{Kind: rules.BeyondLine, Line: rules.ActionLine}
	tr := trace(0.1, 0.01, action)
	tr.UpperAction = chart.Line{Basis: chart.MethodCriterion, Value: 0.12551}
	j := mustNew(t, judge.Limits{Kind: chart.XbarR, SubgroupSize: 2, Places: 3, Traces: [chart.Roles]*judge.Trace{tr, nil}})
	v := verdictsOf(j, j.NewState(), measured(0.125, 0.126), measured(0.126, 0.127))
	if got := v[0].Traces[chart.Location].Statistic; got != 0.126 || v[0].Standing != judge.Clear {
		t.Errorf("mean %v is %v, want 0.126 CLEAR", got, v[0].Standing)
	}
	if got := v[1].Traces[chart.Location].Statistic; got != 0.127 || v[1].Standing != judge.ActOn {
		t.Errorf("mean %v is %v, want 0.127 ACT", got, v[1].Standing)
	}
	lines := j.Lines(chart.Location, j.Plan(chart.Location).Nominal())
	if *lines.UpperAction != 0.126 || *lines.LowerAction != 0.07 || *lines.UpperWarning != 0.12 || *lines.Centre != 0.1 {
		t.Errorf("lines %v %v %v %v", *lines.UpperAction, *lines.LowerAction, *lines.UpperWarning, *lines.Centre)
	}
}

func TestLinesThatCannotBeAreAbsent(t *testing.T) {
	low := trace(1.128, 0.853)
	low.UpperWarning = chart.Line{Basis: chart.Absent}
	j := mustNew(t, judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: 3, Traces: [chart.Roles]*judge.Trace{trace(1, 1), low}})
	lines := j.Lines(chart.Dispersion, j.Plan(chart.Dispersion).Nominal())
	if lines.LowerAction != nil || lines.LowerWarning != nil || lines.UpperWarning != nil || *lines.UpperAction != 3.687 {
		t.Errorf("moving range lines %+v: those below zero and the absent one should be missing", lines)
	}
	if lines := j.Lines(chart.Location, j.Plan(chart.Location).Nominal()); *lines.LowerAction != -2 {
		t.Errorf("lower action line of the location trace at %v, want -2", *lines.LowerAction)
	}
	fixedOnly := &judge.Trace{Trace: chart.Trace{UpperAction: chart.Line{Basis: chart.MethodCriterion, Value: 2}}}
	j = mustNew(t, judge.Limits{Places: 1, Traces: [chart.Roles]*judge.Trace{fixedOnly, nil}})
	lines = j.Lines(chart.Location, j.Plan(chart.Location).Nominal())
	if lines.Centre != nil || lines.LowerAction != nil || lines.LowerWarning != nil || lines.UpperWarning != nil || *lines.UpperAction != 2 {
		t.Errorf("lines %+v of a trace with one fixed line", lines)
	}
	if (j.Lines(chart.Dispersion, rules.Scale{}) != judge.Lines{}) {
		t.Error("a trace that is not judged has lines")
	}
}

func TestNewNamesTheFieldAndTheLimit(t *testing.T) {
	good := func() judge.Limits { return given(10, 1, beyond(1, 1, 3)) }
	fixed := func(lower, upper float64) func(*judge.Limits) {
		return func(l *judge.Limits) {
			l.Traces[0].LowerAction = chart.Line{Basis: chart.Target, Value: lower}
			l.Traces[0].UpperAction = chart.Line{Basis: chart.Target, Value: upper}
		}
	}
	for _, tc := range []struct {
		change func(*judge.Limits)
		want   string
	}{
		{func(*judge.Limits) {}, ""},
		{func(l *judge.Limits) { l.Places = 15 }, ""},
		{func(l *judge.Limits) { l.Places = 16 }, "published_decimals: 16: want 0 to 15"},
		{func(l *judge.Limits) { l.Places = -2 }, "published_decimals: -2: "},
		{func(l *judge.Limits) { l.Kind, l.SubgroupSize = chart.Individuals, 2 }, "subgroup_size: "},
		{func(l *judge.Limits) { l.Kind, l.SubgroupSize = chart.XbarR, 1 }, "subgroup_size: "},
		{func(l *judge.Limits) { l.Kind, l.SubgroupSize = chart.XbarS, 101 }, "subgroup_size: "},
		{func(l *judge.Limits) { l.ProcessSigma = -1 }, "process_sigma: -1: want a finite number of at least 0"},
		{func(l *judge.Limits) { l.ProcessSigma = math.NaN() }, "process_sigma: NaN: "},
		{func(l *judge.Limits) { l.Traces[0] = nil }, "location: "},
		{func(l *judge.Limits) { l.Traces[1] = trace(1, 1) }, "dispersion: "},
		{func(l *judge.Limits) { l.Traces[0].Centre = ptr(math.Inf(1)) }, "location.centre: +Inf: want a finite number"},
		{func(l *judge.Limits) { l.Traces[0].Sigma = ptr(0) }, "location.sigma: 0: want a finite number above 0"},
		{func(l *judge.Limits) { l.Traces[0].Sigma = ptr(math.NaN()) }, "location.sigma: NaN: "},
		{func(l *judge.Limits) { l.Traces[0].Centre = nil }, "location.rules[0].rule: a needs a centre"},
		{func(l *judge.Limits) { l.Traces[0].Rules[0].K = 2 }, "location.rules[0].beyond.k: 2: want 1 to m, which is 1"},
		{fixed(1, 2), ""},
		{fixed(2, 2), "location.lower_action: value 2 is not below upper_action, 2"},
		{fixed(math.NaN(), 2), "location.lower_action: value NaN: want a finite number"},
		{fixed(1, math.Inf(1)), "location.upper_action: value +Inf: "},
		{func(l *judge.Limits) {
			l.Kind, l.SubgroupSize = chart.Individuals, 1
			l.Traces[1] = trace(1, -1)
		}, "dispersion.sigma: -1: "},
	} {
		l := good()
		tc.change(&l)
		_, err := judge.New(l)
		if tc.want == "" {
			if err != nil {
				t.Error(err)
			}
			continue
		}
		var e *judge.Error
		if !errors.As(err, &e) || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("got %v, want %s...", err, tc.want)
		}
	}
}

func TestNamesOfStandingsAndReasons(t *testing.T) {
	for s, want := range map[judge.Standing]string{judge.NotJudged: "NOT_JUDGED", judge.Clear: "CLEAR", judge.LookAt: "LOOK", judge.ActOn: "ACT", judge.StopAt: "STOP"} {
		if s.String() != want {
			t.Errorf("standing %d is %q, want %q", s, s, want)
		}
	}
	for c, want := range map[rules.Consequence]judge.Standing{rules.Look: judge.LookAt, rules.Act: judge.ActOn, rules.Stop: judge.StopAt} {
		if got := judge.StandingOf(c); got != want || got.String() != c.String() {
			t.Errorf("%v leads to %v", c, got)
		}
	}
	for r, want := range map[judge.Reason]string{judge.Judged: "", judge.NoResult: "NO_RESULT", judge.NoVersion: "NO_VERSION_IN_FORCE",
		judge.TooFewReadings: "TOO_FEW_READINGS", judge.BoundProvesNothing: "BOUND_PROVES_NOTHING", judge.Voided: "VOIDED"} {
		if r.String() != want {
			t.Errorf("reason %d is %q, want %q", r, r, want)
		}
	}
}
