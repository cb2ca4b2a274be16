package rules_test

import (
	"math"
	"slices"
	"strconv"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// course judges xs one by one and gives the accumulators of the plan's only rule after each point.
func course(plan *rules.Plan, st *rules.State, xs []float64, hits *[]hit) (slots [][]float64) {
	for i, x := range xs {
		plan.Judge(st, []float64{x}, nil, collectInto(hits, i))
		slots = append(slots, slices.Clone(st.Slots()))
	}
	return slots
}

// printed compares to the digits of a printed table.
func printed(tb testing.TB, name string, point int, got float64, want string) {
	tb.Helper()
	decimals := decimal.Places(mustFloat(tb, want))
	for i, c := range want {
		if c == '.' {
			decimals = len(want) - i - 1
		}
	}
	if math.Abs(got-mustFloat(tb, want)) > 0.5000001*math.Pow10(-decimals) {
		tb.Errorf("%s(%d): got %v, printed %s", name, point, got, want)
	}
}

func mustFloat(tb testing.TB, text string) float64 {
	tb.Helper()
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		tb.Fatal(err)
	}
	return x
}

// TestEWMAFollowsTheHandbookExample: NIST/SEMATECH e-Handbook of Statistical Methods, section 6.3.2.4, lambda 0.3 about
// 50 with sigma 2.0539. The figures are the printed ones, recalled from memory and recomputed from the recurrence.
func TestEWMAFollowsTheHandbookExample(t *testing.T) {
	xs := []float64{52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0, 50.1, 51.2, 50.5, 49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1}
	want := []string{"50.60", "49.52", "50.56", "50.18", "50.16", "49.21", "49.75", "49.85", "50.26", "50.33",
		"50.11", "49.36", "49.52", "50.05", "49.38", "49.92", "50.73", "51.23", "51.94", "51.99"}
	const centre, sigma = 50, 2.0539
	spec := ewma(0.3, 3)
	spec.Asymptotic = true
	plan := mustCompile(t, plain(centre, sigma), decimal.Unrounded, spec)
	var hits []hit
	for i, slots := range course(plan, plan.Start(false), xs, &hits) {
		printed(t, "EWMA", i+1, centre+sigma*slots[0], want[i])
	}
	wantHits(t, hits) // the handbook: in control
	t.Run("its limit is the printed 52.5884", func(t *testing.T) {
		// One point moves the average from the centre by 0.3 of its distance; the limit lies 2.5884317381 above
		// (computed: 3·2.0539·√(0.3/1.7)).
		for _, tc := range []struct {
			average float64
			passes  bool
		}{{52.58843, false}, {52.58844, true}} {
			var hits []hit
			plan.Judge(plan.Start(false), []float64{centre + (tc.average-centre)/0.3}, nil, collectInto(&hits, 0))
			if got := len(hits) == 1; got != tc.passes {
				t.Errorf("average %v: passes %t, want %t", tc.average, got, tc.passes)
			}
		}
	})
}

// TestEWMALimitsWidenUnlessAsymptotic: with lambda 1 the average is the point itself and its limit never widens; with a
// smaller lambda the first point's limit is lambda·limit (the identity λ/(2-λ)·(1-(1-λ)²) = λ²).
func TestEWMALimitsWidenUnlessAsymptotic(t *testing.T) {
	for _, lambda := range []float64{0.05, 0.2, 0.5, 1} {
		wantHits(t, judged(t, ewma(lambda, 3), 3.0000001, 0), only(0, upper))
		wantHits(t, judged(t, ewma(lambda, 3), 3, 0)) // on the limit
		wantHits(t, judged(t, ewma(lambda, 3), -3.0000001, 0), only(0, lower))
	}
	asymptotic := ewma(0.2, 3)
	asymptotic.Asymptotic = true
	// The limit is 3·√(0.2/1.8) = 1 from the start (computed), so the first point passes it only above 5.
	wantHits(t, judged(t, asymptotic, 4.9))
	wantHits(t, judged(t, asymptotic, 5))
	wantHits(t, judged(t, asymptotic, 5.00001), only(0, upper))
	t.Run("the widths grow to the asymptote", func(t *testing.T) {
		// A constant z gives the average z·(1-0.8^t); the limit's ratio to it falls, so there is one first crossing:
		// at t where z(1-0.8^t) > √(1-0.8^(2t)), that is z² > (1+0.8^t)/(1-0.8^t); for z = 1.5, 0.8^t < 1.25/3.25,
		// t > 4.28 (worked by hand).
		got := judged(t, ewma(0.2, 3), slices.Repeat([]float64{1.5}, 8)...)
		wantHits(t, got, only(4, upper), only(5, upper), only(6, upper), only(7, upper))
	})
}

// TestCUSUMFollowsTheTextbookExample: Montgomery, Introduction to Statistical Quality Control, tables 9.1 and 9.2:
// reference 10, sigma 1, k = 1/2, h = 5. The figures are the printed ones, recalled from memory and recomputed from the
// recurrence.
func TestCUSUMFollowsTheTextbookExample(t *testing.T) {
	xs := []float64{9.45, 7.99, 9.29, 11.66, 12.16, 10.18, 8.04, 11.46, 9.2, 10.34, 9.03, 11.47, 10.51, 9.4, 10.08,
		9.37, 10.62, 10.31, 8.52, 10.84, 10.9, 9.33, 12.29, 11.5, 10.6, 11.08, 10.38, 11.62, 11.31, 10.52}
	up := []string{"0.00", "0.00", "0.00", "1.16", "2.82", "2.50", "0.04", "1.00", "0.00", "0.00", "0.00", "0.97", "0.98", "0.00", "0.00",
		"0.00", "0.12", "0.00", "0.00", "0.34", "0.74", "0.00", "1.79", "2.79", "2.89", "3.47", "3.35", "4.47", "5.28", "5.30"}
	down := []string{"0.05", "1.56", "1.77", "0.00", "0.00", "0.00", "1.46", "0.00", "0.30", "0.00", "0.47", "0.00", "0.00", "0.10", "0.00",
		"0.13", "0.00", "0.00", "0.98", "0.00", "0.00", "0.17", "0.00", "0.00", "0.00", "0.00", "0.00", "0.00", "0.00", "0.00"}
	plan := mustCompile(t, plain(10, 1), decimal.Unrounded, cusum(0.5, 5))
	var hits []hit
	all := course(plan, plan.Start(false), xs, &hits)
	for i, slots := range all {
		printed(t, "C+", i+1, slots[0], up[i])
		printed(t, "C-", i+1, slots[1], down[i])
	}
	// Printed: the first signal is at observation 29, with N+ = 7, so the shift began after 22; 30 signals again, for a
	// signal resets nothing.
	wantHits(t, hits, hit{28, upper, 22, 22}, hit{29, upper, 22, 22})
	// Printed: the new mean is estimated at 11.25, as 10 + k + C+/N+.
	printed(t, "estimated mean", 29, 10+0.5+all[28][0]/float64(28-hits[0].firstCounts+1), "11.25")
}

func TestCUSUMCountsFromTheFirstPointAfterItsArmWasZero(t *testing.T) {
	wantHits(t, judged(t, cusum(0.5, 2), 2, -2, 1.5, 1.5, 1.5), hit{4, upper, 2, 2})
	t.Run("zero on paper is zero", func(t *testing.T) {
		// sigma 0.02 about 0.04: z = 0.5, -1, 2: the arm is 0.25, then 0 exactly, though float64 leaves a trace of it
		// for other divisions; swept over centres so that some do.
		traces := 0
		for hundredths := range 400 {
			centre := mustFloat(t, strconv.Itoa(hundredths)+"e-2")
			x := func(tenths int) float64 { return decimal.Line(centre, float64(tenths)/10, 0.3, decimal.Unrounded) }
			plan := mustCompile(t, plain(centre, 0.3), decimal.Unrounded, cusum(0.3, 1))
			st := plan.Start(false)
			var hits []hit
			slots := course(plan, st, []float64{x(10), x(-4), x(15)}, &hits)
			if slots[1][0] != 0 {
				traces++
			}
			wantHits(t, hits, only(2, upper))
		}
		if traces == 0 {
			t.Error("float64 left no trace anywhere; the test shows nothing")
		}
	})
}

func TestCUSUMIsNotResetByASignal(t *testing.T) {
	wantHits(t, judged(t, cusum(0.5, 4), 5, 0.5, 0.5, 0, 0), hit{0, upper, 0, 0}, hit{1, upper, 0, 0}, hit{2, upper, 0, 0})
	wantHits(t, judged(t, ewma(0.5, 1), 10, 0, 0), only(0, upper), only(1, upper), only(2, upper))
}

func TestCUSUMOnItsIntervalDoesNotSignal(t *testing.T) {
	wantHits(t, judged(t, cusum(0.5, 4), 4.5))
	wantHits(t, judged(t, cusum(0.5, 4), 4.5000001), only(0, upper))
	// 0.1 + 0.2 - 0 against 0.3, in sums: ten steps of 0.1 reach 1 on paper and not in float64.
	wantHits(t, judged(t, cusum(0, 1), slices.Repeat([]float64{0.1}, 10)...))
	wantHits(t, judged(t, cusum(0, 1), slices.Repeat([]float64{0.1}, 11)...), hit{10, upper, 0, 0})
}

func TestHeadStartsApplyOnlyWhereAsked(t *testing.T) {
	spec := cusum(0.5, 4)
	spec.HeadStart = 2
	plan := mustCompile(t, plain(0, 1), decimal.Unrounded, spec)
	judgeFrom := func(st *rules.State) (hits []hit) {
		plan.Judge(st, []float64{2.6, 0}, nil, collectInto(&hits, 0))
		return hits
	}
	wantHits(t, judgeFrom(plan.Start(true)), only(0, upper))
	wantHits(t, judgeFrom(plan.Start(false)))
	st := plan.Start(false)
	plan.Reset(st, true)
	wantHits(t, judgeFrom(st), only(0, upper))
	plan.Reset(st, false)
	wantHits(t, judgeFrom(st))
}

// TestSumsStandTheLargestValues: standardised values of 1e600 have no float64, yet nothing may panic, and once such a
// value has passed, the sides are still those of the sum.
func TestSumsStandTheLargestValues(t *testing.T) {
	const huge = math.MaxFloat64
	for _, spec := range []rules.Spec{ewma(1, 3), ewma(0.2, 3), cusum(0.5, 5), trend(2)} {
		plan := mustCompile(t, plain(0, 1e-300), decimal.Unrounded, spec)
		var hits []hit
		plan.Judge(plan.Start(false), []float64{huge, -huge, huge, huge, 0}, nil, collectInto(&hits, 0))
		if spec.Kind != rules.Trend && (len(hits) == 0 || hits[0] != only(0, upper)) {
			t.Errorf("kind %d: hits %v, the first value passes every limit", spec.Kind, hits)
		}
		st := plan.Start(false)
		for _, slots := range course(plan, st, []float64{huge, -huge, -huge, 0, huge}, &hits) {
			if slices.ContainsFunc(slots, math.IsNaN) || slices.ContainsFunc(slots, func(v float64) bool { return math.IsInf(v, 0) }) {
				t.Fatalf("kind %d: accumulators %v", spec.Kind, slots)
			}
		}
		unequal := mustCompile(t, chart.Trace{Centre: ptr(-huge), Sigma: ptr(1)}, decimal.Unrounded, spec)
		unequal.Judge(unequal.Start(false), []float64{huge, -huge, huge}, []rules.Scale{{Centre: -huge, Sigma: 1}, {Centre: huge, Sigma: 2}, {Centre: -huge, Sigma: 5e-324}}, func(rules.Hit) {})
	}
}
