package diagnostics_test

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// nasty are readings that break careless arithmetic.
func nasty() map[string][]float64 {
	repeat := func(n int, xs ...float64) (out []float64) {
		for i := range n {
			out = append(out, xs[i%len(xs)])
		}
		return out
	}
	big := repeat(40, 1e100, -1e100, 3e99)
	return map[string][]float64{
		"none": nil, "one": {5}, "two": {5, 6}, "three": {1, 1, 2}, "equal": repeat(60, 0.3), "zeros": repeat(60, 0, math.Copysign(0, -1)),
		"two values": repeat(60, 1, 2), "one outlier": append(repeat(59, 7), 8), "huge outlier": append(repeat(59, 7, 7.1), 1e100),
		"huge": big, "denormal": repeat(40, 5e-324, 1e-323, 0), "tiny": repeat(40, 1e-300, 2e-300, 5e-300),
		"mixed": repeat(40, 1e100, 1, 1e-300), "far from zero": repeat(40, 1e15+1, 1e15+2, 1e15+4), "long digits": repeat(40, 0.1234567890123456, 0.2234567890123457),
		"not a number": append(repeat(30, 1, 2, 4), math.NaN(), math.Inf(1), math.Inf(-1), math.MaxFloat64),
	}
}

func groupsOf(xs []float64, size int) (groups []limits.Group) {
	for i := 0; i < len(xs); i += size {
		groups = append(groups, limits.Group{Readings: xs[i:min(i+size, len(xs))], Decimals: limits.DecimalsUnknown})
	}
	return groups
}

// Goal: whatever comes, with limits or without, every figure is finite, which JSON insists on, and findings and tests
// agree with each other.
func TestNoInputGivesAFigureThatIsNotFinite(t *testing.T) {
	for name, xs := range nasty() {
		for kind, size := range map[chart.Kind]int{chart.Individuals: 1, chart.XbarR: 2, chart.XbarS: 5, chart.RunMeans: 3, chart.DuplicateRange: 2, chart.Given: 1, chart.P: 1} {
			for _, transform := range []chart.TransformKind{chart.Identity, chart.Log, chart.SquareRoot} {
				req := limits.Request{Kind: kind, SubgroupSize: size, Groups: groupsOf(xs, size), Transform: chart.Transform{Kind: transform}}
				res, err := limits.Compute(req)
				if err != nil {
					res = limits.Result{}
				}
				rep := diagnostics.Examine(req, res, diagnostics.Times{})
				if _, err := json.Marshal(rep); err != nil {
					t.Errorf("%s, %s, %s: %v in %+v", name, kind, transform, err, rep.Tests)
				}
				req.Kind = chart.Individuals // groups of several readings, which no such chart has
				diagnostics.Examine(req, res, diagnostics.Times{})
				checkAgreement(t, fmt.Sprintf("%s, %s, %s", name, kind, transform), rep)
			}
		}
	}
}

func checkAgreement(t *testing.T, name string, rep diagnostics.Report) {
	t.Helper()
	found := 0
	for _, x := range rep.Tests {
		made := x.Outcome == diagnostics.Found || x.Outcome == diagnostics.NothingFound
		if x.Outcome == diagnostics.Found {
			if f := rep.Findings[found]; f.Code != x.Code || f.Text == "" || f.Advice == "" || f.CouldMiss == "" {
				t.Errorf("%s: finding %+v for test %+v", name, f, x)
			}
			found++
		}
		if made != (x.Statistic != nil) || made != (x.PValue != nil || x.Critical != nil) || !made && x.Reason == "" || x.CouldMiss == "" {
			t.Errorf("%s: %+v", name, x)
		}
		if x.PValue != nil && !(*x.PValue >= 0 && *x.PValue <= 1) {
			t.Errorf("%s: p = %v", name, *x.PValue)
		}
	}
	if found != len(rep.Findings) {
		t.Errorf("%s: %d tests found something, %d findings", name, found, len(rep.Findings))
	}
	if rep.JointRate > rep.JointBound || rep.JointBound > 0.2 {
		t.Errorf("%s: joint rate %v, bound %v", name, rep.JointRate, rep.JointBound)
	}
}

// Goal: figures depend on the shape of the data only. The steps are short decimals in either unit.
func TestShiftAndScaleChangeNothing(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 4))
	for _, d := range []design{{chart.Individuals, 60, 1}, {chart.XbarR, 30, 4}} {
		xs := clean(r, d)
		want := examine(t, requestOf(d, xs, fineStep))
		req := requestOf(d, xs, fineStep)
		for i := range req.Groups {
			for j, x := range req.Groups[i].Readings {
				req.Groups[i].Readings[j] = math.Round((0.5*x-1024)*1e7) / 1e7
			}
		}
		got := examine(t, req)
		for i, w := range want.Tests {
			g := got.Tests[i]
			if w.Outcome != g.Outcome || w.Statistic != nil && math.Abs(*w.Statistic-*g.Statistic) > 1e-9*(1+math.Abs(*w.Statistic)) {
				t.Errorf("%s, %s: %s became %s", d, w.Name, w.Outcome, g.Outcome)
			}
			if w.PValue != nil && math.Abs(*w.PValue-*g.PValue) > 1e-9 {
				t.Errorf("%s, %s: p %v became %v", d, w.Name, *w.PValue, *g.PValue)
			}
		}
	}
}

// A chart on a logarithmic scale is examined on it: lognormal readings look normal, and like their logarithms.
func TestTransformedReadingsAreExaminedTransformed(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 9))
	log, plain := limits.Request{Kind: chart.Individuals, Transform: chart.Transform{Kind: chart.Log}}, limits.Request{Kind: chart.Individuals}
	for range 80 {
		x := math.Round(1e6*math.Exp(r.NormFloat64())) / 1e6
		log.Groups = append(log.Groups, limits.Group{Readings: []float64{x}})
		plain.Groups = append(plain.Groups, limits.Group{Readings: []float64{math.Log(x)}})
	}
	a := testNamed(t, diagnostics.Examine(log, limits.Result{}, diagnostics.Times{}), diagnostics.CodeNotNormal, "")
	b := testNamed(t, diagnostics.Examine(plain, limits.Result{}, diagnostics.Times{}), diagnostics.CodeNotNormal, "")
	if math.Abs(*a.Statistic-*b.Statistic) > 1e-9 || a.Outcome != diagnostics.NothingFound {
		t.Errorf("%v on the scale, %v of logarithms, %s", *a.Statistic, *b.Statistic, a.Outcome)
	}
	log.Transform = chart.Transform{}
	if raw := testNamed(t, diagnostics.Examine(log, limits.Result{}, diagnostics.Times{}), diagnostics.CodeNotNormal, ""); raw.Outcome != diagnostics.Found {
		t.Errorf("as they are: %s", raw.Outcome)
	}
}

// Readings of two materials, each at its own level, are one sample once standardised.
func TestStandardisedTracksAreExaminedStandardised(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 19))
	req := limits.Request{Kind: chart.Individuals, Levels: []chart.Level{{Material: "low", Reference: 2, Sigma: 0.1}, {Material: "high", Reference: 50, Sigma: 2}}}
	for i := range 80 {
		level := req.Levels[i%2]
		x := math.Round(1e5*(level.Reference+level.Sigma*r.NormFloat64())) / 1e5
		req.Groups = append(req.Groups, limits.Group{Readings: []float64{x}, Material: level.Material})
	}
	for _, f := range diagnostics.Examine(req, limits.Result{}, diagnostics.Times{}).Findings {
		t.Errorf("%s: %s", f.Code, f.Text)
	}
	req.Levels = nil
	if rep := diagnostics.Examine(req, limits.Result{}, diagnostics.Times{}); testNamed(t, rep, diagnostics.CodeTwoGroups, "").Outcome != diagnostics.Found {
		t.Error("two levels without their references are not two groups")
	}
}

func TestRunsAndDays(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 2))
	d := design{chart.Individuals, 40, 1}
	req := requestOf(d, clean(r, d), fineStep)
	var about diagnostics.Times
	for i := range 40 {
		about.Days = append(about.Days, fmt.Sprint("day ", i/10))
		about.Runs = append(about.Runs, fmt.Sprint("run ", i/2))
	}
	rep := diagnostics.Examine(req, limits.Result{}, about)
	days, runs := testNamed(t, rep, diagnostics.CodeTooFewDays, ""), testNamed(t, rep, diagnostics.CodeTooFewRuns, "")
	if days.Outcome != diagnostics.Found || *rep.Extent.Days != 4 || runs.Outcome != diagnostics.NothingFound || *rep.Extent.Runs != 20 {
		t.Errorf("%d days %s, %d runs %s", *rep.Extent.Days, days.Outcome, *rep.Extent.Runs, runs.Outcome)
	}
	about.Days[7] = ""
	about.Runs = about.Runs[:39]
	rep = diagnostics.Examine(req, limits.Result{}, about)
	if rep.Extent.Days != nil || rep.Extent.Runs != nil || testNamed(t, rep, diagnostics.CodeTooFewDays, "").Outcome != diagnostics.NotEnoughData {
		t.Error("a day or run that is not known is counted")
	}
	req.Groups[7].Excluded, req.Groups[39].Excluded = true, true
	rep = diagnostics.Examine(req, limits.Result{}, about)
	if rep.Extent.Days == nil || rep.Extent.Runs == nil || rep.Extent.Groups != 38 {
		t.Error("an excluded group's day or run is asked for")
	}
}

// The step is told even where trailing zeros hide it, and tests of shape are void, not silent.
func TestCoarseRoundingIsToldAndVoidsTestsOfShape(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 7))
	d := design{chart.Individuals, 60, 1}
	req := requestOf(d, clean(r, d), 1)
	for i := range req.Groups {
		req.Groups[i].Decimals = 2
	}
	rep := examine(t, req)
	first := rep.Tests[0]
	if first.Code != diagnostics.CodeRoundingCoarse || first.Outcome != diagnostics.Found || rep.Step != 2 || rep.Tied < 0.9 {
		t.Fatalf("%+v, step %v, tied %v", first, rep.Step, rep.Tied)
	}
	if text := rep.Findings[0].Text; !strings.Contains(text, "written to 2 decimals") {
		t.Error(text)
	}
	for _, code := range []string{diagnostics.CodeNotNormal, diagnostics.CodeSkewed, diagnostics.CodeTwoGroups, diagnostics.CodeTooFewBeyondTwoSigma} {
		if x := testNamed(t, rep, code, ""); x.Outcome != diagnostics.Void || !strings.Contains(x.Reason, "rounding step") {
			t.Errorf("%s: %s, %q", code, x.Outcome, x.Reason)
		}
	}
}

// drawCounts draws clean fractions, with 5 to 15 expected nonconforming items a sample.
func drawCounts(r *rand.Rand, n int, copies bool) limits.Request {
	req := limits.Request{Kind: chart.P, SubgroupSize: 1}
	for i := range n {
		c := chart.Count{Inspected: 100}
		for range 100 {
			if r.IntN(10) == 0 {
				c.Nonconforming++
			}
		}
		if copies && i%2 == 1 {
			c = *req.Groups[i-1].Count
		}
		req.Groups = append(req.Groups, limits.Group{Count: &c})
	}
	return req
}

// Goal: the stated joint rates, simulated with other seeds, and counts, which have no readings.
func TestJointRate(t *testing.T) {
	t.Parallel()
	check := func(name string, y *tally, stated float64) {
		rate := float64(y.any) / float64(y.runs)
		t.Logf("%s: at least one finding in %.4f of %d, stated %.3f", name, rate, y.runs, stated)
		if rate > stated+fourErrors(stated, y.runs) || rate < 0.7*stated-fourErrors(stated, y.runs) {
			t.Errorf("%s: at least one finding in %.4f of %d, stated %.3f", name, rate, y.runs, stated)
		}
	}
	check("individuals", simulate(t, design{chart.Individuals, 40, 1}, clean, fineStep, 2000, 71), diagnostics.JointRateIndividuals)
	check("subgroups", simulate(t, design{chart.XbarS, 30, 4}, clean, fineStep, 1500, 72), diagnostics.JointRateSubgroups)
	r, y := rand.New(rand.NewPCG(73, 1)), newTally()
	for range 2000 {
		rep := diagnostics.Examine(drawCounts(r, 50, false), limits.Result{}, diagnostics.Times{})
		y.take(&rep)
	}
	check("counts", y, diagnostics.JointRateCounts)
	for _, key := range y.order {
		if rate := y.rate(key); rate > diagnostics.Level+fourErrors(diagnostics.Level, y.runs) {
			t.Errorf("%s of counts: size %.4f", key, rate)
		}
	}
	rep := diagnostics.Examine(drawCounts(r, 50, true), limits.Result{}, diagnostics.Times{})
	if x := testNamed(t, rep, diagnostics.CodeDoubledPosts, diagnostics.Counts); x.Outcome != diagnostics.Found {
		t.Errorf("counts posted twice: %s", x.Outcome)
	}
}

// A basis of the greatest size: everything is of order n log n, and figures of clean data stay clean.
func TestGreatestBasis(t *testing.T) {
	t.Parallel()
	r := rand.New(rand.NewPCG(33, 1))
	d := design{chart.Individuals, limits.GroupsMax, 1}
	rep := examine(t, requestOf(d, clean(r, d), 0.01))
	for _, x := range rep.Tests {
		if x.Level > 0 && x.Outcome != diagnostics.NothingFound {
			t.Errorf("%s: %s, %s", x.Name, x.Outcome, x.Reason)
		}
	}
	if len(rep.Values.Histogram.Counts) > diagnostics.BinsMax || len(rep.Values.NormalPlot) != diagnostics.NormalPointsMax {
		t.Errorf("%d bins, %d points", len(rep.Values.Histogram.Counts), len(rep.Values.NormalPlot))
	}
}

func BenchmarkExamine(b *testing.B) {
	for _, d := range []design{{chart.Individuals, 100, 1}, {chart.Individuals, 100_000, 1}, {chart.XbarR, 100_000, 5}} {
		r := rand.New(rand.NewPCG(33, 1))
		req := requestOf(d, clean(r, d), 0.01)
		res, err := limits.Compute(req)
		if err != nil {
			b.Fatal(err)
		}
		b.Run(d.String(), func(b *testing.B) {
			for b.Loop() {
				diagnostics.Examine(req, res, diagnostics.Times{})
			}
		})
	}
}
