package changetest_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/limits"
)

// laplace has kurtosis 6 and standard deviation 1.
func laplace(r *rand.Rand, n int) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		xs[i] = (r.ExpFloat64() - r.ExpFloat64()) / math.Sqrt2
	}
	return xs
}

// The variance of a mean square of n readings is σ⁴(κ/n - (n-3)/(n(n-1))) (Cramér, from memory), 2σ⁴/(n-1) for normal ones;
// φ is the ratio, near (κ-1)/2 for many. Laplace readings have κ = 6.
func TestTailsOfMeanSquares(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	for _, c := range []struct {
		name limits.Estimator
		size int
		want float64
	}{
		{limits.Overall, 1, 2.5},
		{limits.Pooled, 4, (6./4 - 1./12) * 3 / 2},
		{limits.Pooled, 2, (6./2 + 1./2) / 2},
	} {
		if got := changetest.TailsOf(c.name, laplace(r, 200_000), c.size, 1); !near(got, c.want, 0.05) {
			t.Errorf("seed 3,3, %s of %d: got φ %.3f, want %.3f within 5 %%", c.name, c.size, got, c.want)
		}
	}
}

// For means of moving ranges, ranges and standard deviations φ is compared with its definition: the variance of the mean
// over many series of Laplace readings against that over as many of normal ones.
func TestTailsOfMeansOfRanges(t *testing.T) {
	const series, groups = 1500, 25
	r := rand.New(rand.NewPCG(4, 4))
	for _, c := range []struct {
		name limits.Estimator
		size int
		of   func(xs []float64, size int) float64
	}{
		{limits.MeanMovingRange, 1, meanMovingRange},
		{limits.RBar, 4, func(xs []float64, size int) float64 { return meanOf(xs, size, limits.Range) }},
		{limits.SBar, 4, func(xs []float64, size int) float64 { return meanOf(xs, size, deviation) }},
	} {
		relative := func(draw func(*rand.Rand, int) []float64) float64 {
			sum, squares := 0.0, 0.0
			for range series {
				x := c.of(draw(r, groups*c.size), c.size)
				sum, squares = sum+x, squares+x*x
			}
			average := sum / series
			return (squares/series - average*average) / (average * average)
		}
		want := relative(laplace) / relative(laws[0].draw)
		long := laplace(r, 50_000*c.size)
		f, _ := limits.Factors(max(2, c.size))
		sigma := map[limits.Estimator]float64{limits.MeanMovingRange: 1, limits.RBar: c.of(long, c.size) / f.RangeMean, limits.SBar: c.of(long, c.size) / f.SMean}[c.name]
		got := changetest.TailsOf(c.name, long, c.size, sigma)
		// A variance from that many series has a relative standard error of √(2/series), a ratio of two √2 times that.
		if bound := 4 * math.Sqrt(4./series); want < 1.2 || !near(got, want, bound) {
			t.Errorf("seed 4,4, %s: got φ %.3f, want %.3f within %.0f %%", c.name, got, want, 100*bound)
		}
	}
}

func meanMovingRange(xs []float64, _ int) float64 {
	sum := 0.0
	for i := 1; i < len(xs); i++ {
		sum += math.Abs(xs[i] - xs[i-1])
	}
	return sum / float64(len(xs)-1)
}

func meanOf(xs []float64, size int, of func([]float64) float64) float64 {
	sum := 0.0
	for i := 0; i < len(xs); i += size {
		sum += of(xs[i : i+size])
	}
	return sum / float64(len(xs)/size)
}

func deviation(xs []float64) float64 {
	sum, squares := 0.0, 0.0
	for _, x := range xs {
		sum += x
	}
	average := sum / float64(len(xs))
	for _, x := range xs {
		squares += (x - average) * (x - average)
	}
	return math.Sqrt(squares / float64(len(xs)-1))
}

// Normal readings in number have φ = 1 for every estimator, and light tails are not taken below it.
func TestTailsAreNeverBelowOne(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	flat := make([]float64, 4000)
	for i := range flat {
		flat[i] = (2*r.Float64() - 1) * math.Sqrt(3)
	}
	normal := laws[0].draw(r, 60_000)
	for name, size := range map[limits.Estimator]int{limits.MeanMovingRange: 1, limits.MedianMovingRange: 1, limits.Overall: 1, limits.RBar: 4, limits.SBar: 4, limits.Pooled: 4} {
		if got := changetest.TailsOf(name, normal, size, 1); !near(got, 1, 0.05) {
			t.Errorf("seed 5,5, %s: got φ %.3f of normal readings, want 1", name, got)
		}
		if got := changetest.TailsOf(name, flat, size, 1.02); got != 1 {
			t.Errorf("seed 5,5, %s: got φ %.3f of a uniform law, want 1", name, got)
		}
	}
}
