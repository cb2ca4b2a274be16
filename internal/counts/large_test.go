package counts

import (
	"math"
	"testing"
)

// TestLargestLaws holds tails, summed from a logarithm, against weights normalised by their own sum, at sizes that a sum
// from zero does not reach.
func TestLargestLaws(t *testing.T) {
	for _, tc := range []struct {
		law       Law
		tolerance float64
	}{
		{poisson(1e4), 1e-12}, {binomial(1e6, 0.3), 1e-12}, {binomial(1e6, 0.9), 1e-12}, {poisson(1e6), 1e-12},
		{binomial(SizeMax, 0.001), 1e-11}, {poisson(5e7), 1e-11},
	} {
		for _, sigmas := range []float64{-3, 2} {
			k := math.Round(tc.law.mean + sigmas*tc.law.Sigma())
			atMost, above := tc.law.weigh(k)
			all := extended(0).Add(atMost, above)
			low, _ := atMost.Quo(atMost, all).Float64()
			high, _ := above.Quo(above, all).Float64()
			eLow, eHigh := AtMost(tc.law, k)/low-1, Above(tc.law, k)/high-1
			t.Logf("%+v at %g: %.2g %.2g", tc.law, k, eLow, eHigh)
			if math.Abs(eLow) > tc.tolerance || math.Abs(eHigh) > tc.tolerance {
				t.Errorf("%+v at %g: relative errors %g and %g", tc.law, k, eLow, eHigh)
			}
		}
	}
}

// TestStirlingErrorAndDeviance hold the two parts of a probability against their definitions.
func TestStirlingErrorAndDeviance(t *testing.T) {
	for n := 1.0; n <= 60; n++ {
		lgamma, _ := math.Lgamma(n + 1)
		want := lgamma - (n*math.Log(n) - n + math.Log(2*math.Pi*n)/2)
		if got := stirlingError(n); math.Abs(got-want) > 1e-13 {
			t.Errorf("stirlingError(%g) = %g, want %g", n, got, want)
		}
	}
	for _, m := range []float64{0.3, 5, 80, 4000} {
		for _, r := range []float64{0.01, 0.5, 0.8, 0.82, 0.95, 1, 1.05, 1.2, 1.23, 3, 100} {
			x := r * m
			if got, want := deviance(x, m), x*math.Log(x/m)+m-x; math.Abs(got-want) > 1e-13*(x+m) || got < 0 {
				t.Errorf("deviance(%g, %g) = %g, want %g", x, m, got, want)
			}
		}
	}
}
