package changetest_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

// Hybrid score intervals of two proportions: Newcombe (1998, Statistics in Medicine 17, 873-890, table II, method 10; from
// memory).
func TestDifferencesOfProportionsAsPrinted(t *testing.T) {
	for _, c := range []struct{ x1, n1, x2, n2, lower, upper float64 }{
		{56, 70, 48, 80, 0.0524, 0.3339},
		{9, 10, 3, 10, 0.1705, 0.8090},
		{6, 7, 2, 7, 0.0582, 0.8062},
		{5, 56, 0, 29, -0.0381, 0.1926},
		{10, 10, 0, 10, 0.6075, 1},
	} {
		got := changetest.CountsWithin(true, c.x1/c.n1, c.n1, c.x2/c.n2, c.n2, 1.959964)
		if math.Abs(got.Lower-c.lower) > 0.00005+1e-9 || math.Abs(got.Upper-c.upper) > 0.00005+1e-9 {
			t.Errorf("%v of %v, %v of %v: got %.5f to %.5f, printed %.4f to %.4f", c.x1, c.n1, c.x2, c.n2, got.Lower, got.Upper, c.lower, c.upper)
		}
	}
}

// cInForce are limits of nonconformities in one unit, from 40 samples.
func cInForce(centre float64) changetest.InForce {
	return changetest.InForce{Kind: chart.C, SubgroupSize: 1, Centre: centre, Groups: 40, Model: chart.Model{Inspected: 1, CountMethod: chart.Normal}}
}

func equalCounts(n int, count, inspected float64) []changetest.Group {
	groups := make([]changetest.Group, n)
	for i := range groups {
		groups[i] = counted(count, inspected)
	}
	return groups
}

// Equal counts vary less than counting has it, so the ends against a target lie t(n-1) standard errors away, each at the
// end itself: (m-θ)² = t²·v(θ)/N.
func TestScoreIntervalByItsDefinition(t *testing.T) {
	for _, n := range []int{8, 30} {
		q := distuv.StudentsT{Sigma: 1, Nu: float64(n - 1)}.Quantile(0.975)
		f := cInForce(4)
		f.CentreTarget = true
		res := mustCompare(t, changetest.Request{InForce: f, Groups: equalCounts(n, 5, 1), Looks: 1})
		np := changetest.InForce{Kind: chart.NP, SubgroupSize: 50, Centre: 4, CentreTarget: true, Model: chart.Model{Inspected: 50, CountMethod: chart.Normal}}
		items := mustCompare(t, changetest.Request{InForce: np, Groups: equalCounts(n, 5, 50), Looks: 1})
		for _, end := range []func(*limits.Interval) float64{func(in *limits.Interval) float64 { return in.Lower }, func(in *limits.Interval) float64 { return in.Upper }} {
			rate := 4 + 2*end(res.Centre.Interval) // sigma is √4
			if apart := rate - 5; !near(apart*apart, q*q*rate/float64(n), 1e-9) {
				t.Errorf("%d samples: an end at a rate of %g does not lie %g standard errors from 5", n, rate, q)
			}
			p := (4 + math.Sqrt(4*0.92)*end(items.Centre.Interval)) / 50
			if apart := p - 0.1; !near(apart*apart, q*q*p*(1-p)/(50*float64(n)), 1e-9) {
				t.Errorf("%d samples: an end at a fraction of %g does not lie %g standard errors from 0.1", n, p, q)
			}
		}
		if res.Spread != nil || res.Means != nil || res.Dispersion != 1 || res.Inspected != float64(n) || !near(*res.Centre.Estimate, 0.5, 1e-12) {
			t.Errorf("%d samples: got %+v", n, res)
		}
	}
}

// No count at all is a result: the mean may be as high as t²/N.
func TestAllZeroCounts(t *testing.T) {
	f := cInForce(0.5)
	f.CentreTarget = true
	res := mustCompare(t, changetest.Request{InForce: f, Groups: equalCounts(40, 0, 1), Looks: 1})
	q := distuv.StudentsT{Sigma: 1, Nu: 39}.Quantile(0.975)
	unit := math.Sqrt(0.5)
	if in := res.Centre.Interval; !near(in.Upper, (q*q/40-0.5)/unit, 1e-9) || !near(in.Lower, -0.5/unit, 1e-9) || res.Centre.Decision != changetest.Change || !near(*res.Centre.New+1, 1, 0) {
		t.Errorf("got %v, %+v, want up to %g", in, res.Centre, (q*q/40-0.5)/unit)
	}
	// Samples whose rates vary tell less of the mean: the model in force is all that says so here.
	wide := f
	wide.Model.Inflation = 2
	in := mustCompare(t, changetest.Request{InForce: wide, Groups: equalCounts(40, 0, 1), Looks: 1}).Centre.Interval
	if !near(in.Upper, (4*q*q/40-0.5)/(2*unit), 1e-9) {
		t.Errorf("with a factor of 2 in force: got %v", in)
	}
	// All items of all samples is the same seen from the other end.
	p := changetest.InForce{Kind: chart.P, SubgroupSize: 1, Centre: 0.2, Groups: 30, Model: chart.Model{Inspected: 50, CountMethod: chart.Normal}}
	none := mustCompare(t, changetest.Request{InForce: p, Groups: equalCounts(20, 0, 50), Looks: 1})
	p.Centre = 0.8
	all := mustCompare(t, changetest.Request{InForce: p, Groups: equalCounts(20, 50, 50), Looks: 1})
	if !near(none.Centre.Interval.Lower, -all.Centre.Interval.Upper, 1e-9) || !near(none.Centre.Interval.Upper, -all.Centre.Interval.Lower, 1e-9) || !near(none.Centre.Test.P, all.Centre.Test.P, 1e-6) {
		t.Errorf("none of 0.2 %+v, all of 0.8 %+v", none.Centre.Interval, all.Centre.Interval)
	}
}

// countRequests are drawn for every kind of counts, with breaks, exclusions and samples of the old basis.
func countRequests(r *rand.Rand) (all []changetest.Request) {
	for _, kind := range []chart.Kind{chart.P, chart.NP, chart.C, chart.U} {
		size, inspected, centre := 1, 1.0, 4.0
		switch kind {
		case chart.P:
			inspected, centre = 50, 0.08
		case chart.NP:
			size, inspected = 50, 50
		case chart.U:
			inspected, centre = 2.5, 1.6
		}
		for _, m := range []chart.Model{{}, {Inflation: 1.3}, {BetweenSigma: 0.02}} {
			if m.BetweenSigma > 0 && kind != chart.P && kind != chart.U {
				continue
			}
			m.Inspected, m.CountMethod = inspected, chart.Normal
			groups := make([]changetest.Group, 30)
			law := countLaw{mean: 3 + 2*r.Float64(), shape: r.IntN(2) * 4}
			for i := range groups {
				groups[i] = counted(math.Min(law.draw(r, 1, 1), 50), inspected)
			}
			groups[4].InOldBasis = true
			groups[11].BreakBefore = true
			groups[17].Excluded, groups[17].ExclusionReason = true, "dropped"
			all = append(all, changetest.Request{Groups: groups, Looks: 1,
				InForce: changetest.InForce{Kind: kind, SubgroupSize: size, Centre: centre, Groups: 35, Model: m}})
		}
	}
	return all
}

func countFigures(res changetest.Result) []float64 {
	c := res.Centre
	return []float64{*c.Estimate, c.Interval.Lower, c.Interval.Upper, c.Published.Interval.Lower, c.Published.Interval.Upper, c.Test.Statistic, c.Test.P,
		c.Plain.Statistic, c.Plain.P, float64(c.Decision), res.Correlation.Used, res.Dispersion}
}

// The p-value is below 0.05 exactly where the interval leaves out no difference.
func TestCountTestIsTheIntervalsInverse(t *testing.T) {
	r, differ := rand.New(rand.NewPCG(41, 1)), 0
	for range 60 {
		for _, req := range countRequests(r) {
			c := mustCompare(t, req).Centre
			if c.Differs != (c.Test.P < 0.05) {
				t.Errorf("%s: p %g, interval %v", req.InForce.Kind, c.Test.P, *c.Interval)
			}
			if c.Differs {
				differ++
			}
		}
	}
	if differ < 20 || differ > 500 {
		t.Errorf("%d of 600 comparisons differ, so the test says little", differ)
	}
}

// np at size n is p of samples of n; u of single units is c; and units may be counted by the dozen.
func TestKindsOfCountsAgree(t *testing.T) {
	r := rand.New(rand.NewPCG(42, 1))
	for range 20 {
		for _, req := range countRequests(r) {
			want := countFigures(mustCompare(t, req))
			other := req
			other.Groups = append([]changetest.Group(nil), req.Groups...)
			switch f := &other.InForce; f.Kind {
			case chart.NP:
				f.Kind, f.SubgroupSize, f.Centre = chart.P, 1, f.Centre/50
			case chart.C:
				f.Kind = chart.U
			case chart.U:
				f.Centre, f.Model.Inspected, f.Model.BetweenSigma = f.Centre*12, f.Model.Inspected/12, f.Model.BetweenSigma*12
				for i, g := range other.Groups {
					other.Groups[i] = g
					other.Groups[i].Count = &chart.Count{Nonconforming: g.Count.Nonconforming, Inspected: g.Count.Inspected / 12}
				}
			default:
				continue
			}
			sameFigures(t, req.InForce.Kind.String(), countFigures(mustCompare(t, other)), want, 1e-9)
		}
	}
}

func TestCountTargetIsTheLimitOfALargeBasis(t *testing.T) {
	for _, req := range countRequests(rand.New(rand.NewPCG(43, 1))) {
		large, target := req, req
		large.InForce.Groups, target.InForce.CentreTarget = 1e9, true
		want := mustCompare(t, target)
		sameFigures(t, req.InForce.Kind.String(), countFigures(mustCompare(t, large)), countFigures(want), 1e-3)
		if *want.Centre.Published.Interval != *want.Centre.Interval {
			t.Errorf("%s: against a target %v, as published %v", req.InForce.Kind, *want.Centre.Interval, *want.Centre.Published.Interval)
		}
	}
}

// The plain test is χ² of the two-by-two table by its definition, Σ(seen - expected)²/expected.
func TestPlainTestOfCountsIsPearsons(t *testing.T) {
	f := changetest.InForce{Kind: chart.P, SubgroupSize: 1, Centre: 0.1, Groups: 20, Inspected: 1000, Model: chart.Model{Inspected: 50, CountMethod: chart.Normal}}
	groups := append(equalCounts(10, 8, 50), equalCounts(5, 3, 40)...)
	table := [2][2]float64{{100, 900}, {95, 605}}
	square, total := 0.0, 1700.0
	for _, row := range table {
		for j, seen := range row {
			expected := (row[0] + row[1]) * (table[0][j] + table[1][j]) / total
			square += (seen - expected) * (seen - expected) / expected
		}
	}
	plain := mustCompare(t, changetest.Request{InForce: f, Groups: groups, Looks: 1}).Centre.Plain
	if !near(plain.Statistic*plain.Statistic, square, 1e-9) || !near(plain.P, distuv.ChiSquared{K: 1}.Survival(square), 1e-9) {
		t.Errorf("got %+v, want a square of %g", plain, square)
	}
}

// φ is Σz²/(k-1) where sizes are equal, and neighbours correlate no more than what goes beyond counting allows.
func TestDispersionOfCounts(t *testing.T) {
	var groups []changetest.Group
	sum, squares := 0.0, 0.0
	for i := range 24 {
		count := 2 + 6*float64(i/12) // a step
		groups = append(groups, counted(count, 1))
		sum += count
	}
	for _, g := range groups {
		apart := g.Count.Nonconforming - sum/24
		squares += apart * apart / (sum / 24)
	}
	res := mustCompare(t, changetest.Request{InForce: cInForce(4), Groups: groups, Looks: 1})
	if phi := squares / 23; !near(res.Dispersion, phi, 1e-12) || !near(res.Correlation.Used, 1-1/phi, 1e-12) || res.Correlation.Lag1 < 0.8 {
		t.Errorf("got φ %g, correlation %g of %g, want %g", res.Dispersion, res.Correlation.Used, res.Correlation.Lag1, phi)
	}
	if !strings.Contains(res.Sentence, "samples compared: 24 (24 inspection units)") || !strings.Contains(res.Sentence, "1.88 times") {
		t.Errorf("got %q", res.Sentence)
	}
}

func TestFewCounts(t *testing.T) {
	for n := range changetest.GroupsMin {
		c := mustCompare(t, changetest.Request{InForce: cInForce(4), Groups: equalCounts(n, 4, 1), Looks: 1}).Centre
		if c.Decision != changetest.NotEnoughData || c.Reason != changetest.TooFew || c.Interval != nil || c.Needed == nil || (c.Estimate != nil) != (n > 0) {
			t.Errorf("%d samples: got %+v", n, c)
		}
	}
	// What was planned comes true: counts that vary as little as may be settle it then, and not at two thirds.
	f := cInForce(4)
	f.CentreTarget = true
	plan := mustCompare(t, changetest.Request{InForce: f, Looks: 1}).Centre.Needed
	for n, want := range map[int]changetest.Decision{plan.Groups: changetest.Keep, plan.Groups * 2 / 3: changetest.NotEnoughData} {
		if got := mustCompare(t, changetest.Request{InForce: f, Groups: equalCounts(n, 4, 1), Looks: 1}).Centre; got.Decision != want {
			t.Errorf("planned %d: at %d samples got %s, want %s", plan.Groups, n, got.Decision, want)
		}
	}
}

func TestBadCountsAreRefused(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name    string
		spoil   func(*changetest.Request)
		field   string
		problem string
	}{
		{"no model", func(r *changetest.Request) { r.InForce.Model = chart.Model{} }, "inForce.model.count_method", "normal or exact"},
		{"no size", func(r *changetest.Request) { r.InForce.Model.Inspected = 0 }, "inForce.model.inspected", "more than 0"},
		{"size of nothing", func(r *changetest.Request) { r.InForce.Model.Inspected = 1e-10 }, "inForce.model.inspected", "1e-09"},
		{"between samples of c", func(r *changetest.Request) { r.InForce.Model.BetweenSigma = 1 }, "inForce.model.between_sigma", "kind c"},
		{"centre zero", func(r *changetest.Request) { r.InForce.Centre = 0 }, "inForce.centre", "above zero"},
		{"centre NaN", func(r *changetest.Request) { r.InForce.Centre = nan }, "inForce.centre", "above zero"},
		{"centre of all items", func(r *changetest.Request) {
			r.InForce.Kind, r.InForce.Centre = chart.P, 1
		}, "inForce.centre", "below all"},
		{"estimator", func(r *changetest.Request) { r.InForce.Estimator = limits.RBar }, "inForce.estimator", "leave it out"},
		{"no samples", func(r *changetest.Request) { r.InForce.Groups = 0 }, "inForce.groups", "1 to"},
		{"inspected", func(r *changetest.Request) { r.InForce.Inspected = nan }, "inForce.inspected", "in all"},
		{"readings", func(r *changetest.Request) { r.Groups[3].Readings = []float64{1} }, "groups[3].readings", "counts"},
		{"no count", func(r *changetest.Request) { r.Groups[3].Count = nil }, "groups[3].count", "needs a count"},
		{"half a count", func(r *changetest.Request) { r.Groups[3] = counted(0.5, 1) }, "groups[3].count", "whole"},
		{"two units on c", func(r *changetest.Request) { r.Groups[3] = counted(1, 2) }, "groups[3].count", "u chart"},
		{"no reason", func(r *changetest.Request) { r.Groups[3].Excluded = true }, "groups[3].exclusionReason", "reason"},
	} {
		t.Run(c.name, func(t *testing.T) {
			req := changetest.Request{InForce: cInForce(4), Groups: equalCounts(20, 4, 1), Looks: 1}
			mustCompare(t, req)
			c.spoil(&req)
			_, err := changetest.Compare(req)
			var refused *changetest.Error
			if !errors.As(err, &refused) || refused.Field != c.field || !strings.Contains(refused.Error(), c.problem) {
				t.Errorf("got %v, want a refusal of %s with %q", err, c.field, c.problem)
			}
		})
	}
}

// No count that can be judged leads to a figure that is not finite.
func TestExtremeCountsStayFinite(t *testing.T) {
	r := rand.New(rand.NewPCG(44, 1))
	for range 400 {
		power := func(low, high float64) float64 { return math.Pow(10, low+(high-low)*r.Float64()) }
		f := changetest.InForce{Kind: chart.U, SubgroupSize: 1, Centre: power(-12, 9), Groups: 1 + r.IntN(100), CentreTarget: r.IntN(2) == 0,
			Model: chart.Model{Inspected: power(-9, 9), CountMethod: chart.Normal}}
		switch r.IntN(3) {
		case 0:
			f.Model.Inflation = power(-3, 6)
		case 1:
			f.Model.BetweenSigma = power(-9, 6)
		}
		groups := make([]changetest.Group, r.IntN(40))
		for i := range groups {
			groups[i] = counted(math.Floor(power(-2, 9)*float64(r.IntN(2))), power(-9, 9))
		}
		allFinite(t, reflect.ValueOf(mustCompare(t, changetest.Request{InForce: f, Groups: groups, Looks: 1})), "result")
	}
}
