package counts_test

import (
	"math"
	"math/big"
	"testing"

	"limitary/internal/counts"
)

func TestBothTailsAreAccurate(t *testing.T) {
	worst, tried := 0.0, 0
	for o := range laws(t, 5) {
		for j := -1; j <= len(o.above); j++ {
			k := float64(j)
			if o.mirrored {
				k = o.most - k - 1
			}
			atMost, above := o.tails(k)
			for _, e := range []float64{tailError(counts.AtMost(o.law, k), atMost), tailError(counts.Above(o.law, k), above)} {
				if tried++; e > 1e-12 {
					t.Errorf("%s at %g: relative error %g", o.name, k, e)
				}
				worst = max(worst, e)
			}
		}
	}
	t.Logf("worst relative error of %d tails: %.2g", tried, worst)
	if tried < 50_000 {
		t.Errorf("only %d tails were tried", tried)
	}
}

// tailError is relative; where the table ends, which it does at 2^-330, only the magnitude is known.
func tailError(got float64, want *big.Float) float64 {
	if want.Sign() == 0 || want.MantExp(nil) < -285 {
		return got
	}
	return math.Abs(relative(got, want))
}

func TestTailsOutsideTheCounts(t *testing.T) {
	for _, tc := range []struct {
		law           counts.Law
		k             float64
		atMost, above float64
	}{
		{mustPoisson(t, 3), -0.5, 0, 1},
		{mustPoisson(t, 3), math.Inf(-1), 0, 1},
		{mustPoisson(t, 3), math.Inf(1), 1, 0},
		{mustPoisson(t, 1e9), 1e300, 1, 0},
		{mustPoisson(t, 0), 0, 1, 0},
		{mustBinomial(t, 5, 0.5), 5, 1, 0},
		{mustBinomial(t, 5, 0.5), 4.75, 0.96875, 0.03125},
		{mustBinomial(t, 5, 1), 4, 0, 1},
		{mustBinomial(t, 5, 0), 0, 1, 0},
	} {
		atMost, above := counts.AtMost(tc.law, tc.k), counts.Above(tc.law, tc.k)
		if math.Abs(atMost-tc.atMost) > 1e-15 || math.Abs(above-tc.above) > 1e-15 {
			t.Errorf("%+v at %g: %g and %g, want %g and %g", tc.law, tc.k, atMost, above, tc.atMost, tc.above)
		}
	}
	if x := counts.AtMost(mustPoisson(t, 3), math.NaN()); !math.IsNaN(x) {
		t.Errorf("NaN gives %g", x)
	}
}

// TestTailsOfCertainty: where nearly every count is one and the same, the other ones have small tails of their own, by
// closed forms.
func TestTailsOfCertainty(t *testing.T) {
	for _, small := range []float64{0x1p-10, 0x1p-30, 0x1p-50} { // 1-small is exact.
		rare, sure := mustBinomial(t, 2, small), mustBinomial(t, 2, 1-small)
		some := small * (2 - small) // 1-(1-small)²
		near(t, "at least one of a rare two", counts.Above(rare, 0), some, 1e-13)
		near(t, "both of a rare two", counts.Above(rare, 1), small*small, 1e-13)
		near(t, "not both of a sure two", counts.AtMost(sure, 1), some, 1e-13)
		near(t, "none of a sure two", counts.AtMost(sure, 0), small*small, 1e-13)
		near(t, "at least one nonconformity", counts.Above(mustPoisson(t, small), 0), -math.Expm1(-small), 1e-13)
	}
}

func TestMeanAndSigma(t *testing.T) {
	b, p := mustBinomial(t, 400, 0.1), mustPoisson(t, 6.25)
	if b.Mean() != 40 || math.Abs(b.Sigma()-6) > 1e-14 || p.Mean() != 6.25 || p.Sigma() != 2.5 {
		t.Errorf("%g %g %g %g", b.Mean(), b.Sigma(), p.Mean(), p.Sigma())
	}
}
