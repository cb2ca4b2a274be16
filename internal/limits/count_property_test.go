package limits_test

import (
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

var countMethods = []chart.CountMethod{chart.Normal, chart.Exact}

func poisson(r *rand.Rand, mean float64) float64 { return distuv.Poisson{Lambda: mean, Src: r}.Rand() }

func binomial(r *rand.Rand, size, p float64) float64 {
	return distuv.Binomial{N: size, P: p, Src: r}.Rand()
}

func drawCounts(r *rand.Rand, n int, mean float64) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		xs[i] = poisson(r, mean)
	}
	return xs
}

// A chart of np is one of p with statistic, centre, sigma and lines times the size.
func TestNPIsSizeTimesP(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 7))
	const size = 64 // a power of two, so that fractions of it are decimals
	for _, method := range countMethods {
		var xs []float64
		for range 30 {
			xs = append(xs, binomial(r, size, 0.2))
		}
		options := limits.CountOptions{Method: method}
		np := mustCompute(t, limits.Request{Kind: chart.NP, SubgroupSize: size, Groups: samplesOf(size, xs...), PublishedDecimals: ptr(9), Counts: options})
		p := mustCompute(t, limits.Request{Kind: chart.P, Groups: samplesOf(size, xs...), PublishedDecimals: ptr(15), Counts: options})
		if !near(np.CentreUnrounded, size*p.CentreUnrounded, 1e-14) || !near(np.SigmaUnrounded, size*p.SigmaUnrounded, 1e-14) {
			t.Errorf("%s: centre %g, sigma %g for np, %g, %g for p", method, np.CentreUnrounded, np.SigmaUnrounded, p.CentreUnrounded, p.SigmaUnrounded)
		}
		for _, lines := range [][2]chart.Line{
			{np.Location.LowerAction, p.Location.LowerAction}, {np.Location.UpperAction, p.Location.UpperAction},
			{np.Location.LowerWarning, p.Location.LowerWarning}, {np.Location.UpperWarning, p.Location.UpperWarning},
		} {
			if lines[0].Basis != lines[1].Basis || math.Abs(lines[0].Value-size*lines[1].Value) > 1e-9 || !near(lines[0].Tail, lines[1].Tail, 1e-6) {
				t.Errorf("%s: line %+v for np, %+v for p", method, lines[0], lines[1])
			}
		}
		jn, jp := judgeOf(t, np), judgeOf(t, p)
		for k := 0.0; k <= size; k++ {
			an, wn := beyond(jn, k, size)
			ap, wp := beyond(jp, k, size)
			if an != ap || wn != wp {
				t.Errorf("%s: %g of %d judged %d, %d for np, %d, %d for p", method, k, size, an, wn, ap, wp)
			}
		}
	}
}

func TestUOfOneUnitIsC(t *testing.T) {
	xs := drawCounts(rand.New(rand.NewPCG(2, 7)), 30, 6)
	for _, options := range []limits.CountOptions{{}, {Method: chart.Normal}, {Extra: limits.LaneyFactor}} {
		c := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, xs...), Counts: options})
		u := mustCompute(t, limits.Request{Kind: chart.U, Groups: samplesOf(1, xs...), Counts: options})
		u.Kind = chart.C
		for i := range u.Findings { // advice names the kind
			u.Findings[i].Advice = c.Findings[i].Advice
		}
		if !reflect.DeepEqual(c, u) {
			t.Errorf("%+v:\nc gives %+v\nu gives %+v", options, c, u)
		}
	}
}

// Twice the sample with twice the count leaves the centre and divides the variance of counting by two.
func TestDoubledSamples(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 7))
	for _, kind := range []chart.Kind{chart.P, chart.U} {
		var once, twice []limits.Group
		for i := range 25 {
			size := float64(100 + 10*(i%5))
			x := binomial(r, size, 0.3)
			once, twice = append(once, counted(x, size)), append(twice, counted(2*x, 2*size))
		}
		a := mustCompute(t, limits.Request{Kind: kind, Groups: once, PublishedDecimals: ptr(9)})
		b := mustCompute(t, limits.Request{Kind: kind, Groups: twice, PublishedDecimals: ptr(9)})
		if *a.Location.Centre != *b.Location.Centre || b.Model.Inspected != 2*a.Model.Inspected || !near(*a.Location.Sigma, math.Sqrt2**b.Location.Sigma, 1e-14) {
			t.Errorf("%s: centre %g, sigma %g at %g; doubled %g, %g at %g", kind, *a.Location.Centre, *a.Location.Sigma, a.Model.Inspected, *b.Location.Centre, *b.Location.Sigma, b.Model.Inspected)
		}
		wide, narrow := a.Intervals.Centre, b.Intervals.Centre
		if ratio := (wide.Upper - wide.Lower) / (narrow.Upper - narrow.Lower); !near(ratio, math.Sqrt2, 0.01) {
			t.Errorf("%s: the interval is %.4g times that of doubled samples, want √2", kind, ratio)
		}
	}
}

func TestOrderOfSamplesMakesNoDifference(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 7))
	for _, kind := range []chart.Kind{chart.P, chart.U} {
		for _, extra := range []limits.ExtraVariation{limits.NoExtra, limits.BetweenSamples} {
			var groups []limits.Group
			for i := range 40 {
				size := 100 + float64(i)
				if kind == chart.U {
					size /= 10
				}
				groups = append(groups, counted(binomial(r, 100, 0.1+0.2*r.Float64()), size))
			}
			req := limits.Request{Kind: kind, Groups: groups, PublishedDecimals: ptr(8), Counts: limits.CountOptions{Extra: extra}}
			want := mustCompute(t, req)
			req.Groups = make([]limits.Group, len(groups))
			for i, at := range r.Perm(len(groups)) {
				req.Groups[i] = groups[at]
			}
			got := mustCompute(t, req)
			if got.CentreUnrounded != want.CentreUnrounded || !reflect.DeepEqual(got.Location, want.Location) || !reflect.DeepEqual(got.Model, want.Model) {
				t.Errorf("%s: got %s, %+v in another order, want %s, %+v", kind, show(got.Location), got.Model, show(want.Location), want.Model)
			}
		}
	}
}

// The lines that a sample has on a chart of unequal samples are those of a chart where all samples are of its size.
func TestEqualSizesAreTheUnequalPath(t *testing.T) {
	sizes := []float64{40, 75, 150, 600}
	for _, kind := range []chart.Kind{chart.P, chart.U} {
		for _, method := range countMethods {
			req := limits.Request{Kind: kind, Centre: ptr(0.06), PublishedDecimals: ptr(7), Counts: limits.CountOptions{Method: method}}
			for _, size := range sizes {
				req.Groups = append(req.Groups, counted(1, size))
			}
			mixed := mustCompute(t, req)
			j := judgeOf(t, mixed)
			for _, size := range sizes {
				req.Groups = samplesOf(size, 1, 3)
				equal := mustCompute(t, req)
				sigma, _ := limits.CountSigma(kind, 0.06, size, &mixed.Model)
				lines := j.Lines(chart.Location, rules.Scale{Centre: 0.06, Sigma: sigma, Inspected: size})
				for i, pair := range []struct {
					got  *float64
					want chart.Line
				}{
					{lines.LowerAction, equal.Location.LowerAction}, {lines.UpperAction, equal.Location.UpperAction},
					{lines.LowerWarning, equal.Location.LowerWarning}, {lines.UpperWarning, equal.Location.UpperWarning},
				} {
					if absent := pair.want.Basis == chart.Absent; absent != (pair.got == nil) || !absent && *pair.got != pair.want.Value {
						t.Errorf("%s, %s, size %g, line %d: got %v of the mixed chart, want %+v", kind, method, size, i, pair.got, pair.want)
					}
				}
			}
		}
	}
}

// Normal lines of every point, from their definition.
func TestNormalLinesOfEveryPoint(t *testing.T) {
	groups := []limits.Group{counted(9, 80), counted(31, 300), counted(55, 555)}
	res := mustCompute(t, limits.Request{Kind: chart.P, Groups: groups, Counts: limits.CountOptions{Method: chart.Normal}})
	j, p := judgeOf(t, res), *res.Location.Centre
	for _, size := range []float64{20, 80, 137, 300, 555, 5000} {
		sigma := math.Sqrt(p * (1 - p) / size)
		for k := 0.0; k <= size; k++ {
			x := decimal.Round(k/size, res.PublishedDecimals)
			want := func(z float64) int {
				lower, upper := decimal.Round(p-z*sigma, res.PublishedDecimals), decimal.Round(p+z*sigma, res.PublishedDecimals)
				switch {
				case x > upper:
					return 1
				case x < lower && lower > 0:
					return -1
				}
				return 0
			}
			if action, warning := beyond(j, k, size); action != want(3) || warning != want(2) {
				t.Fatalf("%g of %g: judged %d, %d, want %d, %d", k, size, action, warning, want(3), want(2))
			}
		}
	}
}

// A lower line that the published size does not have stays in force for the larger samples that do have one.
func TestLowerLineOfLargeSamples(t *testing.T) {
	for _, method := range countMethods {
		req := limits.Request{Kind: chart.P, Centre: ptr(0.05), Groups: []limits.Group{counted(2, 40), counted(1, 60), counted(25, 500)}, Counts: limits.CountOptions{Method: method}}
		req.Groups = append(req.Groups, samplesOf(40, 2, 2, 2, 2, 2, 2, 2, 2, 2, 2)...)
		res := mustCompute(t, req)
		if line := res.Location.LowerAction; line.Value != 0 || line.Basis == chart.Absent {
			t.Errorf("%s: got %+v at %g, want a line at zero", method, line, res.Model.Inspected)
		}
		j := judgeOf(t, res)
		if action, _ := beyond(j, 8, 500); action != -1 {
			t.Errorf("%s: 8 of 500 judged %d, want below", method, action)
		}
		if action, _ := beyond(j, 0, 40); action != 0 {
			t.Errorf("%s: 0 of 40 judged %d, want not beyond", method, action)
		}
	}
}

// Seen from the other end: conforming items counted in place of nonconforming ones, the upper line of large samples.
func TestUpperLineOfLargeSamples(t *testing.T) {
	for _, method := range countMethods {
		req := limits.Request{Kind: chart.P, Centre: ptr(0.95), Groups: []limits.Group{counted(475, 500)}, Counts: limits.CountOptions{Method: method}}
		req.Groups = append(req.Groups, samplesOf(40, 38, 38, 38, 38, 38, 38, 38, 38, 38, 38, 38, 38)...)
		res := mustCompute(t, req)
		if line := res.Location.UpperAction; line.Value != 1 || line.Basis == chart.Absent {
			t.Errorf("%s: got %+v at %g, want a line at one", method, line, res.Model.Inspected)
		}
		j := judgeOf(t, res)
		if action, _ := beyond(j, 492, 500); action != 1 {
			t.Errorf("%s: 492 of 500 judged %d, want above", method, action)
		}
		if action, _ := beyond(j, 40, 40); action != 0 {
			t.Errorf("%s: 40 of 40 judged %d, want not beyond", method, action)
		}
	}
}

// 0.083 - 3·√(0.083·0.917/100) is 0.00024 (computed): no count lies below that, and rounded to three decimals none could.
func TestLineThatRoundsToTheEndIsAbsent(t *testing.T) {
	req := limits.Request{Kind: chart.P, Centre: ptr(0.083), Groups: samplesOf(100, 8), PublishedDecimals: ptr(3), Counts: limits.CountOptions{Method: chart.Normal}}
	if line := mustCompute(t, req).Location.LowerAction; line != (chart.Line{Basis: chart.Absent}) {
		t.Errorf("got %+v, want no line", line)
	}
	req.PublishedDecimals = ptr(5)
	if line := mustCompute(t, req).Location.LowerAction; line.Value != 0.00024 {
		t.Errorf("got %+v, want 0.00024", line)
	}
}
