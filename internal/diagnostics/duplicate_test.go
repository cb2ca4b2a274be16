package diagnostics_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

func requestOfSets(sets [][]float64, o limits.DuplicateOptions) limits.Request {
	req := limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 2, Duplicates: o}
	for _, xs := range sets {
		req.Groups = append(req.Groups, limits.Group{Readings: xs, Decimals: 3})
	}
	return req
}

func examineSets(tb testing.TB, sets [][]float64, o limits.DuplicateOptions) diagnostics.Report {
	tb.Helper()
	return examine(tb, requestOfSets(sets, o))
}

// one draws a basis, lets change have it and examines it.
func (b duplicateBasis) one(tb testing.TB, seed uint64) diagnostics.Report {
	tb.Helper()
	return examine(tb, b.request(rand.New(rand.NewPCG(seed, 31))))
}

const fineUnit = 0.00001

var (
	bandsOfSix = limits.DuplicateOptions{Bands: []float64{0, 6}}
	fitted     = limits.DuplicateOptions{Function: true}
	noOptions  = limits.DuplicateOptions{}
)

// Goal: what was found reads as a sentence that names direction, size and remedy.
func TestDependenceNamesDirectionAndRemedy(t *testing.T) {
	falling := func(mean float64) float64 { return 1 / mean }
	given := func(s0, b float64) limits.DuplicateOptions { return limits.DuplicateOptions{S0: &s0, B: &b} }
	for name, c := range map[string]struct {
		b     duplicateBasis
		wants []string
	}{
		"one sigma, growing": {duplicateBasis{chart.DuplicateRange, 60, pairsOnly, 40, linear, fineUnit, noOptions, nil},
			[]string{"grows with the mean, while the limits take one sigma", "band of concentration", "√(s0² + (b·mean)²)", "relative_range", "too narrow at high ones"}},
		"one sigma, falling": {duplicateBasis{chart.DuplicateRange, 60, pairsOnly, 40, falling, fineUnit, noOptions, nil},
			[]string{"falls as the mean grows", "band", "too narrow at low means"}},
		"relative, constant": {duplicateBasis{chart.RelativeRange, 60, pairsOnly, 40, constantly(0.02), fineUnit, noOptions, nil},
			[]string{"grows more slowly", "plain range", "duplicate_range"}},
		"relative, faster": {duplicateBasis{chart.RelativeRange, 60, pairsOnly, 40, func(m float64) float64 { return 0.001 * m * m }, fineUnit, noOptions, nil},
			[]string{"grows faster", "relative sigma"}},
		"bands too wide": {duplicateBasis{chart.DuplicateRange, 100, pairsOnly, 40, proportional, fineUnit, bandsOfSix, nil},
			[]string{"grows faster", "narrower bands"}},
		"given function": {duplicateBasis{chart.DuplicateRange, 60, pairsOnly, 40, constantly(0.1), fineUnit, given(0.01, 0.02), nil},
			[]string{"grows more slowly", "Fit s0 and b"}},
		"fitted function": {duplicateBasis{chart.DuplicateRange, 400, pairsOnly, 100, func(m float64) float64 { return max(0.3, 0.0015*m*m) }, fineUnit, fitted, nil},
			[]string{"than the fitted function says", "Take bands"}},
	} {
		rep := c.b.one(t, 5)
		x := testNamed(t, rep, diagnostics.CodeSpreadDependsOnMean, diagnostics.StandardisedRanges)
		if x.Outcome != diagnostics.Found {
			t.Errorf("%s: %s, %s", name, x.Outcome, x.Reason)
			continue
		}
		for _, f := range rep.Findings {
			if f.Code != x.Code {
				continue
			}
			t.Logf("%s: %s %s", name, f.Text, f.Advice)
			for _, want := range c.wants {
				if !strings.Contains(f.Text+f.Advice, want) {
					t.Errorf("%s: %s %s: want %q", name, f.Text, f.Advice, want)
				}
			}
		}
	}
}

// Bands with sigmas that are given are compared with each other too: nothing was estimated that could hide them.
func TestGivenBandsAreComparedWithEachOther(t *testing.T) {
	b := duplicateBasis{chart.DuplicateRange, 60, pairsOnly, 40, constantly(0.1), fineUnit, limits.DuplicateOptions{Bands: []float64{0, 6}, Sigmas: []float64{0.04, 0.2}}, nil}
	x := testNamed(t, b.one(t, 6), diagnostics.CodeSpreadDependsOnMean, "")
	if x.Outcome != diagnostics.Found || *x.Statistic > 0 {
		t.Errorf("%s, %v", x.Outcome, *x.Statistic)
	}
}

func TestDuplicatesThatCannotBeTested(t *testing.T) {
	alike := duplicateBasis{chart.RelativeRange, 60, pairsOnly, 1.2, constantly(0.05), fineUnit, noOptions, nil}
	if x := testNamed(t, alike.one(t, 7), diagnostics.CodeSpreadDependsOnMean, ""); x.Outcome != diagnostics.NotEnoughData || !strings.Contains(x.Reason, "factor of 2") {
		t.Errorf("means alike: %s, %s", x.Outcome, x.Reason)
	}
	few := duplicateBasis{chart.DuplicateRange, 9, pairsOnly, 9, constantly(0.05), fineUnit, noOptions, nil}
	rep := few.one(t, 7)
	for _, code := range []string{diagnostics.CodeSpreadDependsOnMean, diagnostics.CodeOutlyingSet, diagnostics.CodeTooFewLargeRanges, diagnostics.CodeTooManyZeroRanges} {
		if x := testNamed(t, rep, code, ""); x.Outcome != diagnostics.NotEnoughData {
			t.Errorf("nine sets: %s %s", code, x.Outcome)
		}
	}
	few.n = 30
	req := few.request(rand.New(rand.NewPCG(1, 2)))
	none := diagnostics.Examine(req, limits.Result{}, diagnostics.Times{})
	if x := testNamed(t, none, diagnostics.CodeSpreadDependsOnMean, ""); x.Outcome != diagnostics.NotEnoughData || none.Values != nil || none.Extent.Groups != 30 {
		t.Errorf("no limits: %s, picture %v", x.Outcome, none.Values)
	}
	if x := testNamed(t, none, diagnostics.CodeDoubledPosts, diagnostics.SetsOfDuplicates); x.Outcome != diagnostics.NothingFound {
		t.Errorf("no limits: equal neighbours %s", x.Outcome)
	}
	sigma := 0.1
	req = requestOfSets(nil, noOptions)
	req.Sigma = &sigma
	for i := range 20 {
		req.Groups = append(req.Groups, limits.Group{Readings: []float64{float64(i) / 10, float64(i) / 10}})
	}
	if x := testNamed(t, examine(t, req), diagnostics.CodeSpreadDependsOnMean, ""); x.Outcome != diagnostics.Void {
		t.Errorf("equal readings: %s", x.Outcome)
	}
	for i := range req.Groups {
		req.Groups[i].Excluded = true
	}
	if rep := diagnostics.Examine(req, limits.Result{}, diagnostics.Times{}); rep.Extent.Groups != 0 || rep.Values != nil || rep.JointRate != 0 {
		t.Errorf("all excluded: %+v", rep)
	}
}

// An outlying set is named by its place in the basis, exclusions counted.
func TestOutlyingSetIsNamed(t *testing.T) {
	b := duplicateBasis{chart.DuplicateRange, 40, pairsOnly, 9, constantly(0.1), fineUnit, noOptions, func(_ *rand.Rand, sets [][]float64) { sets[16][1] = sets[16][0] + 0.9 }}
	req := b.request(rand.New(rand.NewPCG(8, 1)))
	req.Groups[3].Excluded, req.Groups[3].ExclusionReason = true, "spilt"
	rep := examine(t, req)
	if f := rep.Findings; len(f) != 1 || f[0].Code != diagnostics.CodeOutlyingSet || !strings.HasPrefix(f[0].Text, "Set 17 of the basis") {
		t.Errorf("%+v", f)
	}
}

// The picture of pairs has the ranges in units of √2·sigma, against half-normal quantiles.
func TestPictureOfDuplicates(t *testing.T) {
	sigma := 2.
	req := requestOfSets([][]float64{{1, 5}, {3, 2}, {7, 7}}, noOptions)
	req.Sigma = &sigma
	p := examine(t, req).Values
	if p.Subject != diagnostics.StandardisedRanges || len(p.NormalPlot) != 3 {
		t.Fatalf("%+v", p)
	}
	for i, difference := range []float64{0, 1, 4} {
		position := (float64(i+1) - 0.375) / 3.25
		got := p.NormalPlot[i]
		if math.Abs(got.Value-difference/(2*math.Sqrt2)) > 1e-12 || math.Abs(math.Erf(got.Quantile/math.Sqrt2)-position) > 1e-12 {
			t.Errorf("point %d: %+v", i, got)
		}
	}
	total := 0
	for _, k := range p.Histogram.Counts {
		total += k
	}
	if total != 3 {
		t.Errorf("%d in the histogram", total)
	}
}

// Coarse rounding comes first, with zeros told beside those expected, and voids what does not keep its level; the rank
// correlation with one sigma keeps it, for the ranges stay exchangeable.
func TestCoarseDuplicates(t *testing.T) {
	b := duplicateBasis{chart.DuplicateRange, 60, pairsOnly, 40, constantly(0.1), 0.1, noOptions, nil}
	rep := b.one(t, 9)
	if rep.Tests[0].Code != diagnostics.CodeRoundingCoarse || rep.Tests[0].Outcome != diagnostics.Found || rep.Step != 0.1 {
		t.Fatalf("%+v, step %v", rep.Tests[0], rep.Step)
	}
	if text := rep.Findings[0].Text; !strings.Contains(text, "ranges are zero, where such steps make 1") {
		t.Error(text)
	}
	wants := map[string]diagnostics.Outcome{diagnostics.CodeOutlyingSet: diagnostics.Void, diagnostics.CodeTooFewLargeRanges: diagnostics.Void, diagnostics.CodeSpreadDependsOnMean: diagnostics.NothingFound, diagnostics.CodeTooManyZeroRanges: diagnostics.NothingFound}
	for code, want := range wants {
		if x := testNamed(t, rep, code, ""); x.Outcome != want {
			t.Errorf("%s: %s, want %s", code, x.Outcome, want)
		}
	}
	b.kind, b.sigma = chart.RelativeRange, proportional // coarse at low means only
	if x := testNamed(t, b.one(t, 9), diagnostics.CodeSpreadDependsOnMean, ""); x.Outcome != diagnostics.Void {
		t.Errorf("relative: %s", x.Outcome)
	}
}

func TestRunsAndDaysOfDuplicates(t *testing.T) {
	req := duplicateBasis{chart.DuplicateRange, 30, pairsOnly, 9, constantly(0.1), fineUnit, noOptions, nil}.requestSeeded(10)
	var about diagnostics.Times
	for i := range req.Groups {
		about.Days, about.Runs = append(about.Days, fmt.Sprint(i/10)), append(about.Runs, fmt.Sprint(i))
	}
	rep := diagnostics.Examine(req, limits.Result{}, about)
	if *rep.Extent.Days != 3 || testNamed(t, rep, diagnostics.CodeTooFewDays, "").Outcome != diagnostics.Found || testNamed(t, rep, diagnostics.CodeTooFewRuns, "").Outcome != diagnostics.NothingFound {
		t.Errorf("%d days, %+v", *rep.Extent.Days, rep.Findings)
	}
}

func (b duplicateBasis) requestSeeded(seed uint64) limits.Request {
	return b.request(rand.New(rand.NewPCG(seed, 31)))
}

// A basis of the greatest size is quick, whatever the sizes of its sets.
func TestGreatestBasisOfDuplicates(t *testing.T) {
	b := duplicateBasis{chart.DuplicateRange, limits.GroupsMax / 5, twoToFive, 40, constantly(0.1), fineUnit, noOptions, nil}
	rep := b.one(t, 12)
	for _, x := range rep.Tests {
		if x.Level > 0 && x.Outcome != diagnostics.NothingFound {
			t.Errorf("%s: %s, %s", x.Name, x.Outcome, x.Reason)
		}
	}
	if len(rep.Values.NormalPlot) != diagnostics.NormalPointsMax {
		t.Errorf("%d points", len(rep.Values.NormalPlot))
	}
}
