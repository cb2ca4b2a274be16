package limits_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// judgeBy builds the judge of computed limits with the one rule beyond the action line.
func judgeBy(t testing.TB, res limits.Result) *judge.Judge {
	t.Helper()
	l := judge.Limits{Kind: res.Kind, SubgroupSize: res.SubgroupSize, Places: res.PublishedDecimals, ProcessSigma: res.ProcessSigma, Model: res.Model}
	action := []rules.Spec{{ID: "action", Consequence: rules.Act, Kind: rules.BeyondLine, Line: rules.ActionLine}}
	for role, trace := range []chart.Trace{res.Location, res.Dispersion} {
		if res.Kind.Has(chart.Role(role)) {
			l.Traces[role] = &judge.Trace{Trace: trace, Rules: action}
		}
	}
	j, err := judge.New(l)
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// hitsOf counts hits of one trace among points of n readings drawn by next.
func hitsOf(j *judge.Judge, role chart.Role, points, n int, next func(readings []float64)) (count float64) {
	st, readings := j.NewState(), make([]float64, n)
	var v judge.Verdict
	for range points {
		next(readings)
		j.Judge(st, judge.Point{Readings: readings}, &v)
		for _, h := range v.Hits {
			if h.Role == role {
				count++
			}
		}
	}
	return count
}

// Runs of one, two, three and six readings judged by limits from a large basis of all these sizes give the nominal rate.
// Plain subgroup limits from the same basis signal 13 % of runs of six. With s_b = 0.7·s_w their lines lie at
// 3·√(1/6)/√(0.49+1/6) = 1.5114 sigmas of the means, and 2·(1-Φ(1.5114)) = 0.1307.
func TestFalseAlarmRateOfRunMeans(t *testing.T) {
	const runs, points, seed = 20_000, 100_000, 71
	r := rand.New(rand.NewPCG(seed, 27))
	d := runDesign{6, inTurn(runs/4, 1, 2, 3, 6), 1.4}
	req := d.draw(r)
	res := mustCompute(t, req)
	j := judgeBy(t, res)
	req.Kind = chart.XbarS
	plain := judgeBy(t, mustCompute(t, req))
	next := func(readings []float64) {
		level := 10 + d.between*r.NormFloat64()
		for i := range readings {
			readings[i] = math.Round(1000*(level+2*r.NormFloat64())) / 1000
		}
	}
	nominal := math.Erfc(3 / math.Sqrt2)
	// A relative error e of the limits' sigma moves the rate by 2·3·φ(3)·e. The variance of the run means has at least
	// 20000/1.1 degrees of freedom; what it says of runs of six is 1.51 times as uncertain, the part within taken off.
	const sigmaError = 1.6
	bySigma := sigmaError * 6 * math.Exp(-4.5) / math.Sqrt(2*math.Pi) / math.Sqrt(2*runs)
	for _, n := range []int{1, 2, 3, 6} {
		rate := hitsOf(j, chart.Location, points, n, next) / points
		if bound := 4 * math.Hypot(math.Sqrt(nominal/points), bySigma); math.Abs(rate-nominal) > bound {
			t.Errorf("seed %d,27, runs of %d: %.5f beyond the lines, want %.5f within %.5f", seed, n, rate, nominal, bound)
		}
		share := math.Sqrt(4/float64(n)) / math.Sqrt(d.between*d.between+4/float64(n))
		want := math.Erfc(3 * share / math.Sqrt2)
		const few = points / 10
		rate = hitsOf(plain, chart.Location, few, n, next) / few
		bound := 4 * math.Hypot(math.Sqrt(want/few), 6*share*math.Exp(-4.5*share*share)/math.Sqrt(2*math.Pi)/math.Sqrt(2*runs))
		if math.Abs(rate-want) > bound || n == 6 && math.Abs(want-0.1307) > 1e-4 {
			t.Errorf("seed %d,27, runs of %d by plain limits: %.5f, want %.5f within %.5f", seed, n, rate, want, bound)
		}
	}
	for _, f := range res.Findings {
		if f.Code == limits.CodeSubgroupLimitsNarrow && math.Abs(f.Figure-0.1307) < 4*sigmaError*6*0.504*0.127/math.Sqrt(2*runs) && near(f.Threshold, nominal, 1e-12) {
			return
		}
	}
	t.Errorf("got findings %+v, want %s of 0.1307", res.Findings, limits.CodeSubgroupLimitsNarrow)
}

// Where one of centre and sigma is known the points of the distribution have a closed form, here from quantiles of χ² and
// of the normal distribution.
func TestFalseAlarmInClosedForm(t *testing.T) {
	groups := singles(5, 7, 4, 6, 5.5, 6.2, 4.9, 5.1, 6.6, 5.8)
	above := func(x float64) float64 { return math.Erfc(x/math.Sqrt2) / 2 }
	normal := distuv.UnitNormal.Quantile
	chi := distuv.ChiSquared{K: 9}
	c4 := math.Sqrt(1 / (1 + unbiasedVariance(9)))
	known := func(p float64) float64 { return 3 / c4 * math.Sqrt(chi.Quantile(1-p)/9) }
	se := 1 / math.Sqrt(10)
	for _, c := range []struct {
		name string
		req  limits.Request
		rate func(p float64) float64
	}{
		{"centre given", limits.Request{Centre: ptr(5.5), Estimator: limits.Overall}, func(p float64) float64 { return 2 * above(known(p)) }},
		{"sigma given", limits.Request{Sigma: ptr(1.0)}, func(p float64) float64 { z := se * normal((1+p)/2); return above(3+z) + above(3-z) }},
		{"one line, centre given", limits.Request{Centre: ptr(5.5), Estimator: limits.Overall, Fixed: oneSided()}, func(p float64) float64 { return above(known(p)) }},
		{"one line, sigma given", limits.Request{Sigma: ptr(1.0), Fixed: oneSided()}, func(p float64) float64 { return above(3 - se*normal(p)) }},
	} {
		c.req.Kind, c.req.SubgroupSize, c.req.Groups = chart.Individuals, 1, groups
		got := mustCompute(t, c.req).FalseAlarm
		want := limits.FalseAlarm{Median: c.rate(0.5), P10: c.rate(0.1), P90: c.rate(0.9), Nominal: above(3)}
		if c.req.Fixed[chart.Location].LowerAction == nil {
			want.Nominal *= 2
		}
		if got == nil || !near(got.Median, want.Median, 1e-6) || !near(got.P10, want.P10, 1e-6) || !near(got.P90, want.P90, 1e-6) || !near(got.Nominal, want.Nominal, 1e-14) {
			t.Errorf("%s: got %+v, want %+v", c.name, got, want)
		}
	}
	if got := mustCompute(t, limits.Request{Kind: chart.Individuals, Centre: ptr(5.5), Sigma: ptr(1.0), Groups: groups}).FalseAlarm; got != nil {
		t.Errorf("both given: got %+v, want none", got)
	}
}

func oneSided() (fixed [chart.Roles]limits.FixedLines) {
	fixed[chart.Location].LowerAction = &chart.Line{Basis: chart.Absent}
	return fixed
}

// Bases are drawn, limits computed, and the rate of each taken from the true distribution: the stated points must have a
// tenth, a half and nine tenths of them below. The moving range and the weighted estimates follow a multiple of √χ² only
// nearly, hence the allowance.
func TestFalseAlarmRateOfFewResults(t *testing.T) {
	const bases, allowance = 2000, 0.012
	check := func(t *testing.T, rates []float64, stated *limits.FalseAlarm, cautious float64) {
		t.Helper()
		for name, c := range map[string]struct {
			p  float64
			of func(*limits.FalseAlarm) float64
		}{
			"P10":    {0.1, func(f *limits.FalseAlarm) float64 { return f.P10 }},
			"median": {0.5, func(f *limits.FalseAlarm) float64 { return f.Median }},
			"P90":    {0.9, func(f *limits.FalseAlarm) float64 { return f.P90 }},
		} {
			below := 0.0
			for _, rate := range rates {
				if rate <= c.of(stated) {
					below += 1. / float64(len(rates))
				}
			}
			if bound := allowance + 4*math.Sqrt(c.p*(1-c.p)/float64(len(rates))); below < c.p-bound || below > c.p+bound+cautious {
				t.Errorf("%s: %.4f of rates lie below, want %.1f within %.4f, or %.2f more", name, below, c.p, bound, cautious)
			}
		}
	}
	rateOf := func(res limits.Result, sigma float64) float64 {
		rate := math.Erfc((res.Location.UpperAction.Value-10)/sigma/math.Sqrt2) / 2
		if res.Location.LowerAction.Basis != chart.Absent {
			rate += math.Erfc((10-res.Location.LowerAction.Value)/sigma/math.Sqrt2) / 2
		}
		return rate
	}
	for i, d := range []design{designs[1], designs[5], designs[6]} {
		for _, single := range []bool{false, true} {
			t.Run(fmt.Sprintf("%s, one line: %t", d, single), func(t *testing.T) {
				r := rand.New(rand.NewPCG(uint64(i), 28))
				scale, _ := limits.At(d.kind, 2, d.size)
				var rates []float64
				var stated *limits.FalseAlarm
				for range bases {
					req := d.draw(r)
					if single {
						req.Fixed = oneSided()
					}
					res := mustCompute(t, req)
					rates, stated = append(rates, rateOf(res, scale.LocationSigma)), res.FalseAlarm
				}
				check(t, rates, stated, 0)
			})
		}
	}
	// Of runs the law depends on the ratio of both sigmas; it is asked for where the estimates are the true ones.
	for i, d := range []runDesign{runDesigns[0], runDesigns[2], runDesigns[4]} {
		t.Run(d.String(), func(t *testing.T) {
			r := rand.New(rand.NewPCG(uint64(i), 29))
			stated := mustCompute(t, truthful(d, r)).FalseAlarm
			var rates []float64
			for range bases / 2 {
				rates = append(rates, rateOf(mustCompute(t, d.draw(r)), math.Sqrt(d.between*d.between+4/float64(d.size))))
			}
			check(t, rates, stated, map[bool]float64{true: 0.05}[d.between < 1]) // as the doc comment has it
		})
	}
}

// truthful draws runs and moves their readings so that both variances are estimated exactly as they are.
func truthful(d runDesign, r *rand.Rand) limits.Request {
	req := d.draw(r)
	means, inverse, within, _ := meansTable(req.Groups)
	kappa, spread, grand := 0.0, plainDeviation(means), 0.0
	for i, k := range inverse {
		kappa, grand = kappa+k/float64(len(inverse)), grand+means[i]/float64(len(inverse))
	}
	stretch := math.Sqrt(d.between*d.between+kappa*4) / spread
	for i, g := range req.Groups {
		for j, x := range g.Readings {
			g.Readings[j] = 10 + stretch*(means[i]-grand) + (x-means[i])*2/math.Sqrt(within)
		}
	}
	return req
}
