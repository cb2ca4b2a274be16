package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

func testNamed(tb testing.TB, rep diagnostics.Report, code, subject string) diagnostics.Test {
	tb.Helper()
	for _, t := range rep.Tests {
		if t.Code == code && (subject == "" || t.Subject == subject) {
			return t
		}
	}
	tb.Fatalf("no test %s of %s among %d", code, subject, len(rep.Tests))
	return diagnostics.Test{}
}

// Goal: F and its tails for unequal subgroups against sums of squares written out and the distribution of another package.
func TestVariationAgainstTheDefinition(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 2))
	req := limits.Request{Kind: chart.XbarS, SubgroupSize: 6}
	var all []float64
	for i := range 12 {
		g := limits.Group{Decimals: limits.DecimalsUnknown}
		for range 1 + i%6 {
			g.Readings = append(g.Readings, math.Round(1e4*(10+r.NormFloat64()+0.3*float64(i%3)))/1e4)
		}
		all = append(all, g.Readings...)
		req.Groups = append(req.Groups, g)
	}
	mean := func(xs []float64) (m float64) {
		for _, x := range xs {
			m += x / float64(len(xs))
		}
		return m
	}
	between, within := 0.0, 0.0
	for _, g := range req.Groups {
		own := mean(g.Readings)
		between += float64(len(g.Readings)) * math.Pow(own-mean(all), 2)
		for _, x := range g.Readings {
			within += (x - own) * (x - own)
		}
	}
	n := float64(len(all))
	f := between / 11 / (within / (n - 12))
	law := distuv.F{D1: 11, D2: n - 12}
	want := 2 * math.Min(law.CDF(f), 1-law.CDF(f))
	rep := examine(t, req)
	code := diagnostics.CodeBetweenTooLarge
	if f < 1 {
		code = diagnostics.CodeBetweenTooSmall
	}
	got := testNamed(t, rep, code, diagnostics.Subgroups)
	if math.Abs(*got.Statistic-f) > 1e-9 || math.Abs(*got.PValue-want) > 1e-9 {
		t.Errorf("F = %v, p = %v; want %v, %v", *got.Statistic, *got.PValue, f, want)
	}
}

func TestFTails(t *testing.T) {
	for _, d := range [][2]float64{{1, 8}, {11, 40}, {99, 99_900}} {
		for _, f := range []float64{0, 0.2, 1, 1.3, 9, 1e6, 1e300} {
			upper, lower := diagnostics.FTails(f, d[0], d[1])
			if want := (distuv.F{D1: d[0], D2: d[1]}).CDF(f); math.Abs(lower-want) > 1e-9 || math.Abs(upper+lower-1) > 1e-9 {
				t.Errorf("F(%v; %v): %v below, %v above, want %v below", f, d, lower, upper, want)
			}
		}
	}
}

// The moments of the autocorrelation from the matrices of its definition, with breaks.
func TestLagMomentsAgainstMatrices(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	for _, n := range []int{5, 12, 30} {
		joined := make([]bool, n)
		a := mat.NewDense(n, n, nil)
		for i := 1; i < n; i++ {
			if joined[i] = r.IntN(4) > 0; joined[i] {
				a.Set(i, i-1, 0.5)
				a.Set(i-1, i, 0.5)
			}
		}
		m := mat.NewDense(n, n, nil)
		for i := range n {
			for j := range n {
				m.Set(i, j, -1/float64(n))
			}
			m.Set(i, i, 1-1/float64(n))
		}
		var b, bb mat.Dense
		b.Product(m, a, m)
		bb.Mul(&b, &b)
		size := float64(n)
		mean := mat.Trace(&b) / (size - 1)
		square := (math.Pow(mat.Trace(&b), 2) + 2*mat.Trace(&bb)) / ((size - 1) * (size + 1))
		degrees, pairs := diagnostics.Neighbours(joined)
		gotMean, gotVariance := diagnostics.LagMoments(degrees, pairs)
		if math.Abs(gotMean-mean) > 1e-12 || math.Abs(gotVariance-(square-mean*mean)) > 1e-12 {
			t.Errorf("n = %d: mean %v, variance %v, want %v, %v", n, gotMean, gotVariance, mean, square-mean*mean)
		}
	}
	degrees, pairs := diagnostics.Neighbours([]bool{false, true, true, true, true, true, true, true})
	if mean, _ := diagnostics.LagMoments(degrees, pairs); math.Abs(mean+1./8) > 1e-15 {
		t.Errorf("the mean of one chain of 8 is %v, want -1/8", mean)
	}
}

// Goal: no neighbours across a break or an exclusion. Two levels, alternating in blocks, correlate strongly in one chain
// and not at all where every block stands alone.
func TestCorrelationStopsAtBreaksAndExclusions(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 1))
	build := func(change func(i int, g *limits.Group)) diagnostics.Test {
		req := limits.Request{Kind: chart.Individuals}
		for i := range 60 {
			g := limits.Group{Decimals: 4, Readings: []float64{math.Round(1e4*(float64(i/2%2)*8+r.NormFloat64())) / 1e4}}
			change(i, &g)
			req.Groups = append(req.Groups, g)
		}
		return testNamed(t, examine(t, req), diagnostics.CodeCorrelated, "")
	}
	// Joined only at the change of level, neighbours are opposed; joined only within a level, they are alike.
	within := build(func(i int, g *limits.Group) { g.BreakBefore = i%2 == 0 })
	across := build(func(i int, g *limits.Group) { g.BreakBefore = i%2 == 1 })
	if *within.Statistic < 0.3 || within.Outcome != diagnostics.Found {
		t.Errorf("within levels: r = %v, %s", *within.Statistic, within.Outcome)
	}
	if *across.Statistic > -0.3 || across.Outcome != diagnostics.Found {
		t.Errorf("across levels: r = %v, %s", *across.Statistic, across.Outcome)
	}
	excluded := build(func(i int, g *limits.Group) {
		if i%2 == 0 {
			g.Excluded, g.ExclusionReason = true, "test"
		} else {
			g.BreakBefore = false
		}
		if i >= 40 {
			g.Excluded, g.ExclusionReason = false, ""
		}
	})
	if excluded.N != 40 || excluded.Outcome == diagnostics.NotEnoughData {
		t.Errorf("%d values used, %s; want the 40 not excluded, of which 20 have neighbours", excluded.N, excluded.Outcome)
	}
}

// Contrasts of two and three readings are independent with the variance of a reading; from four readings on residuals
// have that variance. Either way they carry the sum of squares within the subgroup, and no mean.
func TestContrastsKeepTheScatterAndLoseTheMean(t *testing.T) {
	for n := 2; n <= 7; n++ {
		// The rows of the map from readings to contrasts, one unit reading at a time.
		rows := make([][]float64, n)
		for i := range n {
			unit := make([]float64, n)
			unit[i] = 1
			rows[i] = diagnostics.Contrasts(unit)
		}
		for a := range rows[0] {
			total, own := 0.0, 0.0
			for i := range n {
				total += rows[i][a]
				own += rows[i][a] * rows[i][a]
			}
			if math.Abs(total) > 1e-12 || math.Abs(own-1) > 1e-12 {
				t.Errorf("n = %d, contrast %d: weights add up to %v, their squares to %v, want 0 and 1", n, a, total, own)
			}
			for b := range a {
				product := 0.0
				for i := range n {
					product += rows[i][a] * rows[i][b]
				}
				want := 0.0
				if n >= 4 {
					want = -1 / float64(n-1)
				}
				if math.Abs(product-want) > 1e-12 {
					t.Errorf("n = %d: contrasts %d and %d correlate by %v, want %v", n, a, b, product, want)
				}
			}
		}
	}
}
