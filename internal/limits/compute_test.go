package limits_test

import (
	"fmt"
	"math"
	"reflect"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// singles makes a basis of individual values.
func singles(values ...float64) []limits.Group {
	groups := make([]limits.Group, len(values))
	for i, x := range values {
		groups[i] = limits.Group{Readings: []float64{x}, Decimals: limits.DecimalsUnknown}
	}
	return groups
}

func subgroups(readings ...[]float64) []limits.Group {
	groups := make([]limits.Group, len(readings))
	for i, r := range readings {
		groups[i] = limits.Group{Readings: r, Decimals: limits.DecimalsUnknown}
	}
	return groups
}

func mustCompute(t testing.TB, req limits.Request) limits.Result {
	t.Helper()
	res, err := limits.Compute(req)
	if err != nil {
		t.Fatal(err)
	}
	return res
}

func near(got, want, relative float64) bool { return math.Abs(got-want) <= relative*math.Abs(want) }

// Worked by hand: the moving ranges of 5, 7, 4 are 2, 3; the mean is 16/3; sigma is 2.5·√π/2 = 2.2155673.
func TestIndividualsByHand(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: singles(5, 7, 4), PublishedDecimals: ptr(3)})
	line := func(value float64) chart.Line { return chart.Line{Value: value, Basis: chart.SigmaMultiple} }
	got, want := res.Location, chart.Trace{
		Centre: ptr(5.333), Sigma: ptr(2.216),
		LowerAction: line(-1.315), UpperAction: line(11.981), LowerWarning: line(0.901), UpperWarning: line(9.765),
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("location: got %s, want %s", show(got), show(want))
	}
	// 2/√π·2.216 = 2.500461, √(2-4/π)·2.216 = 1.889145; 2.500 + 3·1.889145 = 8.167435.
	got, want = res.Dispersion, chart.Trace{
		Centre: ptr(2.5), Sigma: res.Dispersion.Sigma,
		LowerAction: chart.Line{Basis: chart.Absent}, UpperAction: line(8.167), LowerWarning: chart.Line{Basis: chart.Absent}, UpperWarning: line(6.278),
	}
	if !reflect.DeepEqual(got, want) || !near(*got.Sigma, 1.889145, 1e-6) {
		t.Errorf("dispersion: got %s, want %s", show(got), show(want))
	}
	if res.ProcessSigma != 2.216 || !near(res.SigmaUnrounded, 2.2155673136319, 1e-12) || res.MovingRanges != 2 || res.N != 3 || res.Readings != 3 {
		t.Errorf("got sigma %g (%.14g), %d moving ranges of %d results, %d readings", res.ProcessSigma, res.SigmaUnrounded, res.MovingRanges, res.N, res.Readings)
	}
}

func show(t chart.Trace) string {
	return fmt.Sprintf("%g ± %g, %v %v %v %v", *t.Centre, *t.Sigma, t.LowerAction, t.LowerWarning, t.UpperWarning, t.UpperAction)
}

func TestMovingRangesBridgeNothing(t *testing.T) {
	// Values 1, 3, 8, 8.5: moving ranges 2, 5, 0.5 if nothing lies between.
	for _, c := range []struct {
		name   string
		change func(g []limits.Group)
		ranges int
		mean   float64
	}{
		{"unbroken", func([]limits.Group) {}, 3, 2.5},
		{"a break", func(g []limits.Group) { g[2].BreakBefore = true }, 2, 1.25},
		{"a break before the first", func(g []limits.Group) { g[0].BreakBefore = true }, 3, 2.5},
		{"an exclusion takes both its ranges and makes none", func(g []limits.Group) { g[1].Excluded, g[1].ExclusionReason = true, "pump failed" }, 1, 0.5},
		{"an excluded last", func(g []limits.Group) { g[3].Excluded, g[3].ExclusionReason = true, "pump failed" }, 2, 3.5},
	} {
		t.Run(c.name, func(t *testing.T) {
			groups := singles(1, 3, 8, 8.5)
			c.change(groups)
			res := mustCompute(t, limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: groups})
			if got := res.SigmaUnrounded * 2 / math.Sqrt(math.Pi); res.MovingRanges != c.ranges || !near(got, c.mean, 1e-14) {
				t.Errorf("got mean %g of %d moving ranges, want %g of %d", got, res.MovingRanges, c.mean, c.ranges)
			}
		})
	}
}

func TestExclusionsAreListedAndLeftOut(t *testing.T) {
	groups := singles(5, 7, 400, 4, 6)
	groups[2].Excluded, groups[2].ExclusionReason = true, "wrong standard opened"
	res := mustCompute(t, limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: groups})
	if want := []limits.Exclusion{{2, "wrong standard opened"}}; !reflect.DeepEqual(res.Excluded, want) || res.N != 4 || res.CentreUnrounded != 5.5 {
		t.Errorf("got %v, %d used, centre %g, want %v, 4, 5.5", res.Excluded, res.N, res.CentreUnrounded, want)
	}
}

// Lower lines exist where the factor is positive: D3 from n = 7, B3 from n = 6, and d2 - 2·d3 from n = 4, c4 - 2·√(1-c4²)
// from n = 4 (computed factors).
func TestImpossibleLowerLinesAreAbsent(t *testing.T) {
	for _, c := range []struct {
		kind                chart.Kind
		action, warningFrom int
	}{{chart.XbarR, 7, 4}, {chart.XbarS, 6, 4}} {
		for n := 2; n <= 12; n++ {
			res := mustCompute(t, limits.Request{Kind: c.kind, SubgroupSize: n, Centre: ptr(0.0), Sigma: ptr(1.0), PublishedDecimals: ptr(6)})
			d := res.Dispersion
			if got, want := d.LowerAction.Basis != chart.Absent, n >= c.action; got != want {
				t.Errorf("%s of %d: lower action line present: got %v, want %v", c.kind, n, got, want)
			}
			if got, want := d.LowerWarning.Basis != chart.Absent, n >= c.warningFrom; got != want {
				t.Errorf("%s of %d: lower warning line present: got %v, want %v", c.kind, n, got, want)
			}
			if d.LowerAction.Basis == chart.Absent && d.LowerAction.Value != 0 || d.LowerAction.Basis != chart.Absent && d.LowerAction.Value <= 0 {
				t.Errorf("%s of %d: lower action line %+v", c.kind, n, d.LowerAction)
			}
		}
	}
}

func TestPublishedDecimals(t *testing.T) {
	target := func(centre, sigma float64) limits.Request {
		return limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Centre: &centre, Sigma: &sigma}
	}
	with := func(req limits.Request, groups []limits.Group) limits.Request { req.Groups = groups; return req }
	for _, c := range []struct {
		name string
		req  limits.Request
		want int
	}{
		{"two more than the results", limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: singles(5.25, 700.1, 4)}, 4},
		{"decimals as written count", limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: []limits.Group{{Readings: []float64{500}, Decimals: 3}, {Readings: []float64{10}, Decimals: 0}}}, 5},
		{"four digits of sigma", with(target(1, 0.0123), singles(1)), 5},
		{"a power of ten has four digits as well", target(0, 0.001), 6},
		{"just below a power of ten", target(0, 0.0009999), 7},
		{"large sigma, whole results", target(5000, 1234), 2},
		{"a target keeps its decimals", target(0.123456, 12), 6},
		{"bounded", target(0, 1e-14), decimal.PlacesMax},
		{"an excluded group does not count", limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: append(singles(500, 10, 700), limits.Group{Readings: []float64{0.12345}, Decimals: 5, Excluded: true, ExclusionReason: "other unit"})}, 2},
	} {
		t.Run(c.name, func(t *testing.T) {
			if got := mustCompute(t, c.req).PublishedDecimals; got != c.want {
				t.Errorf("got %d, want %d", got, c.want)
			}
		})
	}
}

func TestEverythingFollowsFromTheRoundedFigures(t *testing.T) {
	for _, kind := range []chart.Kind{chart.XbarR, chart.XbarS} {
		const places = 2
		res := mustCompute(t, limits.Request{Kind: kind, SubgroupSize: 3, Groups: subgroups([]float64{1, 2, 4}, []float64{2, 2, 3}, []float64{0, 5, 1}), PublishedDecimals: ptr(places)})
		scale, _ := limits.At(kind, res.ProcessSigma, 3)
		if res.ProcessSigma != decimal.Round(res.SigmaUnrounded, places) || *res.Location.Sigma != scale.LocationSigma || *res.Dispersion.Sigma != scale.DispersionSigma {
			t.Errorf("%s: got sigmas %g, %g, %g, want those of the rounded process sigma, %+v", kind, res.ProcessSigma, *res.Location.Sigma, *res.Dispersion.Sigma, scale)
		}
		for _, trace := range []chart.Trace{res.Location, res.Dispersion} {
			if got, want := trace.UpperAction.Value, decimal.Line(*trace.Centre, 3, *trace.Sigma, places); got != want {
				t.Errorf("%s: upper action line %g, want %g from its own centre and sigma", kind, got, want)
			}
			if got, want := trace.UpperWarning.Value, decimal.Line(*trace.Centre, 2, *trace.Sigma, places); got != want {
				t.Errorf("%s: upper warning line %g, want %g", kind, got, want)
			}
		}
	}
}

func TestOrigins(t *testing.T) {
	base := limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: singles(5, 7, 4, 6)}
	for _, c := range []struct {
		name              string
		centre, sigma     *float64
		whole, ofC, ofS   limits.Origin
		chosen            bool
		intervalC, intevS bool
	}{
		{"estimated", nil, nil, limits.Estimated, limits.Estimated, limits.Estimated, true, true, true},
		{"centre given", ptr(5.0), nil, limits.Mixed, limits.Target, limits.Estimated, true, false, true},
		{"sigma given", nil, ptr(1.5), limits.Mixed, limits.Estimated, limits.Target, false, true, false},
		{"both given", ptr(5.0), ptr(1.5), limits.Target, limits.Target, limits.Target, false, false, false},
	} {
		t.Run(c.name, func(t *testing.T) {
			req := base
			req.Centre, req.Sigma = c.centre, c.sigma
			res := mustCompute(t, req)
			if res.Origin != c.whole || res.CentreOrigin != c.ofC || res.SigmaOrigin != c.ofS {
				t.Errorf("got %s, centre %s, sigma %s, want %s, %s, %s", res.Origin, res.CentreOrigin, res.SigmaOrigin, c.whole, c.ofC, c.ofS)
			}
			if got := estimate(t, res, limits.MeanMovingRange).Chosen; got != c.chosen || len(res.Estimates) != 3 {
				t.Errorf("chosen: got %v of %d estimates, want %v of 3", got, len(res.Estimates), c.chosen)
			}
			if (res.Intervals.Centre != nil) != c.intervalC || (res.Intervals.Sigma != nil) != c.intevS {
				t.Errorf("got intervals %+v", res.Intervals)
			}
			if (res.Intervals.UpperAction[chart.Location] != nil) != (c.intervalC || c.intevS) {
				t.Errorf("got interval of the upper line %v", res.Intervals.UpperAction[chart.Location])
			}
			if got, want := res.Provisional, c.whole != limits.Target; got != want {
				t.Errorf("provisional: got %v, want %v", got, want)
			}
		})
	}
}

func TestTargetNeedsNoResults(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.XbarR, SubgroupSize: 4, Centre: ptr(50.0), Sigma: ptr(2.0)})
	if *res.Location.Centre != 50 || res.Location.UpperAction.Value != 53 || res.Location.LowerAction.Value != 47 || len(res.Estimates) != 0 || res.N != 0 || res.Provisional || len(res.Findings) != 0 {
		t.Errorf("got %+v, want 47, 50, 53 and nothing estimated", res)
	}
}

func TestFixedLinesMoveOnlyThemselves(t *testing.T) {
	req := limits.Request{Kind: chart.XbarR, SubgroupSize: 2, Groups: subgroups([]float64{1, 2}, []float64{2, 4}, []float64{3, 3.5}), PublishedDecimals: ptr(4)}
	plain := mustCompute(t, req)
	req.Fixed[chart.Location] = limits.FixedLines{
		UpperAction:  &chart.Line{Value: 3.9, Basis: chart.MethodCriterion},
		LowerAction:  &chart.Line{Value: 7, Basis: chart.Absent},
		LowerWarning: &chart.Line{Basis: chart.Absent},
	}
	req.Fixed[chart.Dispersion].UpperAction = &chart.Line{Value: 9.25, Basis: chart.Target}
	got := mustCompute(t, req)
	want := plain
	want.Location.UpperAction = chart.Line{Value: 3.9, Basis: chart.MethodCriterion}
	want.Location.LowerAction, want.Location.LowerWarning = chart.Line{Basis: chart.Absent}, chart.Line{Basis: chart.Absent}
	want.Dispersion.UpperAction = chart.Line{Value: 9.25, Basis: chart.Target}
	if !reflect.DeepEqual(got.Location, want.Location) || !reflect.DeepEqual(got.Dispersion, want.Dispersion) {
		t.Errorf("got %s and %s, want %s and %s", show(got.Location), show(got.Dispersion), show(want.Location), show(want.Dispersion))
	}
	if got.ProcessSigma != plain.ProcessSigma || got.Intervals.UpperAction[chart.Location] != nil || got.Intervals.LowerAction[chart.Location] != nil {
		t.Errorf("got sigma %g and intervals %+v, want %g and none for fixed lines", got.ProcessSigma, got.Intervals, plain.ProcessSigma)
	}
	if got := mustComputeDefault(t, req).PublishedDecimals; got < 2 {
		t.Errorf("published decimals: got %d, want at least the criterion's 2", got)
	}
}

func mustComputeDefault(t *testing.T, req limits.Request) limits.Result {
	req.PublishedDecimals = nil
	return mustCompute(t, req)
}

// A subgroup of one reading tells about the centre and, without a range, nothing about sigma.
func TestSingleReadingsCountForTheCentreOnly(t *testing.T) {
	two := subgroups([]float64{1, 2, 3}, []float64{2, 4, 6})
	req := limits.Request{Kind: chart.XbarR, SubgroupSize: 3, Groups: two}
	without := mustCompute(t, req)
	req.Groups = append(two, subgroups([]float64{10})...)
	with := mustCompute(t, req)
	if with.SigmaUnrounded != without.SigmaUnrounded || with.CentreUnrounded != 4 || with.N != 3 || with.Dispersions != 2 {
		t.Errorf("got sigma %g, centre %g, %d groups, %d ranges, want %g, 4, 3, 2", with.SigmaUnrounded, with.CentreUnrounded, with.N, with.Dispersions, without.SigmaUnrounded)
	}
}

func TestFindings(t *testing.T) {
	many := make([]float64, 60)
	for i := range many {
		many[i] = 10 + float64(i*7%11)/10
	}
	has := func(res limits.Result) map[string]bool {
		codes := map[string]bool{}
		for _, f := range res.Findings {
			codes[f.Code] = true
			if f.Text == "" || f.Advice == "" || f.CouldMiss == "" {
				t.Errorf("%s: has an empty sentence: %+v", f.Code, f)
			}
		}
		return codes
	}
	base := limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: singles(many...)}
	plain := mustCompute(t, base)
	for _, c := range []struct {
		name, code string
		change     func(*limits.Request)
		want       bool
	}{
		{"24 results are provisional", limits.CodeProvisional, func(r *limits.Request) { r.Groups = r.Groups[:24] }, true},
		{"25 are not", limits.CodeProvisional, func(r *limits.Request) { r.Groups = r.Groups[:25] }, false},
		{"target centre far off", limits.CodeTargetCentreDiffers, func(r *limits.Request) { r.Centre = ptr(13.0) }, true},
		{"target centre near", limits.CodeTargetCentreDiffers, func(r *limits.Request) { r.Centre = ptr(10.5) }, false},
		{"target sigma far off", limits.CodeTargetSigmaDiffers, func(r *limits.Request) { r.Sigma = ptr(0.05) }, true},
		{"target sigma near", limits.CodeTargetSigmaDiffers, func(r *limits.Request) { r.Sigma = ptr(plain.ProcessSigma) }, false},
		{"criterion inside", limits.CodeCriterionInsideLimit, func(r *limits.Request) {
			r.Fixed[chart.Location].UpperAction = &chart.Line{Value: 10.6, Basis: chart.MethodCriterion}
		}, true},
		{"criterion outside", limits.CodeCriterionInsideLimit, func(r *limits.Request) {
			r.Fixed[chart.Location].LowerAction = &chart.Line{Value: 1, Basis: chart.MethodCriterion}
		}, false},
	} {
		t.Run(c.name, func(t *testing.T) {
			req := base
			c.change(&req)
			if got := has(mustCompute(t, req))[c.code]; got != c.want {
				t.Errorf("%s: got %v, want %v", c.code, got, c.want)
			}
		})
	}
	t.Run("19 subgroups are provisional, 20 are not", func(t *testing.T) {
		groups := make([][]float64, 20)
		for i := range groups {
			groups[i] = []float64{many[i], many[i+20]}
		}
		for _, n := range []int{19, 20} {
			res := mustCompute(t, limits.Request{Kind: chart.XbarS, SubgroupSize: 2, Groups: subgroups(groups[:n]...)})
			if got, want := res.Provisional, n < 20; got != want || has(res)[limits.CodeProvisional] != want || res.AdvisedMinimum != 20 {
				t.Errorf("%d subgroups: got provisional %v of %d, want %v", n, got, res.AdvisedMinimum, want)
			}
		}
	})
}

func TestEstimatorNames(t *testing.T) {
	for _, kind := range kindsOfReadings {
		if limits.EstimatorsOf(kind) == nil {
			t.Errorf("%s: got no estimators", kind)
		}
		for _, e := range limits.EstimatorsOf(kind) {
			if got, err := limits.ParseEstimator(e.String()); err != nil || got != e {
				t.Errorf("%s: got %v, %v back", e, got, err)
			}
		}
	}
	if got, err := limits.ParseEstimator("R_BAR"); err == nil {
		t.Errorf("R_BAR: got %v, want an error", got)
	}
	if got := limits.Estimator(99).String(); got != "ESTIMATOR_99" {
		t.Errorf("got %s", got)
	}
	if got := limits.EstimatorsOf(chart.Given); got != nil {
		t.Errorf("given: got %v, want none", got)
	}
}
