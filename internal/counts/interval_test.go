package counts_test

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mathext"

	"limitary/internal/counts"
)

// TestIntervalsByClosedForm: all, none and one have closed forms.
func TestIntervalsByClosedForm(t *testing.T) {
	for _, n := range []float64{1, 2, 10, 1000, 1e6, 1e9} {
		end := math.Exp(math.Log(0.025) / n)      // p^n = 0.025
		start := -math.Expm1(math.Log(0.025) / n) // (1-p)^n = 0.025
		one := -math.Expm1(math.Log(0.975) / n)   // 1-(1-p)^n = 0.025
		in, err := counts.ProportionInterval(0, n)
		if err != nil || in.Lower != 0 {
			t.Errorf("none of %g: %v, %v", n, in, err)
		}
		near(t, "upper end of none", in.Upper, start, 1e-12)
		in, err = counts.ProportionInterval(n, n)
		if err != nil || in.Upper != 1 {
			t.Errorf("all of %g: %v, %v", n, in, err)
		}
		near(t, "lower end of all", in.Lower, end, 1e-12)
		in, _ = counts.ProportionInterval(1, n)
		near(t, "lower end of one", in.Lower, one, 1e-12)
	}
	in, err := counts.RateInterval(0, 4)
	if err != nil || in.Lower != 0 {
		t.Errorf("none: %v, %v", in, err)
	}
	near(t, "upper end of none", in.Upper, -math.Log(0.025)/4, 1e-13)
	in, _ = counts.RateInterval(1, 4)
	near(t, "lower end of one", in.Lower, -math.Log(0.975)/4, 1e-13)
}

// TestIntervalsAgainstTables: values as printed in common tables of both intervals, from memory.
func TestIntervalsAgainstTables(t *testing.T) {
	for _, tc := range []struct{ x, n, lower, upper, half float64 }{
		{0, 10, 0, 0.3085, 5e-5}, {1, 10, 0.0025, 0.4450, 5e-5}, {5, 10, 0.1871, 0.8129, 5e-5}, {10, 100, 0.0490, 0.1762, 5e-5},
	} {
		in, err := counts.ProportionInterval(tc.x, tc.n)
		if err != nil || math.Abs(in.Lower-tc.lower) > tc.half || math.Abs(in.Upper-tc.upper) > tc.half {
			t.Errorf("%g of %g: %v, %v", tc.x, tc.n, in, err)
		}
	}
	for _, tc := range []struct{ x, lower, upper, half float64 }{
		{0, 0, 3.689, 5e-4}, {1, 0.0253, 5.572, 5e-4}, {5, 1.623, 11.668, 5e-4}, {10, 4.795, 18.390, 5e-4}, {100, 81.36, 121.63, 5e-3},
	} {
		in, err := counts.RateInterval(tc.x, 1)
		if err != nil || math.Abs(in.Lower-tc.lower) > tc.half || math.Abs(in.Upper-tc.upper) > tc.half {
			t.Errorf("%g: %v, %v", tc.x, in, err)
		}
	}
}

// TestIntervalsInvertTheirTails puts both ends into gonum's incomplete beta and gamma functions, which the package's own
// sums do not use: P(X >= x) = I_p(x, n-x+1), and P(X >= x) = P(x, mean).
func TestIntervalsInvertTheirTails(t *testing.T) {
	for _, n := range []float64{1, 2, 7, 30, 200, 5000, 1e5} {
		for _, part := range []float64{0.0001, 0.01, 0.1, 0.4, 0.5, 0.77, 0.99} {
			x := math.Ceil(part * n)
			in, err := counts.ProportionInterval(x, n)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "tail at the lower end", mathext.RegIncBeta(x, n-x+1, in.Lower), 0.025, 1e-8)
			if x < n {
				near(t, "tail at the upper end", mathext.RegIncBeta(n-x, x+1, 1-in.Upper), 0.025, 1e-8)
			}
		}
	}
	for x := 1.0; x < 1e5; x = math.Ceil(1.7 * x) {
		in, err := counts.RateInterval(x, 8)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "tail at the lower end", mathext.GammaIncReg(x, 8*in.Lower), 0.025, 1e-10)
		near(t, "tail at the upper end", mathext.GammaIncRegComp(x+1, 8*in.Upper), 0.025, 1e-10)
	}
}

// TestIntervalsCover adds up the probabilities of all counts whose interval holds the true value: never below 95 %, and
// not all of it.
func TestIntervalsCover(t *testing.T) {
	const n = 40.0
	for p := 0.01; p < 1; p += 0.01 {
		covered := coverage(mustBinomial(t, n, p), n, func(x float64) bool {
			in, err := counts.ProportionInterval(x, n)
			return err == nil && in.Lower <= p && p <= in.Upper
		})
		if covered < 0.95-1e-12 || covered > 1-1e-12 && p > 0.05 && p < 0.95 {
			t.Errorf("p %g: %g", p, covered)
		}
	}
	for mean := 0.5; mean < 30; mean += 0.5 {
		covered := coverage(mustPoisson(t, mean), 120, func(x float64) bool {
			in, err := counts.RateInterval(x, 2)
			return err == nil && in.Lower <= mean/2 && mean/2 <= in.Upper
		})
		if covered < 0.95-1e-12 || covered > 0.999 {
			t.Errorf("mean %g: %g", mean, covered)
		}
	}
}

func coverage(law counts.Law, most float64, covers func(x float64) bool) (sum float64) {
	for x := 0.0; x <= most; x++ {
		if covers(x) {
			sum += counts.AtMost(law, x) - counts.AtMost(law, x-1)
		}
	}
	return sum
}

// TestIntervalsMirrorAndOrder: conforming items have the mirrored interval, and totals without end are still finite.
func TestIntervalsMirrorAndOrder(t *testing.T) {
	for _, n := range []float64{1, 13, 1000, 1e8} {
		for _, x := range []float64{0, 1, math.Floor(n / 3), n} {
			a, errA := counts.ProportionInterval(x, n)
			b, errB := counts.ProportionInterval(n-x, n)
			if errA != nil || errB != nil || math.Abs(a.Lower+b.Upper-1) > 1e-14 || math.Abs(a.Upper+b.Lower-1) > 1e-14 {
				t.Errorf("%g of %g: %v and mirrored %v, %v %v", x, n, a, b, errA, errB)
			}
			if !(a.Lower <= x/n && x/n <= a.Upper && a.Lower < a.Upper) {
				t.Errorf("%g of %g: %v", x, n, a)
			}
		}
	}
	// The normal interval is near enough for a total of 1e10: 1.96/√x, and a relative 1/x of shift.
	in, err := counts.RateInterval(1e10, 1)
	if err != nil || math.Abs(1-in.Lower/1e10-1.959964e-5) > 1e-9 || math.Abs(in.Upper/1e10-1-1.959964e-5) > 1e-9 {
		t.Errorf("%v, %v", in, err)
	}
}
