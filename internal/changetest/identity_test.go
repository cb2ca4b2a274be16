package changetest_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

// requests are drawn for all kinds and estimators, with breaks, exclusions and results of the old basis among them.
func requests(r *rand.Rand) (all []changetest.Request) {
	for _, kind := range []chart.Kind{chart.Individuals, chart.XbarR, chart.XbarS, chart.RunMeans} {
		for _, estimator := range changetest.Estimators(kind) {
			size := 1
			if kind != chart.Individuals {
				size = 4
			}
			groups := groupsOf(laws[r.IntN(len(laws))].draw(r, 30*size), size, r.NormFloat64()/2, math.Exp(r.NormFloat64()/4))
			groups[4].InOldBasis = true
			groups[11].BreakBefore = true
			groups[17].Excluded, groups[17].ExclusionReason = true, "spilt"
			f := changetest.InForce{Kind: kind, SubgroupSize: size, Centre: 10, Sigma: 1, Groups: 35, Readings: 35 * size, Estimator: estimator, DegreesOfFreedom: 31.5}
			if kind == chart.RunMeans {
				f.BetweenSigma = ptr(0.3)
			}
			all = append(all, changetest.Request{InForce: f, Groups: groups, Looks: 1})
		}
	}
	return all
}

// figures of a result that do not hang on the unit.
func figures(res changetest.Result) (all []float64) {
	comparisons := []*changetest.Comparison{res.Centre, res.Spread}
	if res.Means != nil {
		comparisons = append(comparisons, res.Means)
	}
	for _, c := range comparisons {
		all = append(all, *c.Estimate, c.Interval.Lower, c.Interval.Upper, c.Published.Interval.Lower, c.Published.Interval.Upper, c.Test.Statistic, c.Test.P, c.Plain.Statistic, c.Plain.P, float64(c.Decision))
	}
	return append(all, res.Correlation.Used, res.Tails)
}

func sameFigures(t *testing.T, what string, got, want []float64, tolerance float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: got %d figures, want %d", what, len(got), len(want))
	}
	for i := range got {
		if math.Abs(got[i]-want[i]) > tolerance*(1+math.Abs(want[i])) {
			t.Errorf("%s: figure %d: got %.12g, want %.12g", what, i, got[i], want[i])
		}
	}
}

// mapped turns every reading and the figures in force into a + b·x; sigmas into |b|·σ.
func mapped(req changetest.Request, a, b float64) changetest.Request {
	req.InForce.Centre = a + b*req.InForce.Centre
	req.InForce.Sigma *= math.Abs(b)
	if s := req.InForce.BetweenSigma; s != nil {
		req.InForce.BetweenSigma = ptr(*s * math.Abs(b))
	}
	groups := slices.Clone(req.Groups)
	for i, g := range groups {
		groups[i].Readings = slices.Clone(g.Readings)
		for j, x := range g.Readings {
			groups[i].Readings[j] = a + b*x
		}
	}
	req.Groups = groups
	return req
}

func TestUnitAndOriginDoNotMatter(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 1))
	for _, req := range requests(r) {
		want := mustCompare(t, req)
		for _, m := range [][2]float64{{1000, 1}, {-3, 0.001}, {0, 1e60}, {0, 1e-60}} {
			got := mustCompare(t, mapped(req, m[0], m[1]))
			sameFigures(t, req.InForce.Estimator.String(), figures(got), figures(want), 1e-8)
			if !near(got.Spread.Old**want.Spread.Estimate, *got.Spread.New, 1e-8) {
				t.Errorf("%s: new sigma %g, old %g, ratio %g", req.InForce.Estimator, *got.Spread.New, got.Spread.Old, *want.Spread.Estimate)
			}
		}
		mirror := mustCompare(t, mapped(req, 5, -1))
		in := want.Centre.Interval
		sameFigures(t, "mirrored", []float64{-mirror.Centre.Interval.Upper, -mirror.Centre.Interval.Lower, mirror.Spread.Interval.Upper, mirror.Centre.Test.P},
			[]float64{in.Lower, in.Upper, want.Spread.Interval.Upper, want.Centre.Test.P}, 1e-8)
	}
}

// The order of a track may be turned round: neighbours stay neighbours.
func TestTimeMayRunBackwards(t *testing.T) {
	for _, req := range requests(rand.New(rand.NewPCG(22, 1))) {
		want := mustCompare(t, req)
		back := req
		back.Groups = slices.Clone(req.Groups)
		slices.Reverse(back.Groups)
		back.Groups[len(req.Groups)-11].BreakBefore, back.Groups[len(req.Groups)-12].BreakBefore = true, false
		sameFigures(t, req.InForce.Estimator.String(), figures(mustCompare(t, back)), figures(want), 1e-9)
	}
}

// What is left out does not matter, but where it lies does: neighbours of it are not joined.
func TestLeftOutGroupsDoNotCount(t *testing.T) {
	for _, req := range requests(rand.New(rand.NewPCG(23, 1))) {
		want := mustCompare(t, req)
		if want.Groups != 28 || want.Readings != 28*req.InForce.SubgroupSize || want.BasisLeftOut != 1 || want.ExcludedLeftOut != 1 || want.Correlation.Pairs != 24 {
			t.Errorf("%s: got %d groups, %d readings, %d and %d left out, %d pairs", req.InForce.Estimator, want.Groups, want.Readings, want.BasisLeftOut, want.ExcludedLeftOut, want.Correlation.Pairs)
		}
		for _, i := range []int{4, 17} {
			req.Groups[i].Readings[0] += 1e6
		}
		if got := mustCompare(t, req); !slices.Equal(figures(got), figures(want)) {
			t.Errorf("%s: results that are left out changed the answer", req.InForce.Estimator)
		}
		req.Groups = slices.DeleteFunc(slices.Clone(req.Groups), func(g changetest.Group) bool { return g.InOldBasis || g.Excluded })
		req.Groups[4].BreakBefore, req.Groups[16].BreakBefore = true, true
		sameFigures(t, "a break in its place", figures(mustCompare(t, req)), figures(want), 1e-12)
	}
}

// A target is the limit of an old basis without end, and of it the published figure is all there is.
func TestTargetIsTheLimitOfALargeBasis(t *testing.T) {
	for _, req := range requests(rand.New(rand.NewPCG(24, 1))) {
		large, target := req, req
		large.InForce.Groups, large.InForce.Readings, large.InForce.DegreesOfFreedom = 1e9, 1e9*req.InForce.SubgroupSize, 1e9
		target.InForce.CentreTarget, target.InForce.SigmaTarget = true, true
		want := mustCompare(t, target)
		got := figures(mustCompare(t, large))
		// The plain t pools the old sigma, which a target centre is not compared with, so it differs by design.
		wanted := figures(want)
		got[7], got[8] = wanted[7], wanted[8]
		sameFigures(t, req.InForce.Estimator.String(), got, wanted, 2e-4)
		for _, c := range []*changetest.Comparison{want.Centre, want.Spread} {
			if *c.Published.Interval != *c.Interval || c.Published.Decision != c.Decision {
				t.Errorf("%s: against a target got %+v and, as published, %+v", req.InForce.Estimator, *c.Interval, *c.Published.Interval)
			}
		}
	}
}

// Old and new may change places where both are known alike: two sets of the same shape, one an image of the other so
// that tails and correlation agree. The ratio turns into its inverse, the difference changes sign and unit.
func TestSidesMayChangePlaces(t *testing.T) {
	xs := laws[3].draw(rand.New(rand.NewPCG(25, 1)), 40)
	ys := make([]float64, len(xs))
	for i, x := range xs {
		ys[i] = 0.4 + 1.6*x
	}
	describe := func(xs []float64) (changetest.InForce, []changetest.Group) {
		plain, groups := make([]limits.Group, len(xs)), make([]changetest.Group, len(xs))
		for i, x := range xs {
			plain[i] = limits.Group{Readings: []float64{x}, Decimals: limits.DecimalsUnknown}
			groups[i] = changetest.Group{Group: plain[i]}
		}
		res, err := limits.Compute(limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: plain, Estimator: limits.Overall})
		if err != nil {
			t.Fatal(err)
		}
		return changetest.InForce{Kind: chart.Individuals, SubgroupSize: 1, Centre: res.CentreUnrounded, Sigma: res.SigmaUnrounded, Groups: 40, Readings: 40, Estimator: limits.Overall, DegreesOfFreedom: 39}, groups
	}
	first, firstGroups := describe(xs)
	second, secondGroups := describe(ys)
	a := mustCompare(t, changetest.Request{InForce: first, Groups: secondGroups, Looks: 1})
	b := mustCompare(t, changetest.Request{InForce: second, Groups: firstGroups, Looks: 1})
	sameFigures(t, "exchanged",
		[]float64{*a.Spread.Estimate, a.Spread.Interval.Lower, a.Spread.Test.P, *a.Centre.Estimate * first.Sigma, a.Centre.Interval.Lower * first.Sigma, a.Centre.Test.P, a.Centre.Test.Freedom, a.Centre.Plain.P, a.Spread.Plain.P},
		[]float64{1 / *b.Spread.Estimate, 1 / b.Spread.Interval.Upper, b.Spread.Test.P, -*b.Centre.Estimate * second.Sigma, -b.Centre.Interval.Upper * second.Sigma, b.Centre.Test.P, b.Centre.Test.Freedom, b.Centre.Plain.P, b.Spread.Plain.P}, 1e-8)
}

// An interval leaves out no difference exactly where the p-value is below 0.05.
func TestIntervalAndTestAgree(t *testing.T) {
	r, below := rand.New(rand.NewPCG(26, 1)), 0
	for range 20 {
		for _, req := range requests(r) {
			res := mustCompare(t, req)
			for _, c := range []*changetest.Comparison{res.Centre, res.Spread} {
				if c.Differs != (c.Test.P < 0.05) {
					t.Errorf("interval %+v, p %g, differs %t", *c.Interval, c.Test.P, c.Differs)
				}
				if c.Differs {
					below++
				}
			}
		}
	}
	if below < 20 || below > 450 {
		t.Errorf("seed 26,1: %d of 560 comparisons differ, so one side was not looked at", below)
	}
}

// As the limits of relevance widen, a decision goes from CHANGE by NOT_ENOUGH_DATA to KEEP and never back.
func TestWiderRelevanceKeepsMore(t *testing.T) {
	order := map[changetest.Decision]int{changetest.Change: 0, changetest.NotEnoughData: 1, changetest.Keep: 2}
	for _, req := range requests(rand.New(rand.NewPCG(27, 1))) {
		last := [2]int{}
		for i := 1; i <= 50; i++ {
			req.Relevance = changetest.Relevance{CentreSigmas: float64(i) / 10, SigmaRatio: 1 + 9*float64(i)/50}
			res := mustCompare(t, req)
			now := [2]int{order[res.Centre.Decision], order[res.Spread.Decision]}
			if now[0] < last[0] || now[1] < last[1] {
				t.Errorf("%s: at %+v the decisions went from %v to %v", req.InForce.Estimator, req.Relevance, last, now)
			}
			last = now
		}
		if last != [2]int{2, 2} {
			t.Errorf("%s: with the widest relevance got %v, want KEEP", req.InForce.Estimator, last)
		}
	}
}
