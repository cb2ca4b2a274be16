package limits_test

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// A target of sigma that is wrong by far must not spoil the interval of the bias, and the interval of the ratio must show
// it. The readings have mean 10 and sigma 2.
func TestComparisonsWithTargetsCover(t *testing.T) {
	const runs, centre, sigma = 2000, 10.5, 5.0
	chance := 4 * math.Sqrt(0.95*0.05/runs)
	for i, d := range []design{designs[1], designs[5], designs[6]} {
		r := rand.New(rand.NewPCG(uint64(i), 61))
		held := map[string]float64{}
		for range runs {
			req := d.draw(r)
			req.Centre, req.Sigma = ptr(centre), ptr(sigma)
			res := mustCompute(t, req)
			for name, c := range map[string]struct {
				got  *limits.Comparison
				true float64
			}{"bias": {res.Bias, 10 - centre}, "ratio": {res.SigmaRatio, 2 / sigma}} {
				if c.got.Interval.Lower <= c.true && c.true <= c.got.Interval.Upper {
					held[name] += 1. / runs
				}
			}
			if res.BetweenRatio != nil || res.FalseAlarm != nil {
				t.Fatalf("%s: got %+v, %+v, want neither where both are given", d, res.BetweenRatio, res.FalseAlarm)
			}
		}
		for name, got := range held {
			if math.Abs(got-limits.Confidence) > 0.005+chance+0.01 {
				t.Errorf("seed %d,61, %s: %s held in %.4f of cases, want %.2f within %.4f", i, d, name, got, limits.Confidence, chance)
			}
		}
		if len(held) != 2 {
			t.Errorf("%s: got %v, want both intervals to hold sometimes", d, held)
		}
	}
}

// The mean of 5, 7, 4 is 16/3. Without an estimate of sigma, of one result, the given one makes the interval of the bias.
func TestBiasByHand(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.Individuals, Groups: singles(5, 7, 4), Centre: ptr(5.0)})
	if res.Bias == nil || !near(res.Bias.Estimate, 1./3, 1e-12) || res.SigmaRatio != nil {
		t.Errorf("got %+v, %+v, want 1/3 and no ratio", res.Bias, res.SigmaRatio)
	}
	one := mustCompute(t, limits.Request{Kind: chart.Individuals, Groups: singles(5), Centre: ptr(4.0), Sigma: ptr(2.0)})
	if in := one.Bias.Interval; !near(in.Lower, 1-1.959964*2, 1e-6) || !near(in.Upper, 1+1.959964*2, 1e-6) || one.SigmaRatio != nil {
		t.Errorf("one result: got %+v, want 1 ± 1.959964·2", one.Bias)
	}
	if free := mustCompute(t, limits.Request{Kind: chart.Individuals, Groups: singles(5, 7, 4)}); free.Bias != nil || free.SigmaRatio != nil {
		t.Errorf("nothing given: got %+v, %+v", free.Bias, free.SigmaRatio)
	}
}

// Of sound values 2.28 % lie beyond two sigmas on one side (as normal tables print it, from memory). The standard deviation
// of two readings is distributed like |x| of one normal value, of which 4.55 % lie beyond two sigmas.
func TestCriterionInsideTellsWhatFails(t *testing.T) {
	for _, c := range []struct {
		role  chart.Role
		value float64
		says  string
	}{{chart.Location, 10 + 2/math.Sqrt2, "2.28 % of sound values"}, {chart.Dispersion, 2, "4.55 % of sound values"}} {
		places := 15
		req := limits.Request{Kind: chart.XbarS, SubgroupSize: 2, Centre: ptr(10.0), Sigma: ptr(1.0), PublishedDecimals: &places}
		req.Fixed[c.role].UpperAction = &chart.Line{Value: math.Round(c.value*1e9) / 1e9, Basis: chart.MethodCriterion}
		res := mustCompute(t, req)
		if len(res.Findings) != 1 || !strings.Contains(res.Findings[0].Text, c.says) {
			t.Errorf("%s: got %+v, want %q", c.role, res.Findings, c.says)
		}
	}
}
