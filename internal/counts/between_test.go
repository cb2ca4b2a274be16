package counts_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/counts"
)

// byPairs computes s_b² and Q from all pairs of samples, by Lagrange's identity, without their weighted mean:
// Q = Σ_{i<j} w_i·w_j·(y_i - y_j)²/W and W - Σw²/W = 2·Σ_{i<j} w_i·w_j/W.
func byPairs(family counts.Family, samples []counts.Sample) (variance, q float64) {
	count, inspected := 0.0, 0.0
	for _, s := range samples {
		count += s.Count
		inspected += s.Inspected
	}
	v := count / inspected
	if family == counts.Nonconforming {
		v *= 1 - v
	}
	products := 0.0
	for i, a := range samples {
		for _, b := range samples[:i] {
			d := a.Count/a.Inspected - b.Count/b.Inspected
			q += a.Inspected * b.Inspected * d * d / (v * inspected)
			products += a.Inspected * b.Inspected
		}
	}
	return (q - float64(len(samples)-1)) * v * inspected / (2 * products), q
}

func TestBetweenByPairs(t *testing.T) {
	r := source(4)
	for range 300 {
		for _, family := range []counts.Family{counts.Nonconforming, counts.Nonconformities} {
			samples := make([]counts.Sample, 2+r.IntN(30))
			for i := range samples {
				n := float64(2 + r.IntN(500))
				samples[i] = counts.Sample{Count: 1 + float64(r.IntN(int(n))), Inspected: n}
			}
			got, err := counts.Between(family, samples)
			if err != nil {
				t.Fatal(err)
			}
			variance, q := byPairs(family, samples)
			near(t, "s_b²", got.Untruncated, variance, 1e-9)
			near(t, "Q", got.Q, q, 1e-11)
			near(t, "truncated", got.Variance, max(variance, 0), 1e-9)
		}
	}
}

// beta draws an underlying fraction with a mean and a standard deviation.
func beta(r *rand.Rand, mean, sigma float64) float64 {
	total := mean*(1-mean)/(sigma*sigma) - 1
	return distuv.Beta{Alpha: mean * total, Beta: (1 - mean) * total, Src: r}.Rand()
}

// gamma draws an underlying rate with a mean and a standard deviation.
func gamma(r *rand.Rand, mean, sigma float64) float64 {
	shape := mean * mean / (sigma * sigma)
	return distuv.Gamma{Alpha: shape, Beta: shape / mean, Src: r}.Rand()
}

// TestBetweenIsUnbiased simulates underlying fractions and rates that vary, and that do not.
func TestBetweenIsUnbiased(t *testing.T) {
	const p, rate, sigma = 0.2, 0.5, 0.05
	items, all, beyond := 0.0, 0.0, 0.0
	for _, n := range sizes {
		items += n
	}
	for _, n := range sizes { // The binomial law leaves 1-1/n of the variance of the fraction beyond its own.
		all += n * (1 - n/items)
		beyond += n * (1 - n/items) * (1 - 1/n)
	}
	r := source(5)
	for _, tc := range []struct {
		name   string
		family counts.Family
		count  func(n float64) float64
		want   float64
	}{
		{"Poisson, gamma rates", counts.Nonconformities, func(n float64) float64 { return drawPoisson(r, n*gamma(r, rate, sigma)) }, sigma * sigma},
		{"Poisson, one rate", counts.Nonconformities, func(n float64) float64 { return drawPoisson(r, n*rate) }, 0},
		{"binomial, beta fractions", counts.Nonconforming, func(n float64) float64 { return drawBinomial(r, n, beta(r, p, sigma)) }, sigma * sigma * beyond / all},
		{"binomial, one fraction", counts.Nonconforming, func(n float64) float64 { return drawBinomial(r, n, p) }, 0},
	} {
		var untruncated tally
		for range 12_000 {
			c, err := counts.Between(tc.family, draw(tc.count))
			if err != nil {
				t.Fatal(err)
			}
			if c.Variance < 0 || c.Variance != max(c.Untruncated, 0) {
				t.Fatalf("%+v", c)
			}
			untruncated.add(c.Untruncated)
		}
		untruncated.holds(t, tc.name, tc.want)
	}
}

// TestBetweenOfSizesFarApart: the effective size is twice the smaller one, which must not cancel.
func TestBetweenOfSizesFarApart(t *testing.T) {
	samples := []counts.Sample{{Count: 1e6, Inspected: 1e9}, {Count: 7, Inspected: 1e-9}}
	c, err := counts.Between(counts.Nonconformities, samples)
	if err != nil || !(c.Untruncated > 0) || math.IsInf(c.Untruncated, 0) {
		t.Errorf("%+v, %v", c, err)
	}
}

// component has Q chosen by symmetric samples, so that s_b² = ((Q-1)/n)·v is known by hand.
func component(t *testing.T) counts.Component {
	t.Helper()
	// y = 0.1 and 0.3 of 100: v = 0.16/100, Q = 2·0.01/0.0016 = 12.5, s_b² = 11.5·0.0016 = 0.0184 with Σw - Σw²/Σw = w.
	c, err := counts.Between(counts.Nonconforming, []counts.Sample{{Count: 10, Inspected: 100}, {Count: 30, Inspected: 100}})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "Q", c.Q, 12.5, 1e-13)
	near(t, "s_b²", c.Variance, 0.0184, 1e-13)
	return c
}

func TestSizesTooUnequal(t *testing.T) {
	c := component(t)
	near(t, "factor", c.Factor(100), math.Sqrt(12.5), 1e-13) // 1 + 0.0184/0.0016
	at := func(sizes ...float64) counts.SizeEffect {
		t.Helper()
		var samples []counts.Sample
		for _, n := range sizes {
			samples = append(samples, counts.Sample{Inspected: n})
		}
		effect, err := counts.SizesTooUnequal(c, samples)
		if err != nil {
			t.Fatal(err)
		}
		return effect
	}
	if e := at(100, 100, 100); e.Ratio != 1 || e.TooUnequal {
		t.Errorf("equal sizes: %+v", e)
	}
	e := at(200, 50, 100)
	if e.Smallest != 50 || e.Largest != 200 || !e.TooUnequal {
		t.Errorf("%+v", e)
	}
	near(t, "at 50", e.AtSmallest, math.Sqrt(1+0.0184*50/0.16), 1e-13)
	near(t, "at 200", e.AtLargest, math.Sqrt(1+0.0184*200/0.16), 1e-13)
	near(t, "ratio", e.Ratio, math.Sqrt(24/6.75), 1e-13)
	if e := at(100, 150); e.TooUnequal || e.Ratio < 1.2 { // √(18.25/12.5) = 1.208
		t.Errorf("sizes that differ by half: %+v", e)
	}
	if e := at(100, 162); !e.TooUnequal { // √(19.63/12.5) = 1.253
		t.Errorf("sizes that differ by a little more: %+v", e)
	}
	if e := at(100, 161); e.TooUnequal { // √(19.515/12.5) = 1.2495
		t.Errorf("sizes that differ by a little less: %+v", e)
	}
	if e := at(1e6, 1e8); math.Abs(e.Ratio-10) > 1e-3 { // Where s_b² is all there is, the ratio is that of the roots.
		t.Errorf("large sizes: %+v", e)
	}
	none, err := counts.Between(counts.Nonconforming, []counts.Sample{{Count: 10, Inspected: 100}, {Count: 100, Inspected: 1000}})
	if err != nil {
		t.Fatal(err)
	}
	effect, err := counts.SizesTooUnequal(none, []counts.Sample{{Inspected: 1}, {Inspected: 1e6}})
	if err != nil || none.Untruncated >= 0 || effect.Ratio != 1 || effect.TooUnequal {
		t.Errorf("no component: %+v %+v %v", none, effect, err)
	}
}

// TestFactorRatioMaxMeansWhatItSays: the figures in its comment.
func TestFactorRatioMaxMeansWhatItSays(t *testing.T) {
	wrong := math.Sqrt(counts.FactorRatioMax)
	tail := func(z float64) float64 { return math.Erfc(z/math.Sqrt2) / 2 }
	near(t, "nearer line", 3/wrong, 2.68, 0.002)
	near(t, "farther line", 3*wrong, 3.35, 0.002)
	near(t, "false alarms", tail(3/wrong)/tail(3), 2.7, 0.01)
}
