package diagnostics_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
	"limitary/internal/runlength"
)

func nelson(tb testing.TB) []rules.Spec {
	tb.Helper()
	set, ok := rules.SetByID(diagnostics.SetupSet)
	if !ok || len(set.Rules) != 8 {
		tb.Fatalf("%d rules in %s", len(set.Rules), diagnostics.SetupSet)
	}
	return set.Rules
}

// The rate of each rule in the long run, from its automaton, is that of a long segment less that of one point fewer.
func TestExpectedHitsAgainstRunLengths(t *testing.T) {
	specs := nelson(t)
	rates, err := runlength.LongRun(context.Background(), runlength.Request{
		Kind: chart.Given, Location: runlength.Trace{Rules: specs}, Ends: rules.Look,
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(rates[0].Rules) != len(specs) {
		t.Fatalf("rates of %d rules, want %d", len(rates[0].Rules), len(specs))
	}
	for i, own := range rates[0].Rules {
		got := 1000 * (diagnostics.ExpectedHits(specs[i], 1001) - diagnostics.ExpectedHits(specs[i], 1000))
		bound := 1e-6*own.PointsFlaggedPer1000 + 2*rates[0].FlaggedErrorBound
		if math.Abs(got-own.PointsFlaggedPer1000) > bound {
			t.Errorf("%s: %.8f per 1000 points, by package runlength %.8f within %.2g", specs[i].ID, got, own.PointsFlaggedPer1000, bound)
		}
	}
	// The critical numbers beyond the table rest on the joint rate, rounded up to 23.3 per 1000.
	if joint := rates[0].PointsFlaggedPer1000; joint > 23.3 || joint < 23.1 {
		t.Errorf("all rules flag %.3f per 1000 points, taken for 23.3", joint)
	}
}

func TestAlternatingShareAgainstAllOrders(t *testing.T) {
	for n := 2; n <= 8; n++ {
		keys, alternating, orders := make([]int, n), 0, 0
		for i := range keys {
			keys[i] = i
		}
		permutations(keys, func(order []int) {
			orders++
			for i := 2; i < n; i++ {
				if (order[i] > order[i-1]) == (order[i-1] > order[i-2]) {
					return
				}
			}
			alternating++
		})
		if want := float64(alternating) / float64(orders); math.Abs(diagnostics.AlternatingShare(n)-want) > 1e-12 {
			t.Errorf("%d: %v, want %v", n, diagnostics.AlternatingShare(n), want)
		}
	}
}

// Goal: rows of a short segment, where windows are not full, against the judge on random points with known limits.
func TestExpectedHitsOfShortSegments(t *testing.T) {
	centre, sigma, specs := 0.0, 1.0, nelson(t)
	j, err := judge.New(judge.Limits{Kind: chart.Given, Places: -1, Traces: [chart.Roles]*judge.Trace{
		chart.Location: {Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: specs},
	}})
	if err != nil {
		t.Fatal(err)
	}
	const n, runs = 16, 40_000
	r := rand.New(rand.NewPCG(12, 12))
	sums, squares := make([]float64, len(specs)), make([]float64, len(specs))
	for range runs {
		xs, hits := make([]float64, n), make([]float64, len(specs))
		for i := range xs {
			xs[i] = r.NormFloat64()
		}
		for _, h := range j.Series(xs) {
			hits[h.Rule]++
		}
		for i, h := range hits {
			sums[i], squares[i] = sums[i]+h, squares[i]+h*h
		}
	}
	for i, s := range specs {
		mean := sums[i] / runs
		allowance := 4*math.Sqrt((squares[i]/runs-mean*mean)/runs) + 4./runs
		if want := diagnostics.ExpectedHits(s, n); math.Abs(mean-want) > allowance {
			t.Errorf("%s: %.5f simulated, %.5f expected, within %.5f", s.ID, mean, want, allowance)
		}
	}
}

// Observed hits are those of the judge on the segments between breaks and exclusions, each point counted once a rule.
func TestSetupRowsAgainstTheJudge(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 7))
	req := limits.Request{Kind: chart.Individuals}
	for i := range 80 {
		g := limits.Group{Decimals: 3, Readings: []float64{math.Round(1e3*(5+r.NormFloat64()+2*float64(i/40))) / 1e3}, BreakBefore: i == 20}
		if i == 60 {
			g.Excluded, g.ExclusionReason = true, "test"
		}
		req.Groups = append(req.Groups, g)
	}
	res, err := limits.Compute(req)
	if err != nil {
		t.Fatal(err)
	}
	j, err := judge.New(judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: res.PublishedDecimals, ProcessSigma: res.ProcessSigma,
		Traces: [chart.Roles]*judge.Trace{chart.Location: {Trace: res.Location, Rules: nelson(t)}}})
	if err != nil {
		t.Fatal(err)
	}
	want, flagged := make([]int, 8), map[int]bool{}
	for _, segment := range [][2]int{{0, 20}, {20, 60}, {61, 80}} {
		var xs []float64
		for _, g := range req.Groups[segment[0]:segment[1]] {
			xs = append(xs, g.Readings[0])
		}
		type once struct{ rule, point int }
		seen := map[once]bool{}
		for _, h := range j.Series(xs) {
			flagged[segment[0]+h.Point] = true
			if key := (once{h.Rule, h.Point}); !seen[key] {
				seen[key] = true
				want[h.Rule]++
			}
		}
	}
	rep := diagnostics.Examine(req, res, diagnostics.Times{})
	total := 0
	for i, row := range rep.Setup {
		total += row.Observed
		if row.Observed != want[i] {
			t.Errorf("%s: %d observed, want %d", row.Rule, row.Observed, want[i])
		}
		parts := diagnostics.ExpectedHits(nelson(t)[i], 20) + diagnostics.ExpectedHits(nelson(t)[i], 40) + diagnostics.ExpectedHits(nelson(t)[i], 19)
		if math.Abs(row.Expected-parts) > 1e-12 {
			t.Errorf("%s: %v expected, want %v", row.Rule, row.Expected, parts)
		}
	}
	if total < 10 {
		t.Errorf("only %d hits: the example shows nothing", total)
	}
	if got := testNamed(t, rep, diagnostics.CodeSetupSignals, ""); *got.Statistic != float64(len(flagged)) || got.N != 79 {
		t.Errorf("%v of %d points flagged, want %d of 79", *got.Statistic, got.N, len(flagged))
	}
}
