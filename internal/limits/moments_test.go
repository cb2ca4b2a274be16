package limits_test

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"

	"limitary/internal/limits"
)

// The certified series of the NIST Statistical Reference Datasets are checked by package validation, to 12 digits each.
// Here: exactness by another route, rational arithmetic on the decimals.

func TestStandardDeviationEqualsRationalArithmetic(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for _, offset := range []int64{0, 100, 10_000_000, 100_000_000_000} {
		values, exact := make([]float64, 40), make([]*big.Rat, 40)
		for i := range values {
			exact[i] = big.NewRat(offset*1000+r.Int64N(900), 1000) // three decimals
			values[i], _ = exact[i].Float64()
		}
		sum, n := new(big.Rat), big.NewRat(int64(len(exact)), 1)
		for _, x := range exact {
			sum.Add(sum, x)
		}
		mean, squares := new(big.Rat).Quo(sum, n), new(big.Rat)
		for _, x := range exact {
			d := new(big.Rat).Sub(x, mean)
			squares.Add(squares, d.Mul(d, d))
		}
		variance, _ := squares.Quo(squares, big.NewRat(int64(len(exact)-1), 1)).Float64()
		got, want := limits.StandardDeviation(values), math.Sqrt(variance)
		if math.Abs(got-want) > 1e-14*want {
			t.Errorf("seed 1,2, offset %d: got %.17g, want %.17g", offset, got, want)
		}
	}
}

func TestStandardDeviationOfFewReadings(t *testing.T) {
	for _, c := range []struct {
		name   string
		values []float64
		want   float64
	}{
		{"none", nil, 0},
		{"one", []float64{7}, 0},
		{"equal", []float64{0.1, 0.1, 0.1}, 0},
		{"two differ by root two of it", []float64{0.3, 0.1}, 0.2 / math.Sqrt2},
		{"the largest allowed", []float64{-1e100, 1e100}, 2e100 / math.Sqrt2},
		{"seventeen digits", []float64{0.12345678901234567, 1.1234567890123457}, 1 / math.Sqrt2},
	} {
		t.Run(c.name, func(t *testing.T) {
			if got := limits.StandardDeviation(c.values); math.Abs(got-c.want) > 3e-16*c.want {
				t.Errorf("got %.17g, want %.17g", got, c.want)
			}
		})
	}
}

func TestRangeIsExactInDecimals(t *testing.T) {
	for _, c := range []struct {
		values []float64
		want   float64
	}{
		{[]float64{0.3, 0.1}, 0.2}, {[]float64{0.1, 0.3, 0.2}, 0.2}, {[]float64{5}, 0}, {[]float64{10000000.1, 10000000.3}, 0.2}, {[]float64{-0.1, 0.2}, 0.3},
	} {
		if got := limits.Range(c.values); got != c.want {
			t.Errorf("%v: got %.17g, want exactly %g", c.values, got, c.want)
		}
	}
}

func TestLag1AutocorrelationIsRefusedWhereItIsNotDefined(t *testing.T) {
	for name, values := range map[string][]float64{
		"none": nil, "one": {1}, "all equal": {0.1, 0.1, 0.1}, "not a number": {1, math.NaN(), 2}, "infinite": {1, math.Inf(1)}, "too large": {1, 1e300},
	} {
		if got, err := limits.Lag1Autocorrelation(values); err == nil {
			t.Errorf("%s: got %g, want an error", name, got)
		}
	}
}
