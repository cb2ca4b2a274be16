package limits_test

import (
	"errors"
	"math"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

func TestCountErrorsNameFieldValueAndLimit(t *testing.T) {
	c := func(change func(*limits.Request)) limits.Request {
		req := limits.Request{Kind: chart.C, Groups: samplesOf(1, 3, 5, 4)}
		change(&req)
		return req
	}
	p := func(change func(*limits.Request)) limits.Request {
		req := limits.Request{Kind: chart.P, Groups: samplesOf(50, 3, 5, 4)}
		change(&req)
		return req
	}
	out := limits.Group{Excluded: true, ExclusionReason: "plate dropped"}
	for _, test := range []struct {
		name  string
		req   limits.Request
		field string
		says  string
	}{
		{"empty", c(func(r *limits.Request) { r.Groups = nil }), "groups", "a centre"},
		{"all excluded", c(func(r *limits.Request) { r.Groups = []limits.Group{out} }), "groups", "all are excluded"},
		{"all zero", c(func(r *limits.Request) { r.Groups = samplesOf(1, 0, 0) }), "groups", "counts.meanUpperBound"},
		{"all zero, p", p(func(r *limits.Request) { r.Groups = samplesOf(50, 0, 0) }), "groups", "a centre as a target"},
		{"all nonconforming", p(func(r *limits.Request) { r.Groups = samplesOf(50, 50, 50) }), "groups", "all items are nonconforming"},
		{"bound beside counts", c(func(r *limits.Request) { r.Counts.MeanUpperBound = ptr(1.0) }), "counts.meanUpperBound", "add up to 12"},
		{"bound beside a centre", c(func(r *limits.Request) { r.Centre, r.Counts.MeanUpperBound = ptr(1.0), ptr(1.0) }), "counts.meanUpperBound", "leave one"},
		{"bound of zero", c(func(r *limits.Request) { r.Groups, r.Counts.MeanUpperBound = samplesOf(1, 0), ptr(0.0) }), "counts.meanUpperBound", "larger than zero"},
		{"bound that is no number", c(func(r *limits.Request) { r.Groups, r.Counts.MeanUpperBound = samplesOf(1, 0), ptr(math.NaN()) }), "counts.meanUpperBound", "larger than zero"},
		{"negative centre", c(func(r *limits.Request) { r.Centre = ptr(-1.0) }), "centre", "larger than zero"},
		{"centre of one", p(func(r *limits.Request) { r.Centre = ptr(1.0) }), "centre", "less than 1"},
		{"centre of all items", limits.Request{Kind: chart.NP, SubgroupSize: 50, Centre: ptr(50.0)}, "centre", "less than 50"},
		{"huge centre", c(func(r *limits.Request) { r.Centre = ptr(2e9) }), "centre", "1e+09"},
		{"p without a sample", p(func(r *limits.Request) { r.Groups, r.Centre = nil, ptr(0.1) }), "groups", "at least one sample"},
		{"readings", c(func(r *limits.Request) { r.Groups[1].Readings = []float64{1} }), "groups[1].readings", "takes counts"},
		{"no count", c(func(r *limits.Request) { r.Groups[1].Count = nil }), "groups[1].count", "needs a count"},
		{"negative count", c(func(r *limits.Request) { r.Groups[1] = counted(-1, 1) }), "groups[1].count", "nonconforming -1"},
		{"broken count", c(func(r *limits.Request) { r.Groups[1] = counted(1.5, 1) }), "groups[1].count", "nonconforming 1.5"},
		{"two units on c", c(func(r *limits.Request) { r.Groups[1] = counted(1, 2) }), "groups[1].count", "u chart"},
		{"more than inspected", p(func(r *limits.Request) { r.Groups[1] = counted(51, 50) }), "groups[1].count", "more than the 50"},
		{"nothing inspected", p(func(r *limits.Request) { r.Groups[1] = counted(0, 0) }), "groups[1].count", "inspected 0"},
		{"next to nothing inspected", limits.Request{Kind: chart.U, Groups: samplesOf(1e-10, 3)}, "groups[0].count", "1e-09"},
		{"another size on np", limits.Request{Kind: chart.NP, SubgroupSize: 50, Groups: samplesOf(49, 3)}, "groups[0].count", "use a p chart"},
		{"np without a size", limits.Request{Kind: chart.NP, Groups: samplesOf(50, 3)}, "subgroupSize", "np"},
		{"bad count excluded", c(func(r *limits.Request) {
			r.Groups[1] = out
			r.Groups[1].Count = &chart.Count{Nonconforming: -1, Inspected: 1}
		}), "groups[1].count", "nonconforming -1"},
		{"no reason", c(func(r *limits.Request) { r.Groups[1].Excluded = true }), "groups[1].exclusionReason", "needs a reason"},
		{"sigma", c(func(r *limits.Request) { r.Sigma = ptr(2.0) }), "sigma", "kind c"},
		{"estimator", c(func(r *limits.Request) { r.Estimator = limits.MeanMovingRange }), "estimator", "sigma of counts"},
		{"between sigma", p(func(r *limits.Request) { r.BetweenSigma = ptr(0.1) }), "betweenSigma", "kind p"},
		{"transform", c(func(r *limits.Request) { r.Transform.Kind = chart.SquareRoot }), "transform", "kind c"},
		{"levels", c(func(r *limits.Request) { r.Levels = []chart.Level{{Material: "a", Sigma: 1}} }), "levels", "standardised"},
		{"dispersion line", c(func(r *limits.Request) { r.Fixed[chart.Dispersion].UpperAction = targetLine(3) }), "fixed.dispersion.upperAction", "no such trace"},
		{"line below zero", c(func(r *limits.Request) { r.Fixed[chart.Location].LowerAction = targetLine(-1) }), "fixed.location.lowerAction", "no count lies there"},
		{"line above one", p(func(r *limits.Request) { r.Fixed[chart.Location].UpperAction = targetLine(1.5) }), "fixed.location.upperAction", "from 0 to 1"},
		{"crossing lines", c(func(r *limits.Request) {
			r.Fixed[chart.Location].LowerAction, r.Fixed[chart.Location].UpperAction = targetLine(5), targetLine(5)
		}), "fixed.location.lowerAction", "below the upper"},
		{"unknown method", c(func(r *limits.Request) { r.Counts.Method = 9 }), "counts.method", "9"},
		{"unknown extra", c(func(r *limits.Request) { r.Counts.Extra = 9 }), "counts.extra", "9"},
		{"exact with extra", p(func(r *limits.Request) {
			r.Counts = limits.CountOptions{Method: chart.Exact, Extra: limits.LaneyFactor}
		}), "counts.method", "counting alone"},
		{"between samples of c", c(func(r *limits.Request) { r.Counts.Extra = limits.BetweenSamples }), "counts.extra", "ask for the factor"},
		{"extra of one sample", c(func(r *limits.Request) { r.Groups, r.Counts.Extra = samplesOf(1, 4), limits.LaneyFactor }), "counts.extra", "at least 2"},
		{"extra of zeros", c(func(r *limits.Request) {
			r.Groups, r.Counts.Extra, r.Centre = samplesOf(1, 0, 0, 0), limits.LaneyFactor, ptr(1.0)
		}), "counts.extra", "all zero"},
		{"factor without neighbours", c(func(r *limits.Request) {
			r.Groups[1].BreakBefore, r.Groups[2].BreakBefore, r.Counts.Extra = true, true, limits.LaneyFactor
		}), "groups", "no moving range"},
		{"factor across an exclusion", c(func(r *limits.Request) {
			r.Groups[1], r.Counts.Extra = out, limits.LaneyFactor
		}), "groups", "no moving range"},
		{"factor of equal samples", c(func(r *limits.Request) { r.Groups, r.Counts.Extra = samplesOf(1, 4, 4, 4), limits.LaneyFactor }), "groups", "the samples are equal"},
		{"centre rounds to zero", p(func(r *limits.Request) { r.Groups, r.PublishedDecimals = samplesOf(5000, 3, 5), ptr(2) }), "publishedDecimals", "rounds to 0"},
		{"lines fall on each other", p(func(r *limits.Request) { r.Groups, r.PublishedDecimals = samplesOf(50000, 2500, 2510), ptr(2) }), "publishedDecimals", "fall on each other"},
		{"counts fall on each other", p(func(r *limits.Request) {
			r.Groups, r.PublishedDecimals, r.Counts.Method = samplesOf(500, 25, 26), ptr(2), chart.Exact
		}), "publishedDecimals", "takes 3 decimals"},
		{"totals", p(func(r *limits.Request) {
			r.Groups = make([]limits.Group, 1001)
			copy(r.Groups, samplesOf(1e9, make([]float64, 1001)...))
		}), "groups", "1e+12"},
	} {
		t.Run(test.name, func(t *testing.T) {
			_, err := limits.Compute(test.req)
			var refused *limits.Error
			if !errors.As(err, &refused) {
				t.Fatalf("got %v, want an *Error of field %s", err, test.field)
			}
			if refused.Field != test.field || !strings.Contains(err.Error(), test.says) {
				t.Errorf("got %q of field %q, want field %q and %q", err, refused.Field, test.field, test.says)
			}
		})
	}
}
