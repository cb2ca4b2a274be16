package limits_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// Samples whose true fraction varies about 0.1 with a standard deviation of 0.01, which counting knows nothing of.
const (
	meanFraction  = 0.1
	spreadBetween = 0.01
)

func drawSamples(r *rand.Rand, n int, sizes ...float64) []limits.Group {
	groups := make([]limits.Group, n)
	for i := range groups {
		size := sizes[i%len(sizes)]
		groups[i] = counted(binomial(r, size, meanFraction+spreadBetween*r.NormFloat64()), size)
	}
	return groups
}

// countAlarms gives the share of samples of each size judged beyond an action line.
func shareOfAlarms(t *testing.T, res limits.Result, groups []limits.Group, size float64) (share float64, n int) {
	t.Helper()
	j := judgeOf(t, res)
	for _, g := range groups {
		if g.Count.Inspected != size {
			continue
		}
		n++
		if action, _ := beyond(j, g.Count.Nonconforming, size); action != 0 {
			share++
		}
	}
	return share / float64(n), n
}

// nominal is the two-sided share beyond three sigmas. Its standard error in n samples is joined by that of the lines: at
// three sigmas the share moves ten times as fast as sigma does, relatively (9.8, computed).
const nominal = 2 * chart.ActionTail

func alarmBound(n, basis int, efficiency float64) float64 {
	own := math.Sqrt(nominal / float64(n))
	lines := nominal * 9.8 / math.Sqrt(2*efficiency*float64(basis))
	return 4 * math.Hypot(own, lines)
}

// binomialTails allows for the skewness that binomial counts keep at these sizes.
const binomialTails = 0.0006

// In samples of one size, the factor brings false alarms back to what three sigmas mean; by counting alone, more than one
// sample in ten is an alarm. The moving range has about 0.6 of the efficiency of the standard deviation (common practice,
// no source).
func TestFactorKeepsTheFalseAlarmRate(t *testing.T) {
	const basis, judged, size = 6000, 20000, 4000
	r := rand.New(rand.NewPCG(6, 7))
	groups, later := drawSamples(r, basis, size), drawSamples(r, judged, size)
	for _, kind := range []chart.Kind{chart.P, chart.NP} {
		req := limits.Request{Kind: kind, Groups: groups, Counts: limits.CountOptions{Extra: limits.LaneyFactor}}
		if kind == chart.NP {
			req.SubgroupSize = size
		}
		res := mustCompute(t, req)
		got, n := shareOfAlarms(t, res, later, size)
		if bound := alarmBound(n, basis, 0.6) + binomialTails; math.Abs(got-nominal) > bound {
			t.Errorf("%s: got %.5f with a factor of %.4g, want %.5f ± %.5f", kind, got, res.Model.Inflation, nominal, bound)
		}
		// √(1 + 0.0001·4000/0.09) = 2.333 (computed).
		if !near(res.Model.Inflation, 2.333, 0.05) {
			t.Errorf("%s: got a factor of %g, want 2.333", kind, res.Model.Inflation)
		}
		req.Counts.Extra = limits.NoExtra
		plain := mustCompute(t, req)
		wantFinding(t, plain, limits.CodeCountsOverdispersed)
		if got, _ := shareOfAlarms(t, plain, later, size); got < 0.1 {
			t.Errorf("%s: got %.4f by counting alone, want far above nominal", kind, got)
		}
		t.Logf("%s: %.5f with the factor %.4f", kind, got, res.Model.Inflation)
	}
}

// Where sizes differ, a variance between samples keeps the rate at each of them. One factor is wrong at both ends, and the
// finding says so.
func TestVarianceBetweenSamplesKeepsTheFalseAlarmRate(t *testing.T) {
	const basis, judged = 6000, 40000
	sizes := []float64{500, 20000}
	r := rand.New(rand.NewPCG(7, 7))
	groups, later := drawSamples(r, basis, sizes...), drawSamples(r, judged, sizes...)
	req := limits.Request{Kind: chart.P, Groups: groups, Counts: limits.CountOptions{Extra: limits.BetweenSamples}}
	res := mustCompute(t, req)
	if !near(res.Model.BetweenSigma, spreadBetween, 0.05) {
		t.Errorf("got %g between samples, want %g", res.Model.BetweenSigma, spreadBetween)
	}
	req.Counts.Extra = limits.LaneyFactor
	factor := mustCompute(t, req)
	wantFinding(t, factor, limits.CodeSizesTooUnequalForFactor)
	for _, size := range sizes {
		got, n := shareOfAlarms(t, res, later, size)
		if bound := alarmBound(n, basis/2, 0.6) + binomialTails; math.Abs(got-nominal) > bound {
			t.Errorf("size %g: got %.5f, want %.5f ± %.5f", size, got, nominal, bound)
		}
		t.Logf("size %g: %.5f with %.5f between, %+v", size, got, res.Model.BetweenSigma, res.Components)
	}
	small, _ := shareOfAlarms(t, factor, later, sizes[0])
	large, _ := shareOfAlarms(t, factor, later, sizes[1])
	if small > nominal/4 || large < 4*nominal {
		t.Errorf("one factor of %.3g: got %.5f at %g and %.5f at %g, want too few and too many", factor.Model.Inflation, small, sizes[0], large, sizes[1])
	}
}

// The interval of the centre covers at its level: at least that where counting is all there is, since it is exact, and
// about that with extra variation, for which it is an approximation.
func TestCentreIntervalsCover(t *testing.T) {
	const reps = 1500
	r := rand.New(rand.NewPCG(8, 7))
	bound := 4 * math.Sqrt(0.05*0.95/reps)
	covered := func(draw func() limits.Request, centre float64) float64 {
		n := 0.0
		for range reps {
			if in := mustCompute(t, draw()).Intervals.Centre; in.Lower <= centre && centre <= in.Upper {
				n++
			}
		}
		return n / reps
	}
	exact := covered(func() limits.Request {
		return limits.Request{Kind: chart.C, Groups: samplesOf(1, drawCounts(r, 20, 1.5)...)}
	}, 1.5)
	if exact < limits.Confidence-bound || exact > 0.99 {
		t.Errorf("counting alone: got %.4f, want at least %g", exact, limits.Confidence)
	}
	extra := covered(func() limits.Request {
		return limits.Request{Kind: chart.P, Groups: drawSamples(r, 30, 1000, 6000), Counts: limits.CountOptions{Extra: limits.BetweenSamples}}
	}, meanFraction)
	if math.Abs(extra-limits.Confidence) > bound+0.02 {
		t.Errorf("extra variation: got %.4f, want %g ± %.3f", extra, limits.Confidence, bound+0.02)
	}
	t.Logf("coverage %.4f by counting alone, %.4f with extra variation", exact, extra)
}

func TestAbsentVarianceBetweenSamplesSaysSo(t *testing.T) {
	groups := samplesOf(100, 10, 10, 11, 9, 10)
	res := mustCompute(t, limits.Request{Kind: chart.P, Groups: groups, Counts: limits.CountOptions{Extra: limits.BetweenSamples}})
	if len(res.Components) != 3 || res.Components[1].Name != "BETWEEN" || !res.Components[1].Truncated || res.Components[1].Sigma != 0 || res.Model.BetweenSigma != 0 {
		t.Errorf("got %+v, model %+v, want a truncated component of zero", res.Components, res.Model)
	}
	if res.Tails == nil {
		t.Error("counting is all there is, and the tails are left out")
	}
}
