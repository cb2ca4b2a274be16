package counts_test

import (
	"math"
	"testing"

	"limitary/internal/counts"
)

func TestLaneyByHand(t *testing.T) {
	z := []float64{1, 3, -2, -2, 4.5}
	for _, tc := range []struct {
		name   string
		breaks []bool
		sum    float64
		ranges int
	}{
		{"no break", nil, 2 + 5 + 0 + 6.5, 4},
		{"one break", []bool{false, false, true, false, false}, 2 + 0 + 6.5, 3},
		{"a break before the first changes nothing", []bool{true, false, false, false, true}, 2 + 5 + 0, 3},
		{"broken throughout", []bool{false, true, true, true, true}, 0, 0},
	} {
		got, ranges, err := counts.Laney(z, tc.breaks)
		want := 0.0
		if tc.ranges > 0 {
			want = tc.sum / float64(tc.ranges) / 1.1283791670955126 // d2(2) to 16 digits, from memory
		}
		if err != nil || ranges != tc.ranges || math.Abs(got-want) > 1e-14 {
			t.Errorf("%s: %g of %d (%v), want %g of %d", tc.name, got, ranges, err, want, tc.ranges)
		}
	}
	for _, few := range [][]float64{nil, {1.5}} {
		if got, ranges, err := counts.Laney(few, nil); got != 0 || ranges != 0 || err != nil {
			t.Errorf("%v: %g of %d, %v", few, got, ranges, err)
		}
	}
}

// TestLaneyIsOneForBinomialCounts simulates charts of counts that are binomial and nothing else. Counts are discrete, so
// the expectation is not quite 1; it is summed from the definition for the known p.
func TestLaneyIsOneForBinomialCounts(t *testing.T) {
	const size, p, length = 400, 0.2, 50
	law := mustBinomial(t, size, p)
	meanDifference := 0.0 // E|X - Y| = 2·ΣP(X <= k)·P(X > k)
	for k := 0.0; k < size; k++ {
		meanDifference += 2 * counts.AtMost(law, k) * counts.Above(law, k)
	}
	want := meanDifference / law.Sigma() * math.Sqrt(math.Pi) / 2
	r := source(1)
	var known, estimated tally
	for range 6_000 {
		samples := make([]counts.Sample, length)
		z := make([]float64, length)
		for i := range samples {
			samples[i] = counts.Sample{Count: drawBinomial(r, size, p), Inspected: size}
			z[i] = (samples[i].Count - law.Mean()) / law.Sigma()
		}
		factor, _, err := counts.Laney(z, nil)
		if err != nil {
			t.Fatal(err)
		}
		known.add(factor)
		if z, _, err = counts.Standardised(counts.Nonconforming, samples); err != nil {
			t.Fatal(err)
		}
		factor, _, _ = counts.Laney(z, nil)
		estimated.add(factor)
	}
	known.holds(t, "p known", want)
	estimated.holds(t, "p estimated", 1)
}

// TestLaneyFindsMoreVariation: normal counts k times as wide as the law have the factor k.
func TestLaneyFindsMoreVariation(t *testing.T) {
	r := source(2)
	var a tally
	for range 6_000 {
		z := make([]float64, 40)
		for i := range z {
			z[i] = 2.5 * r.NormFloat64()
		}
		factor, _, _ := counts.Laney(z, nil)
		a.add(factor)
	}
	a.holds(t, "two and a half times as wide", 2.5)
}

func TestStandardised(t *testing.T) {
	// Means 0.1 and 2; by hand.
	z, mean, err := counts.Standardised(counts.Nonconforming, []counts.Sample{{Count: 13, Inspected: 100}, {Count: 37, Inspected: 400}})
	if err != nil || mean != 0.1 || math.Abs(z[0]-1) > 1e-14 || math.Abs(z[1]+0.5) > 1e-14 {
		t.Errorf("fractions: %v about %g, %v", z, mean, err)
	}
	z, mean, err = counts.Standardised(counts.Nonconformities, []counts.Sample{{Count: 5, Inspected: 0.5}, {Count: 6, Inspected: 5}})
	if err != nil || mean != 2 || math.Abs(z[0]-4) > 1e-14 || math.Abs(z[1]+4/math.Sqrt(10)) > 1e-14 {
		t.Errorf("rates: %v about %g, %v", z, mean, err)
	}
}
