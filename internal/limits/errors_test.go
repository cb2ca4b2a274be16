package limits_test

import (
	"errors"
	"math"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

func TestErrorsNameFieldValueAndLimit(t *testing.T) {
	individuals := func(groups []limits.Group) limits.Request {
		return limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: groups}
	}
	good := individuals(singles(5, 7, 4))
	with := func(change func(*limits.Request)) limits.Request { r := good; change(&r); return r }
	xbar := func(groups ...[]float64) limits.Request {
		return limits.Request{Kind: chart.XbarR, SubgroupSize: 3, Groups: subgroups(groups...)}
	}
	excluded := func(reason string, values ...float64) []limits.Group {
		groups := singles(values...)
		for i := range groups {
			groups[i].Excluded, groups[i].ExclusionReason = true, reason
		}
		return groups
	}
	line := func(role chart.Role, set func(*limits.FixedLines)) limits.Request {
		return with(func(r *limits.Request) { set(&r.Fixed[role]) })
	}
	fixed := func(basis chart.Basis, value float64) *chart.Line { return &chart.Line{Basis: basis, Value: value} }
	for _, c := range []struct {
		name  string
		req   limits.Request
		field string
		says  string
	}{
		{"no kind", limits.Request{}, "kind", "individuals, xbar_r, xbar_s, run_means"},
		{"unknown kind", limits.Request{Kind: 99}, "kind", "kind(99)"},
		{"size of individuals", with(func(r *limits.Request) { r.SubgroupSize = 2 }), "subgroupSize", "size 1"},
		{"size of means", limits.Request{Kind: chart.XbarR, SubgroupSize: 1}, "subgroupSize", "2 to 100"},
		{"size above the limit", limits.Request{Kind: chart.XbarS, SubgroupSize: 101}, "subgroupSize", "2 to 100"},
		{"NaN reading", individuals(singles(5, math.NaN(), 4)), "groups[1].readings[0]", "NaN"},
		{"infinite reading", xbar([]float64{1, 2}, []float64{1, math.Inf(-1)}), "groups[1].readings[1]", "-Inf"},
		{"huge reading", individuals(singles(5, 1e300)), "groups[1].readings[0]", "1e+100"},
		{"NaN among the excluded", individuals(append(singles(5, 7), excluded("spilt", math.NaN())...)), "groups[2].readings[0]", "finite"},
		{"no reading", xbar([]float64{1, 2}, nil), "groups[1].readings", "none"},
		{"too many readings", xbar([]float64{1, 2}, []float64{1, 2, 3, 4}), "groups[1].readings", "subgroup size, 3"},
		{"two readings for individuals", individuals(subgroups([]float64{1, 2})), "groups[0].readings", "subgroup size, 1"},
		{"negative decimals", individuals([]limits.Group{{Readings: []float64{1}, Decimals: -2}}), "groups[0].decimals", "-2"},
		{"exclusion without a reason", individuals(append(singles(5, 7), excluded("", 1)...)), "groups[2].exclusionReason", "needs a reason"},
		{"reason without an exclusion", individuals([]limits.Group{{Readings: []float64{1}, ExclusionReason: "spilt"}}), "groups[0].excluded", "drop the reason"},
		{"long reason", individuals(excluded(strings.Repeat("x", limits.ReasonBytesMax+1), 1)), "groups[0].exclusionReason", "2000"},
		{"empty basis", individuals(nil), "groups", "none"},
		{"empty basis, sigma given", with(func(r *limits.Request) { r.Groups, r.Sigma = nil, ptr(1.0) }), "groups", "none"},
		{"empty basis, centre given", with(func(r *limits.Request) { r.Groups, r.Centre = nil, ptr(1.0) }), "groups", "at least 2"},
		{"all excluded", individuals(excluded("spilt", 1, 2, 3)), "groups", "all are excluded"},
		{"one result", individuals(singles(5)), "groups", "at least 2"},
		{"one usable subgroup", xbar([]float64{1, 2}, []float64{1}), "groups", "2 subgroups of 2"},
		{"no neighbours", individuals([]limits.Group{{Readings: []float64{1}}, {Readings: []float64{2}, BreakBefore: true}}), "groups", "no moving range"},
		{"zero spread", individuals(singles(5, 5, 5)), "groups", "zero"},
		{"zero spread within", xbar([]float64{1, 1}, []float64{2, 2}), "groups", "zero"},
		{"zero median", with(func(r *limits.Request) { r.Groups, r.Estimator = singles(5, 5, 5, 9), limits.MedianMovingRange }), "groups", "MEDIAN_MOVING_RANGE"},
		{"estimator of another kind", with(func(r *limits.Request) { r.Estimator = limits.RBar }), "estimator", "individuals"},
		{"unknown estimator", with(func(r *limits.Request) { r.Estimator = 99 }), "estimator", "ESTIMATOR_99"},
		{"estimator beside a given sigma", with(func(r *limits.Request) { r.Estimator, r.Sigma = limits.Overall, ptr(1.0) }), "estimator", "sigma is given"},
		{"negative sigma", with(func(r *limits.Request) { r.Sigma = ptr(-1.0) }), "sigma", "larger than zero"},
		{"zero sigma", with(func(r *limits.Request) { r.Sigma = ptr(0.0) }), "sigma", "larger than zero"},
		{"NaN sigma", with(func(r *limits.Request) { r.Sigma = ptr(math.NaN()) }), "sigma", "finite"},
		{"infinite centre", with(func(r *limits.Request) { r.Centre = ptr(math.Inf(1)) }), "centre", "finite"},
		{"huge centre", with(func(r *limits.Request) { r.Centre = ptr(1e101) }), "centre", "1e+100"},
		{"too many decimals", with(func(r *limits.Request) { r.PublishedDecimals = ptr(16) }), "publishedDecimals", "0 to 15"},
		{"negative published decimals", with(func(r *limits.Request) { r.PublishedDecimals = ptr(-1) }), "publishedDecimals", "0 to 15"},
		{"sigma rounds to zero", with(func(r *limits.Request) { r.Sigma, r.PublishedDecimals = ptr(0.004), ptr(2) }), "publishedDecimals", "rounds to zero"},
		{"sigma rounds to zero at any decimals", with(func(r *limits.Request) { r.Sigma = ptr(1e-17) }), "publishedDecimals", "smaller unit"},
		{"lines vanish beside the centre", with(func(r *limits.Request) { r.Centre, r.Sigma = ptr(1e20), ptr(1.0) }), "publishedDecimals", "vanish"},
		{"lines of means vanish", limits.Request{Kind: chart.XbarR, SubgroupSize: 100, Centre: ptr(5.0), Sigma: ptr(1.0), PublishedDecimals: ptr(0)}, "publishedDecimals", "vanish"},
		{"a warning line falls on the centre", limits.Request{Kind: chart.XbarR, SubgroupSize: 25, Centre: ptr(5.0), Sigma: ptr(1.0), PublishedDecimals: ptr(0)}, "publishedDecimals", "fall on each other"},
		{"one side vanishes above a power of two", with(func(r *limits.Request) { r.Centre, r.Sigma = ptr(0x1p53), ptr(0.3) }), "publishedDecimals", "fall on each other"},
		{"fixed line of another basis", line(chart.Location, func(f *limits.FixedLines) { f.UpperAction = fixed(chart.SigmaMultiple, 9) }), "fixed.location.upperAction", "sigma_multiple"},
		{"NaN line", line(chart.Location, func(f *limits.FixedLines) { f.LowerWarning = fixed(chart.Target, math.NaN()) }), "fixed.location.lowerWarning", "finite"},
		{"line below zero on a dispersion trace", line(chart.Dispersion, func(f *limits.FixedLines) { f.UpperAction = fixed(chart.Target, -1) }), "fixed.dispersion.upperAction", "never below zero"},
		{"line with more decimals than published", with(func(r *limits.Request) {
			r.PublishedDecimals, r.Fixed[chart.Location].UpperAction = ptr(1), fixed(chart.MethodCriterion, 9.25)
		}), "fixed.location.upperAction", "moved by rounding"},
		{"crossing lines", line(chart.Location, func(f *limits.FixedLines) { f.UpperAction = fixed(chart.MethodCriterion, -50) }), "fixed.location.upperAction", "below the upper"},
		{"crossing fixed lines", line(chart.Location, func(f *limits.FixedLines) {
			f.LowerWarning, f.UpperWarning = fixed(chart.Target, 3), fixed(chart.Target, 3)
		}), "fixed.location.lowerWarning", "lower 3, upper 3"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := limits.Compute(c.req)
			var refused *limits.Error
			if !errors.As(err, &refused) {
				t.Fatalf("got %v, want an *Error of field %s", err, c.field)
			}
			if refused.Field != c.field || !strings.Contains(err.Error(), c.says) {
				t.Errorf("got %q of field %q, want field %q and %q", err, refused.Field, c.field, c.says)
			}
		})
	}
}

func TestCountsAreBounded(t *testing.T) {
	groups := make([]limits.Group, limits.GroupsMax+1)
	for i := range groups {
		groups[i] = limits.Group{Readings: []float64{float64(i % 7)}}
	}
	req := limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: groups}
	var refused *limits.Error
	if _, err := limits.Compute(req); !errors.As(err, &refused) || refused.Field != "groups" || refused.Value != "100001" {
		t.Errorf("%d groups: got %v, want an error of field groups", len(groups), err)
	}
	req.Groups = groups[:limits.GroupsMax]
	if res, err := limits.Compute(req); err != nil || res.N != limits.GroupsMax {
		t.Errorf("%d groups: got %d, %v, want all of them", limits.GroupsMax, res.N, err)
	}
	readings := make([]float64, chart.SubgroupSizeMax)
	for i := range readings {
		readings[i] = float64(i % 7)
	}
	for _, n := range []int{limits.ReadingsMax / chart.SubgroupSizeMax, limits.ReadingsMax/chart.SubgroupSizeMax + 1} {
		req := limits.Request{Kind: chart.XbarS, SubgroupSize: chart.SubgroupSizeMax, Groups: groups[:0:0]}
		for range n {
			req.Groups = append(req.Groups, limits.Group{Readings: readings})
		}
		_, err := limits.Compute(req)
		if got, want := err == nil, n*chart.SubgroupSizeMax <= limits.ReadingsMax; got != want {
			t.Errorf("%d readings: got %v, want accepted %v", n*chart.SubgroupSizeMax, err, want)
		}
	}
}
