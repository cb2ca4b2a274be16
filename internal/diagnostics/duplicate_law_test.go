package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/mathext"

	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// The closed form for pairs and the integral agree, and both with rounded readings drawn from the definition.
func TestShareOfZeroRanges(t *testing.T) {
	for _, step := range []float64{0.001, 0.1, 0.5, 1, 3, 30, 1000} {
		if a, b := diagnostics.ZeroShare(step, 2), diagnostics.ZeroIntegral(step, 2); math.Abs(a-b) > 1e-11 {
			t.Errorf("step %v: %.14f in closed form, %.14f integrated", step, a, b)
		}
	}
	const draws = 100_000
	r := rand.New(rand.NewPCG(3, 91))
	for _, c := range []struct {
		step float64
		n    int
	}{{0.5, 2}, {1.5, 2}, {1, 3}, {2.5, 5}} {
		zero := 0
		for range draws {
			mean := c.step * r.Float64()
			first, same := math.Round((mean+r.NormFloat64())/c.step), true
			for range c.n - 1 {
				same = math.Round((mean+r.NormFloat64())/c.step) == first && same
			}
			if same {
				zero++
			}
		}
		want := diagnostics.ZeroShare(c.step, c.n)
		if got := float64(zero) / draws; math.Abs(got-want) > fourErrors(want, draws) {
			t.Errorf("%d readings on steps of %v: %.4f zero, want %.4f", c.n, c.step, got, want)
		}
	}
}

func TestCutGammaIntegrals(t *testing.T) {
	for _, a := range []float64{0.5, 1, 2.5, 7} {
		for _, theta := range []float64{1e-9, 0.3, 5, 80, 290} {
			shape, _ := math.Lgamma(a)
			want := mathext.GammaIncReg(a, theta) * math.Exp(shape-a*math.Log(theta))
			if got := diagnostics.CutGamma(a, theta); math.Abs(got-want) > 1e-11*want {
				t.Errorf("a %v, θ %v: %v, want %v", a, theta, got, want)
			}
			// With y = x², which takes away the pole of a = 1/2.
			want = quad.Fixed(func(x float64) float64 { return 2 * math.Pow(x, 2*a-1) * math.Exp(-theta*(1-x*x)) }, 0, 1, 200, quad.Legendre{}, 0)
			if got := diagnostics.CutGamma(a, -theta); math.Abs(got-want) > 1e-10*want {
				t.Errorf("a %v, θ %v: %v, want %v", a, -theta, got, want)
			}
		}
	}
}

// largestShareBelow is exact for triples, whose sums of squares are exponential: with U the shares of n of these in their
// sum, P(max U <= c) = Σ (-1)^j·C(n,j)·(1-jc)^(n-1) over jc < 1 (R. A. Fisher 1929, from memory).
func largestShareBelow(n int, c float64) float64 {
	total, choose := 0.0, 1.0
	for j := 0; j <= n && float64(j)*c < 1; j++ {
		total += choose * math.Pow(1-float64(j)*c, float64(n-1))
		choose *= -float64(n-j) / float64(j+1)
	}
	return total
}

func TestLowerTailOfTheLargestVariance(t *testing.T) {
	same := func(freedom, n int) []int { return slices.Repeat([]int{freedom}, n) }
	for _, n := range []int{10, 20, 30} {
		for _, probability := range []float64{0.001, 0.01, 0.1, 0.5} {
			low, high := 1/float64(n), 1.
			for range 60 {
				if c := (low + high) / 2; largestShareBelow(n, c) < probability {
					low = c
				} else {
					high = c
				}
			}
			// Of shares c, the largest sum of squares is c·2n when the pooled variance is 1.
			got := diagnostics.LargestBelow(low*2*float64(n)/diagnostics.OnceIn(float64(n), 2), same(2, n))
			if math.Abs(got/probability-1) > 0.02 {
				t.Errorf("%d triples: %.5f, want %v", n, got, probability)
			}
		}
	}
	for freedom, n := range map[int]int{1: 20, 4: 15} {
		for _, bound := range []float64{0, 1e-300, 0.01, 1000} {
			if got := diagnostics.LargestBelow(bound, same(freedom, n)); got != math.Trunc(bound/1000) {
				t.Errorf("bound %v: %v", bound, got)
			}
		}
	}
}

// Goal: the probability of the statistic is uniform, for pairs and sets of unequal size, drawn from the definition.
func TestLowerTailOfTheLargestVarianceBySimulation(t *testing.T) {
	const draws = 8000
	r := rand.New(rand.NewPCG(4, 92))
	for name, freedoms := range map[string][]int{"pairs": slices.Repeat([]int{1}, 20), "2 to 5": slices.Repeat([]int{1, 2, 3, 4}, 5)} {
		bounds := make([]float64, draws)
		for i := range bounds {
			total, freedom, largest := 0.0, 0.0, 0.0
			for _, f := range freedoms {
				x := 0.0
				for range f {
					z := r.NormFloat64()
					x += z * z
				}
				total, freedom = total+x, freedom+float64(f)
				largest = max(largest, x/onceInOf[f])
			}
			bounds[i] = largest / (total / freedom)
		}
		slices.Sort(bounds)
		for _, probability := range []float64{0.01, 0.05, 0.3} {
			got := diagnostics.LargestBelow(bounds[int(probability*draws)], freedoms)
			if math.Abs(got-probability) > fourErrors(probability, draws)+0.01*probability {
				t.Errorf("%s: %.4f at the quantile of %v", name, got, probability)
			}
		}
	}
}

// onceInOf are the values of χ² exceeded once in twenty, by degrees of freedom (printed in every table, from memory).
var onceInOf = map[int]float64{1: 3.8415, 2: 5.9915, 3: 7.8147, 4: 9.4877}

// The share of the largest variance that one basis of pairs in a hundred exceeds, from the table of Cochran's test in
// ISO 5725-2 (from memory), printed to three decimals: just beyond it there is a finding, just below none.
func TestCochranAgainstItsTable(t *testing.T) {
	for n, printed := range map[int]float64{10: 0.718, 20: 0.480, 40: 0.294} {
		for _, c := range []struct {
			share float64
			want  diagnostics.Outcome
		}{{printed - 0.001, diagnostics.NothingFound}, {printed + 0.001, diagnostics.Found}} {
			// The others' ranges are 1, so that their squares are n-1.
			sets := [][]float64{{50, 50 + math.Sqrt(c.share/(1-c.share)*float64(n-1))}}
			for i := 1; i < n; i++ {
				sets = append(sets, []float64{float64(i), float64(i + 1)})
			}
			rep := examineSets(t, sets, limits.DuplicateOptions{})
			if x := testNamed(t, rep, diagnostics.CodeOutlyingSet, ""); x.Outcome != c.want {
				t.Errorf("%d pairs, share %.3f: %s, p %.5f", n, c.share, x.Outcome, *x.PValue)
			}
		}
	}
}

// Over all orders of scatter within strata, ties and all, the mean of r is zero and its variance the one stated.
func TestRankCorrelationOverAllOrders(t *testing.T) {
	for name, c := range map[string]struct{ means, scatters [][]float64 }{
		"one":  {[][]float64{{3, 1, 1, 5, 9, 2}}, [][]float64{{0, 0, 2, 1, 4, 4}}},
		"many": {[][]float64{{3, 1, 1, 5}, {7, 7.5, 8}}, [][]float64{{0, 0, 2, 1}, {4, 1, 9}}},
	} {
		var rs []float64
		_, stated := diagnostics.RankCorrelation(c.means, c.scatters)
		var permute func(k, i int)
		permute = func(k, i int) {
			if k == len(c.scatters) {
				r, _ := diagnostics.RankCorrelation(c.means, c.scatters)
				rs = append(rs, r)
				return
			}
			s := c.scatters[k]
			if i == len(s) {
				permute(k+1, 0)
				return
			}
			for j := i; j < len(s); j++ {
				s[i], s[j] = s[j], s[i]
				permute(k, i+1)
				s[i], s[j] = s[j], s[i]
			}
		}
		permute(0, 0)
		mean, squares := 0.0, 0.0
		for _, r := range rs {
			mean, squares = mean+r/float64(len(rs)), squares+r*r/float64(len(rs))
		}
		if math.Abs(mean) > 1e-12 || math.Abs(squares-stated) > 1e-12 {
			t.Errorf("%s: mean %v and variance %v of %d orders, stated %v", name, mean, squares, len(rs), stated)
		}
	}
	// By hand: d² adds up to 4 for these ranks of five, so that r is 1 - 6·4/(5·24) = 0.8, with variance 1/4.
	r, variance := diagnostics.RankCorrelation([][]float64{{1, 2, 3, 4, 5}}, [][]float64{{2, 1, 4, 3, 5}})
	if math.Abs(r-0.8) > 1e-12 || math.Abs(variance-0.25) > 1e-12 {
		t.Errorf("by hand: %v, %v", r, variance)
	}
}

// The scatter of pairs is their difference; that of triples follows from the exponential law in closed form.
func TestScatterIsHalfNormal(t *testing.T) {
	for _, x := range []float64{0, 0.1, 1, 5, 30, 400, 4000} {
		if got := diagnostics.Scatter(x, 1); got != math.Sqrt(x) {
			t.Errorf("pairs, %v: %v", x, got)
		}
		got := diagnostics.Scatter(x, 2)
		if back := -2 * math.Log(math.Erfc(got/math.Sqrt2)); x < 1000 && math.Abs(back-x) > 1e-9*(1+x) {
			t.Errorf("triples, %v: %v, back %v", x, got, back)
		}
		if next := diagnostics.Scatter(1.01*x+0.01, 2); !(next > got) || math.IsInf(next, 0) {
			t.Errorf("triples: %v after %v", next, got)
		}
	}
}
