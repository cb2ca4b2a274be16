package counts_test

import (
	"math"
	"testing"

	"limitary/internal/counts"
)

// TestDispersionOfFairCounts checks the size of both tests, and the mean of Q, which is known exactly: given the total
// count, Poisson counts are multinomial, E(Q) = k-1, and binomial ones hypergeometric, E(Q) = (k-1)·N/(N-1).
func TestDispersionOfFairCounts(t *testing.T) {
	r := source(3)
	items, degrees := 0.0, float64(len(sizes)-1)
	for _, n := range sizes {
		items += n
	}
	for _, tc := range []struct {
		name   string
		family counts.Family
		count  func(n float64) float64
		q      float64
	}{
		{"binomial", counts.Nonconforming, func(n float64) float64 { return drawBinomial(r, n, 0.3) }, degrees * items / (items - 1)},
		{"Poisson", counts.Nonconformities, func(n float64) float64 { return drawPoisson(r, 0.4*n) }, degrees},
	} {
		var q, over, under tally
		for range 10_000 {
			test, err := counts.Dispersion(tc.family, draw(tc.count))
			if err != nil {
				t.Fatal(err)
			}
			if test.DegreesOfFreedom != len(sizes)-1 || math.Abs(test.Over+test.Under-1) > 1e-12 {
				t.Fatalf("%+v", test)
			}
			q.add(test.Q)
			over.add(indicator(test.Over <= 0.05))
			under.add(indicator(test.Under <= 0.05))
		}
		q.holds(t, tc.name+" Q", tc.q)
		over.holds(t, tc.name+" over", 0.05)
		under.holds(t, tc.name+" under", 0.05)
	}
}

func indicator(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

// TestDispersionProbabilities: with an even number 2m of degrees of freedom P(χ² >= Q) is the Poisson probability of
// fewer than m where Q/2 are expected, a relation between two codes that share nothing.
func TestDispersionProbabilities(t *testing.T) {
	for _, m := range []int{1, 2, 5, 12, 60, 500, 5000} {
		for _, spread := range []float64{0, 1, 2, 4, 7, 9} {
			samples := make([]counts.Sample, 2*m+1)
			for i := range samples {
				samples[i] = counts.Sample{Count: 20 + spread*float64(i%2*2-1), Inspected: 1}
			}
			test, err := counts.Dispersion(counts.Nonconformities, samples)
			if err != nil {
				t.Fatal(err)
			}
			law := mustPoisson(t, test.Q/2)
			over, under := counts.AtMost(law, float64(m-1)), counts.Above(law, float64(m-1))
			if math.Abs(test.Over-over) > 1e-9*over+1e-300 || math.Abs(test.Under-under) > 1e-9*under+1e-300 {
				t.Errorf("m %d Q %g: %g %g, want %g %g", m, test.Q, test.Over, test.Under, over, under)
			}
		}
	}
}

// TestDispersionTellsDirections: counts too wide and counts too alike.
func TestDispersionTellsDirections(t *testing.T) {
	wide, alike := make([]counts.Sample, 30), make([]counts.Sample, 30)
	for i := range wide {
		wide[i] = counts.Sample{Count: 25 + 12*float64(i%3-1), Inspected: 100}
		alike[i] = counts.Sample{Count: 25 + float64(i%3-1), Inspected: 100}
	}
	for _, family := range []counts.Family{counts.Nonconforming, counts.Nonconformities} {
		w, _ := counts.Dispersion(family, wide)
		a, _ := counts.Dispersion(family, alike)
		if w.Over > 1e-6 || w.Under < 0.999 || a.Under > 1e-6 || a.Over < 0.999 {
			t.Errorf("family %d: wide %+v, alike %+v", family, w, a)
		}
	}
}
