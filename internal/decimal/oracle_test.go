package decimal_test

import (
	"errors"
	"math/big"
	"strconv"
	"testing"
)

// The oracle reaches each answer by another road than the package: the shortest text of every value becomes a
// rational number, arithmetic is rational, and the rounding is done by big.Rat.FloatString, whose contract is half
// away from zero.

// onPaper reads the shortest decimal text of x as a rational number.
func onPaper(tb testing.TB, x float64) *big.Rat {
	tb.Helper()
	r, ok := new(big.Rat).SetString(strconv.FormatFloat(x, 'g', -1, 64))
	if !ok {
		tb.Fatalf("big.Rat does not read the text of %v", x)
	}
	return r
}

// published gives r as it would be printed with places decimals and read back; places below 0 gives the nearest
// float64.
func published(tb testing.TB, r *big.Rat, places int) float64 {
	tb.Helper()
	if r.Sign() == 0 {
		return 0
	}
	if places < 0 {
		f, _ := r.Float64()
		return f
	}
	f, err := strconv.ParseFloat(r.FloatString(places), 64)
	if err != nil && !errors.Is(err, strconv.ErrRange) { // a result out of range is infinite
		tb.Fatalf("%s: %v", r.FloatString(places), err)
	}
	if f == 0 {
		return 0 // "-0.00" is zero
	}
	return f
}

func paperMean(tb testing.TB, xs []float64) *big.Rat {
	tb.Helper()
	sum := new(big.Rat)
	for _, x := range xs {
		sum.Add(sum, onPaper(tb, x))
	}
	return sum.Quo(sum, new(big.Rat).SetInt64(int64(len(xs))))
}

func paperLine(tb testing.TB, centre, z, sigma float64) *big.Rat {
	tb.Helper()
	r := onPaper(tb, z)
	r.Mul(r, onPaper(tb, sigma))
	return r.Add(r, onPaper(tb, centre))
}
