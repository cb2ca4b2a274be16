package diagnostics_test

import (
	"flag"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/diagnostics"
)

// draws is the number of normal values drawn for each size; 20,000,000 gave the figures in critical.go.
var draws = flag.Int("draws", 400_000, "normal values drawn for each critical value")

// Goal: the critical values of the range and of the split are passed by one normal sample in a hundred. With -v the
// simulated percentiles are printed; with more -draws they are what the tables are made from.
func TestCriticalValues(t *testing.T) {
	for _, n := range []int{10, 11, 20, 25, 50, 75, 120, 200, 500, 1000} {
		runs := *draws / n
		r := rand.New(rand.NewPCG(uint64(n), 7))
		split, ranges := make([]float64, runs), make([]float64, runs)
		values := make([]float64, n)
		for i := range runs {
			for j := range values {
				values[j] = r.NormFloat64()
			}
			_, sorted := diagnostics.Standardise(values)
			split[i], _ = diagnostics.BestSplit(sorted)
			ranges[i] = sorted[n-1] - sorted[0]
		}
		check := func(name string, beyond func(int) bool, least float64) {
			passed := 0
			for i := range runs {
				if beyond(i) {
					passed++
				}
			}
			rate, allowance := float64(passed)/float64(runs), fourErrors(0.01, runs)
			if rate > 0.01+allowance || rate < least-allowance {
				t.Errorf("%s, n = %d: %.4f of %d samples are beyond, want 0.01 within %.4f", name, n, rate, runs, allowance)
			}
		}
		check("split", func(i int) bool { return split[i] > diagnostics.SplitCritical(n) }, 0.009)
		if n >= 20 {
			check("range", func(i int) bool { return ranges[i] < diagnostics.RangeCritical(n) }, 0.009)
		}
		slices.Sort(split)
		slices.Sort(ranges)
		t.Logf("n = %4d: split %.5f (used %.5f), range %.4f (used %.4f)", n, split[runs*99/100], diagnostics.SplitCritical(n), ranges[runs/100], diagnostics.RangeCritical(n))
	}
}

// rangeBelow is the distribution of the range of n standard normal values, n∫φ(x)(Φ(x+w) - Φ(x))^(n-1) dx by the
// trapezoidal rule, whose error is far below anything asked here.
func rangeBelow(w float64, n int) float64 {
	const steps, end = 4000, 9.0
	total := 0.0
	for i := range steps + 1 {
		x := -end + 2*end*float64(i)/steps
		inside := (math.Erfc(x/math.Sqrt2) - math.Erfc((x+w)/math.Sqrt2)) / 2
		total += math.Exp(-x*x/2+float64(n-1)*math.Log(inside)) / math.Sqrt(2*math.Pi)
	}
	return total * float64(n) * 2 * end / steps
}

// In long samples the standard deviation is as good as known, and the exact distribution of the range takes its place.
func TestRangeOfLongSamples(t *testing.T) {
	for _, n := range []int{5000, 7000, 10_000, 20_000, 35_000, 50_000, 100_000} {
		if p := rangeBelow(diagnostics.RangeCritical(n), n); p > 0.0105 || p < 0.007 {
			t.Errorf("n = %d: P(range < %.3f) = %.5f, want just below 0.01", n, diagnostics.RangeCritical(n), p)
		}
	}
	// A printed value: the expected range of two values is 2/√π; its median is √2 times that of |z|, 0.95387 (computed).
	if p := rangeBelow(0.9538726, 2); math.Abs(p-0.5) > 1e-6 {
		t.Errorf("P(range of 2 < its median) = %v, want 0.5", p)
	}
}
