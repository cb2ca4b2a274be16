package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/limits"
)

// pairs makes n sets of size readings with the given means in turn, and the standard deviation that sigma gives there.
func pairs(r *rand.Rand, n, size int, sigma func(mean float64) float64, means ...float64) []limits.Group {
	groups := make([]limits.Group, n)
	for i := range groups {
		mean := means[i%len(means)]
		g := limits.Group{Decimals: 4}
		for range size {
			g.Readings = append(g.Readings, math.Round(1e4*(mean+sigma(mean)*r.NormFloat64()))/1e4)
		}
		groups[i] = g
	}
	return groups
}

func constant(sigma float64) func(float64) float64 { return func(float64) float64 { return sigma } }

// Worked by hand: ranges 1, 3, 2 of pairs have the mean 2, so sigma is 2·√π/2 = 1.7724539; d2 = 2/√π and d3 = √(2-4/π), so
// the centre is 2, and the action line 2 + 3·0.8525025·1.77245 = 6.53305.
func TestDuplicateRangesByHand(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 2, Groups: subgroups([]float64{5, 6}, []float64{20, 17}, []float64{-1, 1}), PublishedDecimals: ptr(5)})
	if res.ProcessSigma != 1.77245 || *res.Dispersion.Centre != 2 || res.Dispersion.UpperAction.Value != 6.53305 {
		t.Errorf("got sigma %g, trace %s", res.ProcessSigma, show(res.Dispersion))
	}
	absent := chart.Line{Basis: chart.Absent}
	if want := (chart.Trace{LowerAction: absent, UpperAction: absent, LowerWarning: absent, UpperWarning: absent}); !reflect.DeepEqual(res.Location, want) {
		t.Errorf("got location %+v, want an empty one", res.Location)
	}
	if res.Dispersion.LowerAction != absent || res.Dispersion.LowerWarning != absent || res.Model.Spread != nil {
		t.Errorf("got lower lines %+v and model %+v", res.Dispersion, res.Model)
	}
	// Of the same ranges, the pooled s is √((1+9+4)/2/3), unbiased by c4 of four.
	if got, want := estimate(t, res, limits.Pooled).Sigma, math.Sqrt(14./6*(1+unbiasedVariance(3))); !near(got, want, 1e-13) {
		t.Errorf("pooled: got %.14g, want %.14g", got, want)
	}
}

// Relative ranges are those of readings divided by their mean, in percent.
func TestRelativeRangesAreRangesOfRelativeReadings(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 41))
	for _, size := range []int{2, 4} {
		groups := pairs(r, 25, size, func(m float64) float64 { return 0.03 * math.Abs(m) }, 4, 50, -8, 700)
		res := mustCompute(t, limits.Request{Kind: chart.RelativeRange, SubgroupSize: size, Groups: groups, PublishedDecimals: ptr(9)})
		first := mapReadings(limits.Request{Kind: chart.DuplicateRange, SubgroupSize: size, Groups: groups, PublishedDecimals: ptr(9)}, func(x float64) float64 { return x })
		for _, g := range first.Groups {
			mean := 0.0
			for _, x := range g.Readings {
				mean += x / float64(size)
			}
			for i := range g.Readings {
				g.Readings[i] *= 100 / math.Abs(mean)
			}
		}
		want := mustCompute(t, first)
		for i, e := range res.Estimates {
			if !near(e.Sigma, want.Estimates[i].Sigma, 1e-11) {
				t.Errorf("%s: got %.14g, want %.14g", e.Name, e.Sigma, want.Estimates[i].Sigma)
			}
		}
		if math.Abs(res.ProcessSigma-3) > 3*4/math.Sqrt(2*25) {
			t.Errorf("got sigma %g %%, want about 3", res.ProcessSigma)
		}
	}
}

func TestBandsAreEstimatedApart(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 42))
	low, high := pairs(r, 12, 2, constant(1), 3), pairs(r, 14, 3, constant(5), 90)
	req := limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 3, PublishedDecimals: ptr(6)}
	alone := func(groups []limits.Group) limits.Result {
		req := req
		req.Groups, req.Duplicates = groups, limits.DuplicateOptions{}
		return mustCompute(t, req)
	}
	req.Groups = append(append([]limits.Group(nil), high...), low...)
	req.Duplicates.Bands = []float64{10, 50} // the first holds below its beginning as well
	res := mustCompute(t, req)
	want := []chart.Band{{From: 10, Sigma: alone(low).ProcessSigma}, {From: 50, Sigma: alone(high).ProcessSigma}}
	if !reflect.DeepEqual(res.Model.Spread.Bands, want) || res.ProcessSigma != want[0].Sigma {
		t.Errorf("got %+v at %g, want %+v", res.Model.Spread.Bands, res.ProcessSigma, want)
	}
	if !reflect.DeepEqual(res.Dispersion, alone(low).Dispersion) {
		t.Errorf("got lines %s, want those of the first band", show(res.Dispersion))
	}
	if !res.Provisional || !codes(res)[limits.CodeProvisional] {
		t.Errorf("12 sets in a band: got findings %+v, want %s", res.Findings, limits.CodeProvisional)
	}
	req.Duplicates.Bands = []float64{10, 50, 100}
	_, err := limits.Compute(req)
	if err == nil || !strings.Contains(err.Error(), "band from 100: has 0 sets of duplicates") || !strings.Contains(err.Error(), "at least 10") {
		t.Errorf("an empty band: got %v, want its name, count and minimum", err)
	}
	req.Duplicates.Sigmas = []float64{1, 5, 7}
	given := mustCompute(t, req)
	if given.Origin != limits.Target || given.ProcessSigma != 1 || given.Model.Spread.Bands[2].Sigma != 7 || given.Parts[2].Ratio != nil {
		t.Errorf("given sigmas: got %+v", given.Parts)
	}
	if ratio, want := given.Parts[1].Ratio, alone(high).SigmaUnrounded/5; ratio == nil || !near(ratio.Estimate, want, 1e-12) {
		t.Errorf("ratio to a given sigma: got %+v, want %g", ratio, want)
	}
}

func TestLowMeansTakeThePlainRange(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 43))
	low, high := pairs(r, 20, 2, constant(0.2), 0, 1, -1), pairs(r, 20, 2, func(m float64) float64 { return 0.04 * m }, 20, 60)
	req := limits.Request{Kind: chart.RelativeRange, SubgroupSize: 2, Groups: append(append([]limits.Group(nil), low...), high...), PublishedDecimals: ptr(6)}
	req.Duplicates.AbsoluteBelow = 5
	res := mustCompute(t, req)
	plain := mustCompute(t, limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 2, Groups: low, PublishedDecimals: ptr(6)})
	relative := mustCompute(t, limits.Request{Kind: chart.RelativeRange, SubgroupSize: 2, Groups: high, PublishedDecimals: ptr(6)})
	if s := res.Model.Spread; s.AbsoluteSigma != plain.ProcessSigma || s.AbsoluteBelow != 5 || res.ProcessSigma != relative.ProcessSigma {
		t.Errorf("got %+v with %g, want %g and %g", s, res.ProcessSigma, plain.ProcessSigma, relative.ProcessSigma)
	}
	judgeBy(t, res)
	req.Duplicates.AbsoluteSigma = ptr(0.25)
	if mixed := mustCompute(t, req); mixed.Origin != limits.Mixed || mixed.Model.Spread.AbsoluteSigma != 0.25 {
		t.Errorf("got %s, %+v, want mixed", mixed.Origin, mixed.Model.Spread)
	}
}

// In closed form for pairs, whose difference is normal with variance 2, and by simulation for four readings.
func TestTailsOfDuplicates(t *testing.T) {
	const seed, draws = 44, 1_000_000
	res := mustCompute(t, limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 4, Sigma: ptr(0.5), PublishedDecimals: ptr(4), Groups: subgroups([]float64{1, 2}, []float64{1, 1.5, 2})})
	if len(res.Tails) != 6 {
		t.Fatalf("got tails %+v, want two lines at sizes 4, 2, 3", res.Tails)
	}
	r := rand.New(rand.NewPCG(seed, 44))
	beyond := map[string]float64{}
	for range draws {
		low, high := math.Inf(1), math.Inf(-1)
		for range 4 {
			x := 0.5 * r.NormFloat64()
			low, high = min(low, x), max(high, x)
		}
		if high-low > res.Dispersion.UpperAction.Value {
			beyond["upperAction"] += 1. / draws
		}
		if high-low > res.Dispersion.UpperWarning.Value {
			beyond["upperWarning"] += 1. / draws
		}
	}
	pair := mustCompute(t, limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 2, Sigma: ptr(0.5), PublishedDecimals: ptr(4)}).Dispersion
	for _, tail := range res.Tails {
		want, bound, nominal := 0.0, 0.0, chart.ActionTail
		line := pair.UpperAction
		if tail.Line == "upperWarning" {
			nominal, line = chart.WarningTail, pair.UpperWarning
		}
		switch tail.Size {
		case 4:
			want = beyond[tail.Line]
			bound = 4 * math.Sqrt(want/draws)
		case 2:
			want = math.Erfc(line.Value / 0.5 / 2) // 2·(1-Φ(x/√2))
			bound = 1e-12
		default:
			continue
		}
		if math.Abs(tail.Probability-want) > bound || tail.Nominal != nominal || tail.Role != chart.Dispersion {
			t.Errorf("seed %d,44: got %+v, want %.6f within %.6f, nominal %g", seed, tail, want, bound, nominal)
		}
	}
	fixed := limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 2, Sigma: ptr(0.5)}
	fixed.Fixed[chart.Dispersion].UpperAction = &chart.Line{Value: 1, Basis: chart.MethodCriterion}
	res = mustCompute(t, fixed)
	if got, want := res.Tails[0], math.Erfc(1); !near(got.Probability, want, 1e-12) || got.Nominal != 0 {
		t.Errorf("fixed line: got %+v, want %g of no nominal rate", got, want)
	}
	if f := res.Findings; len(f) != 1 || f[0].Code != limits.CodeCriterionInsideLimit || !strings.Contains(f[0].Text, "15.7 % of sound values") {
		t.Errorf("fixed line: got %+v, want erfc(1) = 15.7 %% of sound values", f)
	}
}

// Pairs with sigma √(0.3² + (0.05·mean)²) judged by the given function signal at the stated tail at every mean.
func TestFunctionOfTheMeanJudgesEveryMeanAlike(t *testing.T) {
	const seed, points = 45, 40_000
	res := mustCompute(t, limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 2, PublishedDecimals: ptr(6), Duplicates: limits.DuplicateOptions{S0: ptr(0.3), B: ptr(0.05)}})
	if res.ProcessSigma != 0.3 || res.Origin != limits.Target {
		t.Errorf("got %g, %s, want s0 as the process sigma without a basis", res.ProcessSigma, res.Origin)
	}
	j := judgeBy(t, res)
	r := rand.New(rand.NewPCG(seed, 45))
	for _, mean := range []float64{0, 6, 100} {
		sigma := math.Hypot(0.3, 0.05*mean)
		var v judge.Verdict
		st, got := j.NewState(), 0.0
		for range points {
			d := sigma * r.NormFloat64() / math.Sqrt2 // the mean stays, so that the judge's sigma is the true one
			j.Judge(st, judge.Point{Readings: []float64{mean + d, mean - d}}, &v)
			got += float64(len(v.Hits)) / points
		}
		want := res.Tails[0].Probability
		if bound := 4 * math.Sqrt(want/points); math.Abs(got-want) > bound {
			t.Errorf("seed %d,45, mean %g: %.5f beyond the line, want %.5f within %.5f", seed, mean, got, want, bound)
		}
	}
}

func TestDuplicateErrors(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 46))
	some := pairs(r, 12, 2, constant(1), 3, 30)
	base := func(kind chart.Kind, o limits.DuplicateOptions) limits.Request {
		return limits.Request{Kind: kind, SubgroupSize: 2, Groups: some, Duplicates: o}
	}
	plain := func(o limits.DuplicateOptions) limits.Request { return base(chart.DuplicateRange, o) }
	with := func(change func(*limits.Request)) limits.Request {
		req := plain(limits.DuplicateOptions{})
		change(&req)
		return req
	}
	line := &chart.Line{Basis: chart.MethodCriterion, Value: 3}
	for _, c := range []struct {
		name, field, says string
		req               limits.Request
	}{
		{"one reading", "groups[1].readings", "at least 2", with(func(r *limits.Request) { r.Groups = subgroups([]float64{1, 2}, []float64{3}) })},
		{"one set", "groups", "at least 2", with(func(r *limits.Request) { r.Groups = some[:1] })},
		{"no set", "groups", "0 sets", with(func(r *limits.Request) { r.Groups = nil })},
		{"no scatter", "groups", "spread is zero", with(func(r *limits.Request) { r.Groups = subgroups([]float64{1, 1}, []float64{3, 3}) })},
		{"mean of zero", "groups[1].readings", "mean below which", func() limits.Request {
			req := base(chart.RelativeRange, limits.DuplicateOptions{})
			req.Groups = subgroups([]float64{1, 2}, []float64{-3, 3}, []float64{4, 5})
			return req
		}()},
		{"no percentage", "groups[1].readings", "1e+100", func() limits.Request {
			req := base(chart.RelativeRange, limits.DuplicateOptions{})
			req.SubgroupSize, req.Groups = 3, subgroups([]float64{1, 2}, []float64{1e90, -1e90, 1e-200}, []float64{4, 5})
			return req
		}()},
		{"a centre", "centre", "takes none", with(func(r *limits.Request) { r.Centre = ptr(1.0) })},
		{"a sigma between", "betweenSigma", "takes none", with(func(r *limits.Request) { r.BetweenSigma = ptr(1.0) })},
		{"a transform", "transform", "not transformed", with(func(r *limits.Request) { r.Transform.Kind = chart.Log })},
		{"a lower line", "fixed.dispersion.lowerAction", "too much only", with(func(r *limits.Request) { r.Fixed[chart.Dispersion].LowerAction = line })},
		{"a location line", "fixed.location.upperAction", "no such trace", with(func(r *limits.Request) { r.Fixed[chart.Location].UpperAction = line })},
		{"another estimator", "estimator", "R_BAR_OVER_D2", with(func(r *limits.Request) { r.Estimator = limits.SBar })},
		{"a count", "groups[0].count", "takes readings", with(func(r *limits.Request) { r.Groups = []limits.Group{{Count: &chart.Count{Inspected: 1}}} })},
		{"rounded to nothing", "publishedDecimals", "rounds to zero", with(func(r *limits.Request) { r.Sigma, r.PublishedDecimals = ptr(0.004), ptr(2) })},
		{"lines on each other", "publishedDecimals", "fall on each other", with(func(r *limits.Request) { r.SubgroupSize, r.Sigma, r.PublishedDecimals = 8, ptr(1.0), ptr(0) })},
		{"descending bands", "duplicates.bands[1].from", "larger than the one before", plain(limits.DuplicateOptions{Bands: []float64{5, 4}})},
		{"NaN band", "duplicates.bands[0].from", "NaN", plain(limits.DuplicateOptions{Bands: []float64{math.NaN()}})},
		{"too many bands", "duplicates.bands", "20", plain(limits.DuplicateOptions{Bands: make([]float64, 21)})},
		{"sigmas without bands", "duplicates.sigmas", "0 bands", plain(limits.DuplicateOptions{Sigmas: []float64{1}})},
		{"a sigma of zero", "duplicates.bands[0].sigma", "above 0", plain(limits.DuplicateOptions{Bands: []float64{0}, Sigmas: []float64{0}})},
		{"bands and function", "duplicates.s0", "without bands", plain(limits.DuplicateOptions{Bands: []float64{0}, Function: true})},
		{"function of relative ranges", "duplicates.s0", "without bands", base(chart.RelativeRange, limits.DuplicateOptions{Function: true})},
		{"s0 without b", "duplicates.b", "both or neither", plain(limits.DuplicateOptions{S0: ptr(1.0)})},
		{"s0 of zero", "duplicates.s0", "no scatter", plain(limits.DuplicateOptions{S0: ptr(0.0), B: ptr(0.1)})},
		{"few sets for a function", "groups", "at least 10", func() limits.Request {
			req := plain(limits.DuplicateOptions{Function: true})
			req.Groups = some[:9]
			return req
		}()},
		{"means alike", "duplicates.function", "factor of 2", func() limits.Request {
			req := plain(limits.DuplicateOptions{Function: true})
			req.Groups = pairs(r, 12, 2, constant(1), 30, 35)
			return req
		}()},
		{"proportional", "duplicates.function", "relative_range", func() limits.Request {
			req := plain(limits.DuplicateOptions{Function: true})
			req.Groups = nil
			for i := range 12 { // every pair differs by the same tenth of its mean
				req.Groups = append(req.Groups, limits.Group{Readings: []float64{float64(1+i) * 0.95, float64(1+i) * 1.05}})
			}
			return req
		}()},
		{"sigma and function", "sigma", "by band", func() limits.Request {
			req := plain(limits.DuplicateOptions{Function: true})
			req.Sigma = ptr(1.0)
			return req
		}()},
		{"estimator of a function", "estimator", "leave it out", func() limits.Request {
			req := plain(limits.DuplicateOptions{Function: true})
			req.Estimator = limits.Pooled
			return req
		}()},
		{"low means of plain ranges", "duplicates.absolute_below", "relative_range", plain(limits.DuplicateOptions{AbsoluteBelow: 1})},
		{"negative low means", "duplicates.absolute_below", "at least 0", base(chart.RelativeRange, limits.DuplicateOptions{AbsoluteBelow: -1})},
		{"sigma of no low means", "duplicates.absoluteSigma", "mean below", base(chart.RelativeRange, limits.DuplicateOptions{AbsoluteSigma: ptr(1.0)})},
		{"few low means", "groups", "means below 1: has 0", base(chart.RelativeRange, limits.DuplicateOptions{AbsoluteBelow: 1})},
		{"options of another kind", "duplicates.function", "has none", limits.Request{Kind: chart.Individuals, Duplicates: limits.DuplicateOptions{Function: true}, Groups: singles(1, 2, 3)}},
		{"counts of another kind", "counts.method", "takes readings", with(func(r *limits.Request) { r.Counts.Method = chart.Exact })},
		{"overall sigma of runs", "estimator", "sigma within", limits.Request{Kind: chart.RunMeans, SubgroupSize: 2, Groups: some, Estimator: limits.Overall}},
		{"sigma between of subgroups", "betweenSigma", "takes none", limits.Request{Kind: chart.XbarS, SubgroupSize: 2, Groups: some, BetweenSigma: ptr(1.0)}},
		{"negative sigma between", "betweenSigma", "not be negative", limits.Request{Kind: chart.RunMeans, SubgroupSize: 2, Groups: some, BetweenSigma: ptr(-1.0)}},
		{"one run", "groups", "at least 2 runs", limits.Request{Kind: chart.RunMeans, SubgroupSize: 2, Groups: some[:1], Sigma: ptr(1.0)}},
		{"sigma between rounds to nothing", "publishedDecimals", "between runs", limits.Request{Kind: chart.RunMeans, SubgroupSize: 2, Sigma: ptr(1.0), BetweenSigma: ptr(0.4), Centre: ptr(0.0), PublishedDecimals: ptr(0)}},
	} {
		_, err := limits.Compute(c.req)
		var refused *limits.Error
		if !errors.As(err, &refused) || refused.Field != c.field || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: got %v, want field %s and %q", c.name, err, c.field, c.says)
		}
	}
}
