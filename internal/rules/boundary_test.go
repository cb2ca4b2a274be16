package rules_test

import (
	"math"
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// Each test is one sentence about ties, windows and sides; the wanted hits are worked by hand.

const upper, lower, none = rules.Upper, rules.Lower, rules.NoSide

func TestOnTheLineIsNotBeyond(t *testing.T) {
	wantHits(t, judged(t, beyond(1, 1, 3), 3, math.Nextafter(3, 4), -3, math.Nextafter(-3, -4)), only(1, upper), only(3, lower))
	wantHits(t, judged(t, beyond(2, 3, 2), 2, 2, 2, 2.5, 2, 2.5), hit{5, upper, 3, 3})
	for _, kind := range []rules.LineKind{rules.ActionLine, rules.WarningLine} {
		z := map[rules.LineKind]float64{rules.ActionLine: 3, rules.WarningLine: 2}[kind]
		wantHits(t, judged(t, line(kind), z, z+0.01, -z, -z-0.01), only(1, upper), only(3, lower))
	}
}

func TestOnTheCentreIsOnNoSideAndEndsASameSideRun(t *testing.T) {
	wantHits(t, judged(t, sameSide(3), 1, 1, 0, 1, 1, 1), hit{5, upper, 3, 3})
	wantHits(t, judged(t, sameSide(2), 0, 0, 0, -1, -1, 0, -1), hit{4, lower, 3, 3})
	wantHits(t, judged(t, beyond(2, 2, 0), 0, 0, 1, 0, 1, 1), hit{5, upper, 4, 4})
	wantHits(t, judged(t, sameSide(2), 5e-324, 5e-324), hit{1, upper, 0, 0})
}

func TestNegativeZeroIsOnACentreOfZero(t *testing.T) {
	negativeZero := math.Copysign(0, -1)
	for _, centre := range []float64{0, negativeZero} {
		for _, spec := range []rules.Spec{beyond(1, 1, 0), sameSide(2), outside(2, 0), trend(2), alternating(3)} {
			plan := mustCompile(t, plain(centre, 1), decimal.Unrounded, spec)
			xs := []float64{0, negativeZero, 0, 0, negativeZero, negativeZero, 0}
			var whole, single, sized []hit
			plan.Judge(plan.Start(false), xs, nil, collectInto(&whole, 0))
			st := plan.Start(false)
			for i, x := range xs {
				plan.Judge(st, []float64{x}, nil, collectInto(&single, i))
			}
			st = plan.Start(false)
			for i, x := range xs {
				plan.Judge(st, []float64{x}, []rules.Scale{{Centre: xs[i], Sigma: 2}}, collectInto(&sized, i))
			}
			if len(whole)+len(single)+len(sized) > 0 {
				t.Errorf("kind %d, centre %v: hits %v, %v, %v on points that are all zero", spec.Kind, centre, whole, single, sized)
			}
		}
	}
}

func TestOnTheLineIsNeitherWithinNorOutside(t *testing.T) {
	wantHits(t, judged(t, within(3, 1), 0.5, -0.5, 1, 0, 0.9, -0.9, -1, 0), hit{5, none, 3, 3})
	wantHits(t, judged(t, outside(3, 1), 1.5, -1.5, 1, 2, -2, 2, -1), hit{5, none, 3, 3})
}

func TestEqualNeighboursEndATrendAndAnAlternation(t *testing.T) {
	wantHits(t, judged(t, trend(4), 1, 2, 3, 3, 4, 5, 6), hit{6, upper, 3, 3})
	wantHits(t, judged(t, trend(3), 3, 2, 2, 1, 0), hit{4, lower, 2, 2})
	wantHits(t, judged(t, alternating(4), 0, 1, 0, 0, 1, 0, 1), hit{6, none, 3, 3})
	wantHits(t, judged(t, alternating(3), 0, 1, 0), hit{2, none, 0, 0})
	wantHits(t, judged(t, alternating(3), 0, 1, 1, 1))
}

func TestATrendCountsPointsAndNotSteps(t *testing.T) {
	wantHits(t, judged(t, trend(6), 1, 2, 3, 4, 5, 6, 7), hit{5, upper, 0, 0}, hit{6, upper, 1, 1})
	wantHits(t, judged(t, trend(2), 1, 2), hit{1, upper, 0, 0})
}

func TestATenthAndTwoTenthsLieOnALineAtThreeTenths(t *testing.T) {
	a, b := 0.1, 0.2
	if a+b <= 0.3 {
		t.Fatal("float64 adds these exactly here; the test shows nothing")
	}
	t.Run("a published sum is on the line", func(t *testing.T) {
		// Centre 0, sigma 0.1: the upper action line is 0.3.
		for places := 1; places <= 9; places++ {
			plan := mustCompile(t, plain(0, 0.1), places, beyond(1, 1, 3), line(rules.ActionLine))
			var hits []hit
			plan.Judge(plan.Start(false), []float64{decimal.Round(a+b, places), decimal.Round(-a-b, places)}, nil, collectInto(&hits, 0))
			wantHits(t, hits)
		}
	})
	t.Run("a line of such parts is where paper puts it", func(t *testing.T) {
		// Centre 0.1, sigma 0.1, 2 sigma: 0.1 + 0.2 is 0.3 whether rounded or not.
		for _, places := range []int{decimal.Unrounded, 1, 4, 15} {
			plan := mustCompile(t, plain(0.1, 0.1), places, beyond(1, 1, 2))
			var hits []hit
			plan.Judge(plan.Start(false), []float64{0.3, 0.4, -0.1, -0.2}, nil, collectInto(&hits, 0))
			wantHits(t, hits, only(1, upper), only(3, lower))
		}
	})
}

func TestLinesRoundHalfAwayFromZeroToThePublishedDecimals(t *testing.T) {
	// Centre 0, sigma 0.0415: 3 sigma is 0.1245, published 0.12 or 0.125; a line in binary would be 0.12449999...
	for _, tc := range []struct {
		places int
		on     float64
	}{{2, 0.12}, {3, 0.125}, {4, 0.1245}} {
		for _, sign := range []float64{1, -1} {
			plan := mustCompile(t, plain(0, 0.0415), tc.places, beyond(1, 1, 3))
			next := decimal.Round(tc.on+math.Pow10(-tc.places), tc.places)
			var hits []hit
			plan.Judge(plan.Start(false), []float64{sign * tc.on, sign * next}, nil, collectInto(&hits, 0))
			wantHits(t, hits, only(1, map[float64]rules.Side{1: upper, -1: lower}[sign]))
		}
	}
	t.Run("fixed lines and the centre too", func(t *testing.T) {
		trace := plain(10.005, 1)
		trace.UpperAction = chart.Line{Basis: chart.MethodCriterion, Value: 12.345}
		plan := mustCompile(t, trace, 2, line(rules.ActionLine), sameSide(2))
		var hits []hit
		plan.Judge(plan.Start(false), []float64{12.35, 12.36, 10.01, 10.01}, nil, collectInto(&hits, 0))
		wantHits(t, hits, hit{1, upper, 1, 1}, hit{1, upper, 0, 0})
	})
}

func TestKOfMAtTheStartOfASegmentNeedsNoFullWindow(t *testing.T) {
	wantHits(t, judged(t, beyond(2, 3, 2), 2.1, 2.2), hit{1, upper, 0, 0})
	wantHits(t, judged(t, beyond(4, 5, 1), -2, -2, 0, -2, -2), hit{4, lower, 0, 0})
	wantHits(t, judged(t, beyond(2, 64, 2), 0, 3, 0, 3), hit{3, upper, 0, 1})
}

func TestKOfMNeedsTheNewestPointBeyond(t *testing.T) {
	// At 2 two of three are beyond, but 2 itself is back inside; at 3 it is beyond again.
	wantHits(t, judged(t, beyond(2, 3, 2), 2.5, 0, 2.5, 0, 2.5), hit{2, upper, 0, 0}, hit{4, upper, 2, 2})
	wantHits(t, judged(t, beyond(2, 3, 2), 2.5, 2.5, 0), hit{1, upper, 0, 0})
}

func TestKOfMCountsOneSideOnly(t *testing.T) {
	wantHits(t, judged(t, beyond(2, 3, 2), 2.5, -2.5, 2.5, -2.5), hit{2, upper, 0, 0}, hit{3, lower, 1, 1})
	wantHits(t, judged(t, beyond(2, 2, 2), 2.5, -2.5))
}

func TestFirstCountingPointIsTheEarliestBeyondInTheWindow(t *testing.T) {
	wantHits(t, judged(t, beyond(2, 4, 2), 0, 3, 0, 0, 3), hit{4, upper, 1, 1})
	wantHits(t, judged(t, beyond(2, 4, 2), 0, 0, 3, 0, 3), hit{4, upper, 1, 2})
	wantHits(t, judged(t, beyond(1, 4, 2), 3, 0, 0, 3), only(0, upper), hit{3, upper, 0, 0})
	wantHits(t, judged(t, beyond(3, 64, 2), slices.Concat([]float64{3, 3}, make([]float64, 61), []float64{3, 3})...),
		hit{63, upper, 0, 0}, hit{64, upper, 1, 1})
	wantHits(t, judged(t, sameSide(64), slices.Repeat([]float64{1}, 65)...), hit{63, upper, 0, 0}, hit{64, upper, 1, 1})
}

func TestOutsideNeedsBothSidesUnlessOneSideIsAllowed(t *testing.T) {
	wantHits(t, judged(t, outside(3, 1), 2, 2, 2))
	wantHits(t, judged(t, outside(3, 1), 2, 2, -2, -2, -2), hit{2, none, 0, 0}, hit{3, none, 1, 1})
	oneSide := outside(3, 1)
	oneSide.OneSideOK = true
	wantHits(t, judged(t, oneSide, 2, 2, 2, -2, -2, -2), hit{2, upper, 0, 0}, hit{3, none, 1, 1}, hit{4, none, 2, 2}, hit{5, lower, 3, 3})
}

func TestSpanNeedsNeighboursBeyondHalfOnOppositeSides(t *testing.T) {
	wantHits(t, judged(t, span(4), 2.1, -2.1), hit{1, lower, 0, 0})
	wantHits(t, judged(t, span(4), -2.1, 2.1), hit{1, upper, 0, 0})
	wantHits(t, judged(t, span(4), 2, -2.1))   // on the line
	wantHits(t, judged(t, span(4), 2.5, -1.7)) // 4.2 apart, but one is not beyond 2
	wantHits(t, judged(t, span(4), 2.5, 0, -2.5))
	wantHits(t, judged(t, onSides(span(4), rules.UpperOnly), 2.5, -2.5, 2.5), hit{2, upper, 1, 1})
}

func TestOnlyTheWatchedSideCompletes(t *testing.T) {
	both := []float64{4, -4, 4, -4}
	wantHits(t, judged(t, onSides(beyond(1, 1, 3), rules.UpperOnly), both...), only(0, upper), only(2, upper))
	wantHits(t, judged(t, onSides(beyond(1, 1, 3), rules.LowerOnly), both...), only(1, lower), only(3, lower))
	wantHits(t, judged(t, onSides(line(rules.WarningLine), rules.LowerOnly), both...), only(1, lower), only(3, lower))
	wantHits(t, judged(t, onSides(sameSide(2), rules.UpperOnly), 1, 1, -1, -1), hit{1, upper, 0, 0})
	wantHits(t, judged(t, onSides(trend(3), rules.LowerOnly), 1, 2, 3, 2, 1), hit{4, lower, 2, 2})
	wantHits(t, judged(t, onSides(cusum(0.5, 4), rules.LowerOnly), 9, -9), only(1, lower))
	wantHits(t, judged(t, onSides(ewma(1, 3), rules.UpperOnly), 4, -4), only(0, upper))
}

func TestASegmentStartsWithNothing(t *testing.T) {
	for name, tc := range map[string]struct {
		spec          rules.Spec
		before, after []float64
	}{
		"k of m":      {beyond(2, 3, 2), []float64{3}, []float64{3}},
		"same side":   {sameSide(3), []float64{1, 1}, []float64{1}},
		"trend":       {trend(3), []float64{1, 2}, []float64{3}},
		"alternating": {alternating(3), []float64{1, 2}, []float64{1}},
		"within":      {within(3, 1), []float64{0, 0}, []float64{0}},
		"outside":     {outside(2, 1), []float64{2}, []float64{-2}},
		"span":        {span(4), []float64{3}, []float64{-3}},
		"ewma":        {ewma(0.5, 3), []float64{2.9}, []float64{2.9}},
		"cusum":       {cusum(0.5, 4), []float64{4, 0.5}, []float64{4}},
	} {
		t.Run(name, func(t *testing.T) {
			if len(judged(t, tc.spec, slices.Concat(tc.before, tc.after)...)) == 0 {
				t.Fatal("completes nowhere even without a break; the test shows nothing")
			}
			plan := mustCompile(t, plain(0, 1), decimal.Unrounded, tc.spec)
			st := plan.Start(false)
			var hits []hit
			plan.Judge(st, tc.before, nil, collectInto(&hits, 0))
			plan.Reset(st, false)
			plan.Judge(st, tc.after, nil, collectInto(&hits, len(tc.before)))
			wantHits(t, hits)
		})
	}
}

func TestNeighboursOfUnequalScaleCompareByZToNineDecimals(t *testing.T) {
	judgeAt := func(spec rules.Spec, xs []float64, at []rules.Scale) (hits []hit) {
		plan := mustCompile(t, plain(0, 1), decimal.Unrounded, spec)
		plan.Judge(plan.Start(false), xs, at, collectInto(&hits, 0))
		// Points one at a time compare alike: the scale of the last is remembered.
		var single []hit
		st := plan.Start(false)
		for i := range xs {
			plan.Judge(st, xs[i:i+1], at[i:i+1], collectInto(&single, i))
		}
		wantHits(t, single, hits...)
		return hits
	}
	one, two := rules.Scale{Sigma: 1}, rules.Scale{Sigma: 2}
	t.Run("a higher value may have a lower z", func(t *testing.T) {
		wantHits(t, judgeAt(trend(2), []float64{1, 1.5}, []rules.Scale{one, two}), hit{1, lower, 0, 0})
		wantHits(t, judgeAt(trend(2), []float64{1, 1.5}, []rules.Scale{two, one}), hit{1, upper, 0, 0})
	})
	t.Run("equal scales compare by statistic", func(t *testing.T) {
		// z differs by less than half of the ninth decimal; the statistics differ.
		wide := rules.Scale{Sigma: 1e12}
		wantHits(t, judgeAt(trend(2), []float64{1, 2}, []rules.Scale{wide, wide}), hit{1, upper, 0, 0})
		wantHits(t, judgeAt(trend(2), []float64{1, 2}, []rules.Scale{wide, {Sigma: 1.5e12}}))
	})
	t.Run("z equal on paper are equal", func(t *testing.T) {
		// (0.3-0.1)/0.1 = 2 = 2/1, though float64 gives 1.9999999999999998 for the first.
		tenth := rules.Scale{Centre: 0.1, Sigma: 0.1}
		wantHits(t, judgeAt(trend(2), []float64{0.3, 2, 0.3}, []rules.Scale{tenth, one, tenth}))
		wantHits(t, judgeAt(alternating(3), []float64{0.3, 2, 0.3}, []rules.Scale{tenth, one, tenth}))
		wantHits(t, judgeAt(trend(2), []float64{0.3, 2.000000001}, []rules.Scale{tenth, one}), hit{1, upper, 0, 0})
		wantHits(t, judgeAt(trend(2), []float64{0.3, 2.0000000004}, []rules.Scale{tenth, one}))
	})
	t.Run("a centre of its own counts too", func(t *testing.T) {
		wantHits(t, judgeAt(trend(2), []float64{5, 1}, []rules.Scale{{Centre: 5, Sigma: 1}, one}), hit{1, upper, 0, 0})
	})
	t.Run("every point is compared with lines of its own scale", func(t *testing.T) {
		wantHits(t, judgeAt(beyond(2, 3, 2), []float64{0, 2.1, 2.9}, []rules.Scale{one, one, {Sigma: 1.2}}), hit{2, upper, 0, 1})
		wantHits(t, judgeAt(beyond(2, 3, 2), []float64{0, 2.1, 2.4}, []rules.Scale{one, one, {Sigma: 1.2}}))
	})
}

func TestLinesFollowTheirBasis(t *testing.T) {
	trace := plain(10, 1)
	trace.UpperAction = chart.Line{Basis: chart.MethodCriterion, Value: 11}
	trace.LowerAction = chart.Line{Basis: chart.Absent}
	trace.UpperWarning = chart.Line{Basis: chart.Target, Value: 10.5}
	xs := []float64{11, 11.5, 10.5, 10.6, 6.9, 8, 7.9}
	for name, tc := range map[string]struct {
		spec rules.Spec
		want []hit
	}{
		"a method criterion moves its line":         {line(rules.ActionLine), []hit{only(1, upper)}},
		"a target moves its line, sigma lines stay": {line(rules.WarningLine), []hit{only(0, upper), only(1, upper), only(3, upper), only(4, lower), only(6, lower)}},
		"rules in sigmas do not follow the lines":   {beyond(1, 1, 3), []hit{only(4, lower)}},
	} {
		t.Run(name, func(t *testing.T) {
			plan := mustCompile(t, trace, 2, tc.spec)
			var hits []hit
			plan.Judge(plan.Start(false), xs, nil, collectInto(&hits, 0))
			wantHits(t, hits, tc.want...)
		})
	}
	t.Run("fixed lines need neither centre nor sigma", func(t *testing.T) {
		trace := chart.Trace{UpperAction: chart.Line{Basis: chart.MethodCriterion, Value: 11}}
		plan := mustCompile(t, trace, 2, line(rules.ActionLine), line(rules.WarningLine), trend(2))
		var hits []hit
		plan.Judge(plan.Start(false), []float64{-1e300, 11, 11.01}, nil, collectInto(&hits, 0))
		wantHits(t, hits, hit{1, upper, 0, 0}, only(2, upper), hit{2, upper, 1, 1})
	})
	t.Run("fixed lines stay where a sigma of its own moves the others", func(t *testing.T) {
		trace := plain(10, 1)
		trace.UpperAction = chart.Line{Basis: chart.MethodCriterion, Value: 11}
		plan := mustCompile(t, trace, 2, line(rules.ActionLine), line(rules.WarningLine))
		var hits []hit
		plan.Judge(plan.Start(false), []float64{11.5, 12.5, 14.5}, []rules.Scale{{Centre: 10, Sigma: 2}, {Centre: 10, Sigma: 2}, {Centre: 10, Sigma: 2}}, collectInto(&hits, 0))
		wantHits(t, hits, only(0, upper), only(1, upper), only(2, upper), only(2, upper))
	})
}

func TestHitsComeByPointThenRuleThenUpperBeforeLower(t *testing.T) {
	headStart := cusum(0, 1)
	headStart.HeadStart = 1
	plan := mustCompile(t, plain(0, 1), decimal.Unrounded, within(1+1, 3), headStart, beyond(1, 1, 0.1))
	st := plan.Start(true)
	var got []rules.Hit
	plan.Judge(st, []float64{0.5, 0.5, -2}, nil, func(h rules.Hit) { got = append(got, h) })
	want := []rules.Hit{
		{Point: 0, Rule: 1, Side: upper}, {Point: 0, Rule: 2, Side: upper},
		{Point: 1, Rule: 0, Side: none, WindowBack: 1, FirstBack: 1}, {Point: 1, Rule: 1, Side: upper, WindowBack: 1, FirstBack: 1}, {Point: 1, Rule: 2, Side: upper},
		{Point: 2, Rule: 0, Side: none, WindowBack: 1, FirstBack: 1}, {Point: 2, Rule: 1, Side: lower}, {Point: 2, Rule: 2, Side: lower},
	}
	if !slices.Equal(got, want) {
		t.Errorf("got  %v\nwant %v", got, want)
	}
}
