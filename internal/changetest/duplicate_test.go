package changetest_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

// duplicateRequests are drawn for every way in which sigma goes by the mean.
func duplicateRequests(t *testing.T, r *rand.Rand) (all []changetest.Request) {
	for i := range spreads {
		s := &spreads[i]
		f := s.inForce(t, s.sets(r, laws[0], 60, 2, 1), 2, limits.RBar)
		groups := s.sets(r, laws[0], 30, 2, 1.2)
		groups[4].InOldBasis = true
		groups[17].Excluded, groups[17].ExclusionReason = true, "spilt"
		all = append(all, changetest.Request{InForce: f, Groups: groups, Looks: 1})
	}
	return all
}

func spreadFigures(res changetest.Result) []float64 {
	c := res.Spread
	return []float64{*c.Estimate, c.Interval.Lower, c.Interval.Upper, c.Published.Interval.Lower, c.Published.Interval.Upper, c.Test.Statistic, c.Test.P,
		c.Test.FreedomBelow, c.Plain.Statistic, c.Plain.P, float64(c.Decision), res.Tails}
}

// times turns all readings, and the figures in force, into another unit. Percentages have none.
func times(req changetest.Request, unit float64) changetest.Request {
	f := &req.InForce
	if f.Kind == chart.DuplicateRange {
		f.Sigma *= unit
	}
	if s := f.Model.Spread; s != nil {
		scaled := *s
		scaled.Bands = append([]chart.Band(nil), s.Bands...)
		for i := range scaled.Bands {
			scaled.Bands[i].From *= unit
			if f.Kind == chart.DuplicateRange {
				scaled.Bands[i].Sigma *= unit
			}
		}
		scaled.S0 *= unit
		scaled.AbsoluteBelow *= unit
		scaled.AbsoluteSigma *= unit
		f.Model.Spread = &scaled
	}
	groups := append([]changetest.Group(nil), req.Groups...)
	for i, g := range groups {
		groups[i].Readings = nil
		for _, x := range g.Readings {
			groups[i].Readings = append(groups[i].Readings, x*unit)
		}
	}
	req.Groups = groups
	return req
}

func TestUnitOfDuplicatesDoesNotMatter(t *testing.T) {
	for i, req := range duplicateRequests(t, rand.New(rand.NewPCG(51, 1))) {
		want := mustCompare(t, req)
		if want.Groups != 28 || want.Readings != 56 || want.ExcludedLeftOut != 1 || want.BasisLeftOut != 1 || want.Centre != nil || want.Means != nil {
			t.Errorf("%s: got %+v", spreads[i].name, want)
		}
		for _, unit := range []float64{1000, 1. / 1024, 1e60} {
			got := mustCompare(t, times(req, unit))
			sameFigures(t, spreads[i].name, spreadFigures(got), spreadFigures(want), 1e-8)
		}
	}
}

// The ratio by its definition: each range over d2 = 2/√π sigmas in force at its mean, and their mean.
func TestRatioOfDuplicatesByItsDefinition(t *testing.T) {
	for i, req := range duplicateRequests(t, rand.New(rand.NewPCG(52, 1))) {
		sum, n := 0.0, 0.0
		for _, g := range req.Groups {
			if g.InOldBasis || g.Excluded {
				continue
			}
			level := (g.Readings[0] + g.Readings[1]) / 2
			var sigma float64
			switch s := req.InForce.Model.Spread; {
			case s == nil:
				sigma = req.InForce.Sigma
			case s.S0 > 0:
				sigma = math.Sqrt(s.S0*s.S0 + s.B*s.B*level*level)
			case len(s.Bands) > 0:
				sigma = s.Bands[int(level/100)].Sigma
			case level < s.AbsoluteBelow:
				sigma = s.AbsoluteSigma
			default:
				sigma = req.InForce.Sigma / 100 * level
			}
			sum += math.Abs(g.Readings[0]-g.Readings[1]) / sigma
			n++
		}
		if i == 2 { // the function is compared by pooled variances
			req.InForce.Estimator = limits.RBar
		}
		res := mustCompare(t, req)
		if want := sum / n * math.Sqrt(math.Pi) / 2; !near(*res.Spread.Estimate, want, 1e-9) || !near(*res.Spread.New, want*req.InForce.Sigma, 1e-9) {
			t.Errorf("%s: got %g, want %g", spreads[i].name, *res.Spread.Estimate, want)
		}
		if !strings.Contains(res.Sentence, "expect at its mean") || !strings.Contains(res.Spread.Sentence, "spread within duplicates") {
			t.Errorf("%s: got %q, %q", spreads[i].name, res.Sentence, res.Spread.Sentence)
		}
	}
}

// Bands of one sigma are no bands: three parts with a third of the freedom each, and a third of the sets in each, are known
// as well as one sigma with all of it. A part that is a target is known altogether.
func TestPartsJoin(t *testing.T) {
	r := rand.New(rand.NewPCG(53, 1))
	plain := spreads[0].inForce(t, spreads[0].sets(r, laws[0], 60, 2, 1), 2, limits.RBar)
	plain.Parts, plain.DegreesOfFreedom = nil, 60
	banded := plain
	banded.Model.Spread = &chart.Spread{}
	for i := range 3 {
		banded.Model.Spread.Bands = append(banded.Model.Spread.Bands, chart.Band{From: float64(100 * i), Sigma: plain.Sigma})
		banded.Parts = append(banded.Parts, changetest.Part{DegreesOfFreedom: 20})
	}
	groups := spreads[0].sets(r, laws[0], 30, 2, 1)
	want := mustCompare(t, changetest.Request{InForce: plain, Groups: groups, Looks: 1})
	sameFigures(t, "bands alike", spreadFigures(mustCompare(t, changetest.Request{InForce: banded, Groups: groups, Looks: 1})), spreadFigures(want), 1e-9)
	banded.Parts[1] = changetest.Part{Target: true}
	got := mustCompare(t, changetest.Request{InForce: banded, Groups: groups, Looks: 1}).Spread.Plain.FreedomBelow
	if !near(got, 90, 1e-9) { // 1/(2·(1/9)/20)
		t.Errorf("with a target among three bands: got %g degrees of freedom, want 90", got)
	}
	for i := range banded.Parts {
		banded.Parts[i] = changetest.Part{Target: true}
	}
	plain.SigmaTarget = true
	all := mustCompare(t, changetest.Request{InForce: banded, Groups: groups, Looks: 1}).Spread.Interval
	if target := mustCompare(t, changetest.Request{InForce: plain, Groups: groups, Looks: 1}).Spread.Interval; *all != *target {
		t.Errorf("targets in all bands: got %v, want %v", *all, *target)
	}
}

// A percentage of a mean of zero is none: the set is left out, as the judge leaves it out.
func TestMeanOfZeroIsLeftOut(t *testing.T) {
	f := changetest.InForce{Kind: chart.RelativeRange, SubgroupSize: 2, Sigma: 1, SigmaTarget: true}
	s := spreads[3]
	groups := s.sets(rand.New(rand.NewPCG(54, 1)), laws[0], 20, 2, 1)
	want := mustCompare(t, changetest.Request{InForce: f, Groups: groups, Looks: 1})
	zero := changetest.Group{Group: limits.Group{Readings: []float64{-0.1, 0.1}}}
	got := mustCompare(t, changetest.Request{InForce: f, Groups: append(groups, zero), Looks: 1})
	if got.ExcludedLeftOut != 1 || got.Groups != 20 {
		t.Errorf("got %d sets, %d left out", got.Groups, got.ExcludedLeftOut)
	}
	sameFigures(t, "with a mean of zero", spreadFigures(got), spreadFigures(want), 0)
}

func TestFewOrEqualDuplicates(t *testing.T) {
	s := spreads[1]
	r := rand.New(rand.NewPCG(55, 1))
	f := s.inForce(t, s.sets(r, laws[0], 90, 2, 1), 2, limits.RBar)
	for n := range changetest.GroupsMin {
		c := mustCompare(t, changetest.Request{InForce: f, Groups: s.sets(r, laws[0], n, 2, 1), Looks: 1}).Spread
		if c.Decision != changetest.NotEnoughData || c.Reason != changetest.TooFew || c.Interval != nil || c.Needed == nil || (c.Estimate != nil) != (n > 0) {
			t.Errorf("%d sets: got %+v", n, c)
		}
	}
	equal := make([]changetest.Group, 20)
	for i := range equal {
		equal[i].Readings = []float64{5, 5}
	}
	if c := mustCompare(t, changetest.Request{InForce: f, Groups: equal, Looks: 1}).Spread; c.Reason != changetest.NoSpread {
		t.Errorf("equal readings: got %+v", c)
	}
}

func TestBadDuplicatesAreRefused(t *testing.T) {
	for _, c := range []struct {
		name    string
		spread  int
		spoil   func(*changetest.Request)
		field   string
		problem string
	}{
		{"sigma", 0, func(r *changetest.Request) { r.InForce.Sigma = 0 }, "inForce.sigma", "larger than zero"},
		{"estimator", 0, func(r *changetest.Request) { r.InForce.Estimator = limits.SBar }, "inForce.estimator", "does not fit"},
		{"freedom", 0, func(r *changetest.Request) { r.InForce.Parts = nil }, "inForce.degreesOfFreedom", "0.5"},
		{"freedom of a part", 1, func(r *changetest.Request) { r.InForce.Parts[2].DegreesOfFreedom = math.NaN() }, "inForce.parts[2].degreesOfFreedom", "0.5"},
		{"a part missing", 1, func(r *changetest.Request) { r.InForce.Parts = r.InForce.Parts[:2] }, "inForce.parts", "each of the 3"},
		{"the part of low means missing", 3, func(r *changetest.Request) { r.InForce.Parts = nil }, "inForce.parts", "each of the 2"},
		{"parts of a function", 2, func(r *changetest.Request) { r.InForce.Parts = []changetest.Part{{}} }, "inForce.parts", "leave them out"},
		{"a function of no sets", 2, func(r *changetest.Request) { r.InForce.Groups = 0 }, "inForce.groups", "1 to"},
		{"a function of single readings", 2, func(r *changetest.Request) { r.InForce.Readings = r.InForce.Groups }, "inForce.readings", "2 to 2"},
		{"bands out of order", 1, func(r *changetest.Request) { r.InForce.Model.Spread.Bands[1].From = 0 }, "inForce.model.spread.bands[1].from", "larger than"},
		{"one reading", 0, func(r *changetest.Request) { r.Groups[3].Readings = []float64{1} }, "groups[3].readings", "at least 2"},
		{"three readings", 0, func(r *changetest.Request) { r.Groups[3].Readings = []float64{1, 2, 3} }, "groups[3].readings", "subgroup size"},
		{"NaN", 0, func(r *changetest.Request) { r.Groups[3].Readings[1] = math.NaN() }, "groups[3].readings[1]", "finite"},
		{"another unit", 0, func(r *changetest.Request) { r.Groups[3].Readings[1] = 1e13 }, "groups[3].readings[1]", "same unit"},
		{"no reason", 0, func(r *changetest.Request) { r.Groups[3].Excluded = true }, "groups[3].exclusionReason", "reason"},
	} {
		t.Run(c.name, func(t *testing.T) {
			req := duplicateRequests(t, rand.New(rand.NewPCG(56, 1)))[c.spread]
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
