package limits_test

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

func findingOf(res limits.Result, code string) (limits.Finding, bool) {
	for _, f := range res.Findings {
		if f.Code == code {
			return f, true
		}
	}
	return limits.Finding{}, false
}

func wantFinding(t *testing.T, res limits.Result, code string) limits.Finding {
	t.Helper()
	f, ok := findingOf(res, code)
	if !ok || f.Text == "" || f.Advice == "" || f.CouldMiss == "" {
		t.Fatalf("got findings %+v, want a whole one with code %s", res.Findings, code)
	}
	return f
}

func TestDefaultMethodFollowsTheExpectedCount(t *testing.T) {
	np := func(centre float64, size int) limits.Request {
		return limits.Request{Kind: chart.NP, SubgroupSize: size, Centre: &centre}
	}
	mixed := limits.Request{Kind: chart.P, Centre: ptr(0.1), Groups: []limits.Group{counted(8, 80), counted(90, 900)}}
	factor := limits.Request{Kind: chart.C, Groups: samplesOf(1, 3, 9, 1, 4), Counts: limits.CountOptions{Extra: limits.LaneyFactor}}
	for _, c := range []struct {
		name string
		req  limits.Request
		want chart.CountMethod
	}{
		{"8.99 expected", limits.Request{Kind: chart.C, Centre: ptr(8.99)}, chart.Exact},
		{"9 expected", limits.Request{Kind: chart.C, Centre: ptr(9.0)}, chart.Normal},
		{"9 with and 9 without", np(9, 18), chart.Normal},
		{"9 with, 8 without", np(9, 17), chart.Exact},
		{"few in the smallest sample", mixed, chart.Exact},
		{"few, with a factor", factor, chart.Normal},
	} {
		if got := mustCompute(t, c.req).Model.CountMethod; got != c.want {
			t.Errorf("%s: got %s, want %s", c.name, got, c.want)
		}
	}
}

func TestUpperBoundOfAnAllZeroBasis(t *testing.T) {
	zeros := make([]float64, 25)
	// 3/25 is close to the bound that 25 zeros support, -ln(0.05)/25 = 0.1198293 (computed).
	res := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, zeros...), Counts: limits.CountOptions{MeanUpperBound: ptr(0.12)}})
	f := wantFinding(t, res, limits.CodeUpperBoundOfMean)
	if f.Figure != 0.12 || math.Abs(f.Threshold-0.1198293) > 1e-7 || strings.Contains(f.Advice, "do not support") {
		t.Errorf("got %+v, want 0.12 beside 0.1198293", f)
	}
	if *res.Location.Centre != 0.12 || res.Origin != limits.Target || res.Provisional || res.Location.UpperAction.Value != 2 {
		t.Errorf("got %s, origin %s", show(res.Location), res.Origin)
	}
	// 1 - 0.05^(1/1000) = 0.00299125 (computed), a fraction; in samples of 40 that is 0.11965 items.
	res = mustCompute(t, limits.Request{Kind: chart.NP, SubgroupSize: 40, Groups: samplesOf(40, zeros...), Counts: limits.CountOptions{MeanUpperBound: ptr(0.1)}})
	f = wantFinding(t, res, limits.CodeUpperBoundOfMean)
	if math.Abs(f.Threshold-0.11965) > 1e-6 || !strings.Contains(f.Advice, "do not support") {
		t.Errorf("got %+v, want a bound below 0.11965 to be told", f)
	}
}

func TestTargetOfAnAllZeroBasis(t *testing.T) {
	// No count in 25 samples of mean 0.4 has probability exp(-10), 3.91 normal standard errors out (computed).
	res := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, make([]float64, 25)...), Centre: ptr(0.4)})
	if f := wantFinding(t, res, limits.CodeTargetCentreDiffers); math.Abs(f.Figure-3.91) > 0.01 {
		t.Errorf("got %+v, want a figure of 3.91", f)
	}
	if res.Bias == nil || res.Bias.Estimate != -0.4 || res.Bias.Interval.Lower != -0.4 || !near(res.Bias.Interval.Upper, 3.688879454113936/25-0.4, 1e-9) {
		t.Errorf("got bias %+v, want -0.4 up to %g", res.Bias, 3.688879454113936/25-0.4) // -ln 0.025 over all units
	}
	res = mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, make([]float64, 10)...), Centre: ptr(0.4)})
	if f, ok := findingOf(res, limits.CodeTargetCentreDiffers); ok {
		t.Errorf("10 samples: got %+v, want none", f)
	}
}

func TestTargetFarFromTheCountsIsFinite(t *testing.T) {
	for _, centre := range []float64{1e-6, 1e6} {
		res := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, 2000, 2100), Centre: &centre})
		f := wantFinding(t, res, limits.CodeTargetCentreDiffers)
		if !(f.Figure > 30) || math.IsInf(f.Figure, 0) {
			t.Errorf("target %g: got %g standard errors", centre, f.Figure)
		}
	}
}

func TestNormalLinesForFewCountsAreTold(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.C, Centre: ptr(2.0), Counts: limits.CountOptions{Method: chart.Normal}})
	// 2 + 3·√2 = 6.24; a Poisson count of mean 2 is above 6 with probability 0.004534 (computed from the definition).
	f := wantFinding(t, res, limits.CodeCountsTooLowForNormal)
	if f.Figure != 2 || f.Threshold != limits.ExactBelow || !strings.Contains(f.Text, "0.453 % lies beyond") || !strings.Contains(f.Text, "nothing below") {
		t.Errorf("got %+v", f)
	}
	res = mustCompute(t, limits.Request{Kind: chart.C, Centre: ptr(2.0)})
	if f, ok := findingOf(res, limits.CodeCountsTooLowForNormal); ok {
		t.Errorf("exact lines: got %+v", f)
	}
}

func TestCriterionInsideTellsTheExactShare(t *testing.T) {
	req := limits.Request{Kind: chart.C, Centre: ptr(2.0)}
	req.Fixed[chart.Location].UpperAction = targetLine(4)
	res := mustCompute(t, req)
	// P(X > 4) of mean 2 is 0.05265 (computed from the definition).
	if f := wantFinding(t, res, limits.CodeCriterionInsideLimit); !strings.Contains(f.Text, "5.27 % of sound samples") || !near(f.Figure, math.Sqrt2, 1e-12) {
		t.Errorf("got %+v", f)
	}
	if res.Location.UpperAction != *targetLine(4) {
		t.Errorf("got %+v, want the line that was set", res.Location.UpperAction)
	}
}

func TestVariationIsTold(t *testing.T) {
	// Each pair of samples is 2 or 18: an index of dispersion of 128 at 19 degrees of freedom. All 10 but two: 0.2.
	over, under := make([]float64, 20), make([]float64, 20)
	for i := range over {
		over[i], under[i] = 2+16*float64(i%2), 10
	}
	under[0], under[1] = 9, 11
	res := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, over...)})
	f := wantFinding(t, res, limits.CodeCountsOverdispersed)
	if f.Threshold != 0.01 || !(f.Figure < 1e-10) || !strings.Contains(f.Text, "128 at 19") || !strings.Contains(f.Advice, "Laney") {
		t.Errorf("got %+v", f)
	}
	if _, ok := findingOf(res, limits.CodeCountsUnderdispersed); ok {
		t.Errorf("got both findings: %+v", res.Findings)
	}
	res = mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, under...)})
	if f := wantFinding(t, res, limits.CodeCountsUnderdispersed); !strings.Contains(f.Text, "0.2 at 19") {
		t.Errorf("got %+v", f)
	}
	res = mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, under...), Counts: limits.CountOptions{Extra: limits.LaneyFactor}})
	// The moving ranges of z are 2 and 1 over √10 and 17 zeros: 3/19/√10·√π/2 = 0.04425.
	if f := wantFinding(t, res, limits.CodeInflationBelowOne); math.Abs(f.Figure-0.04425) > 1e-5 || res.Model.Inflation != f.Figure || res.MovingRanges != 19 {
		t.Errorf("got %+v of %d moving ranges, model %+v", f, res.MovingRanges, res.Model)
	}
	if res.Tails != nil {
		t.Errorf("got tails %v with extra variation", res.Tails)
	}
}

// The tests of variation have the size they state, in clean data, within four standard errors and the allowance of an
// approximation; where fewer than one is expected, they are not made.
func TestVariationFindingsHaveTheirSize(t *testing.T) {
	const reps, allowance = 3000, 0.004
	r := rand.New(rand.NewPCG(5, 7))
	for _, mean := range []float64{1.5, 4, 30} {
		over, under := 0.0, 0.0
		for range reps {
			res := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, drawCounts(r, 25, mean)...), PublishedDecimals: ptr(4), Counts: limits.CountOptions{Method: chart.Normal}})
			if _, ok := findingOf(res, limits.CodeCountsOverdispersed); ok {
				over++
			}
			if _, ok := findingOf(res, limits.CodeCountsUnderdispersed); ok {
				under++
			}
		}
		bound := 4*math.Sqrt(0.01*0.99/reps) + allowance
		if math.Abs(over/reps-0.01) > bound || math.Abs(under/reps-0.01) > bound {
			t.Errorf("mean %g: got %.4f over, %.4f under, want 0.01 ± %.4f", mean, over/reps, under/reps, bound)
		}
		t.Logf("mean %g: %.4f over, %.4f under", mean, over/reps, under/reps)
	}
	sparse := make([]float64, 40)
	sparse[3] = 4
	if f, ok := findingOf(mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, sparse...)}), limits.CodeCountsOverdispersed); ok {
		t.Errorf("0.1 expected: got %+v, want no test", f)
	}
}

func TestPublishedSizeAndDecimals(t *testing.T) {
	for _, c := range []struct {
		name          string
		req           limits.Request
		inspected     float64
		decimals, lot int
	}{
		// sigma 2.236: three decimals for four digits.
		{"c", limits.Request{Kind: chart.C, Groups: samplesOf(1, 4, 6)}, 1, 3, 2},
		// Steps of 1/500 take three decimals, two more are five; sigma of 0.1 in 408 is 0.01485, which takes five.
		{"p", limits.Request{Kind: chart.P, Groups: []limits.Group{counted(31, 315), counted(50, 500)}}, 408, 5, 2},
		{"p, one item", limits.Request{Kind: chart.P, Groups: samplesOf(1, 0, 1)}, 1, 4, 2},
		{"u", limits.Request{Kind: chart.U, Groups: []limits.Group{counted(31, 0.31), counted(50, 0.506)}}, 0.408, 2, 2},
		{"u in many units", limits.Request{Kind: chart.U, Groups: []limits.Group{counted(31, 12345), counted(50, 12346)}}, 12346, 7, 2},
		{"a target keeps its decimals", limits.Request{Kind: chart.C, Centre: ptr(25.12345)}, 1, 5, 0},
		{"a bound keeps its decimals", limits.Request{Kind: chart.C, Groups: samplesOf(1, 0), Counts: limits.CountOptions{MeanUpperBound: ptr(4.12345)}}, 1, 5, 1},
	} {
		res := mustCompute(t, c.req)
		if res.Model.Inspected != c.inspected || res.PublishedDecimals != c.decimals || res.N != c.lot || res.Readings != 0 || res.ProcessSigma != 0 {
			t.Errorf("%s: got size %g, %d decimals, %d samples, %d readings, process sigma %g, want %g, %d, %d, 0, 0", c.name, res.Model.Inspected, res.PublishedDecimals, res.N, res.Readings, res.ProcessSigma, c.inspected, c.decimals, c.lot)
		}
		d := res.Dispersion
		for _, line := range []chart.Line{d.LowerAction, d.UpperAction, d.LowerWarning, d.UpperWarning} {
			if line.Basis != chart.Absent || d.Centre != nil || d.Sigma != nil {
				t.Errorf("%s: dispersion %+v, want none", c.name, d)
			}
		}
	}
}
