package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/diagnostics"
)

// A² has a second form, the integral n·∫(F_n - F)²/(F(1-F)) dF over the steps of the empirical distribution F_n, which is
// worked out here by the midpoint rule over the probabilities.
func TestNormalityIsTheIntegralOfItsDefinition(t *testing.T) {
	const seed = 20261203
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for range 20 {
		values := make([]float64, 8+r.IntN(40))
		for i := range values {
			values[i] = math.Round(1000*(50+3*r.NormFloat64())) / 1000
		}
		squareA, adjusted, err := diagnostics.Normality(values)
		if err != nil {
			t.Fatal(err)
		}
		if want := integralOfDefinition(values); math.Abs(squareA-want) > 2e-4*(1+want) {
			t.Errorf("%v: A² got %.6f, want %.6f", values, squareA, want)
		}
		n := float64(len(values))
		if want := squareA * (1 + 0.75/n + 2.25/(n*n)); math.Abs(adjusted-want) > 1e-14*want {
			t.Errorf("A*²: got %v, want %v", adjusted, want)
		}
		for i := range values { // neither unit nor origin matters
			values[i] = 1000*values[i] - 7e4
		}
		if again, _, _ := diagnostics.Normality(values); math.Abs(again-squareA) > 1e-9 {
			t.Errorf("A² of the same values in another unit: got %v, want %v", again, squareA)
		}
	}
}

func integralOfDefinition(values []float64) float64 {
	n, mean, squares := float64(len(values)), 0.0, 0.0
	for _, x := range values {
		mean += x / n
	}
	for _, x := range values {
		squares += (x - mean) * (x - mean)
	}
	var u []float64
	for _, x := range values {
		u = append(u, math.Erfc(-(x-mean)/math.Sqrt(2*squares/(n-1)))/2)
	}
	slices.Sort(u)
	const steps = 200_000
	sum := 0.0
	for below, i := 0, 0; i < steps; i++ {
		p := (float64(i) + 0.5) / steps
		for below < len(u) && u[below] <= p {
			below++
		}
		d := float64(below)/n - p
		sum += d * d / (p * (1 - p)) / steps
	}
	return n * sum
}

func TestNormalityRefusesWhatHasNoShape(t *testing.T) {
	for name, values := range map[string][]float64{
		"none": nil, "seven": {1, 2, 3, 4, 5, 6, 7}, "all equal": {2, 2, 2, 2, 2, 2, 2, 2},
		"not a number": {1, 2, 3, 4, 5, 6, 7, math.NaN()}, "infinite": {1, 2, 3, 4, 5, 6, 7, math.Inf(-1)},
	} {
		if a, _, err := diagnostics.Normality(values); err == nil {
			t.Errorf("%s: got %v, want an error", name, a)
		}
	}
}
