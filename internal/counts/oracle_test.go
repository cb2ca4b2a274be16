package counts_test

import (
	"fmt"
	"math"
	"math/big"
	"testing"

	"limitary/internal/counts"
)

// oracleBits is the precision of the sums from the definition that everything here is held against.
const oracleBits = 400

func exact(x float64) *big.Float { return new(big.Float).SetPrec(oracleBits).SetFloat64(x) }

func zero() *big.Float { return exact(0) }

// oracle holds P(X <= k) and P(X > k) of a law for k = 0, 1, ..., each summed from its small end.
type oracle struct {
	name          string
	law           counts.Law
	most          float64 // greatest count that can occur
	mirrored      bool    // the table is that of most - X
	atMost, above []*big.Float
}

func mustBinomial(tb testing.TB, size, p float64) counts.Law {
	tb.Helper()
	l, err := counts.Binomial(size, p)
	if err != nil {
		tb.Fatal(err)
	}
	return l
}

func mustPoisson(tb testing.TB, mean float64) counts.Law {
	tb.Helper()
	l, err := counts.Poisson(mean)
	if err != nil {
		tb.Fatal(err)
	}
	return l
}

// poissonOracle multiplies from e^-mean upward.
func poissonOracle(tb testing.TB, mean float64) *oracle {
	o := &oracle{name: fmt.Sprintf("Poisson(%v)", mean), law: mustPoisson(tb, mean), most: math.Inf(1)}
	m := exact(mean)
	o.sum(bigExp(exact(-mean)), mean, func(term *big.Float, j float64) {
		term.Mul(term, m).Quo(term, exact(j+1))
	})
	return o
}

// binomialOracle multiplies from (1-p)^size upward, or from p^size downward where that is nearer the mean.
func binomialOracle(tb testing.TB, size, p float64) *oracle {
	o := &oracle{name: fmt.Sprintf("Binomial(%v, %v)", size, p), law: mustBinomial(tb, size, p), most: size, mirrored: p > 0.5}
	success, failure := exact(p), exact(1)
	failure.Sub(failure, success)
	mean := size * p
	if o.mirrored {
		success, failure, mean = failure, success, size-mean
	}
	odds := zero().Quo(success, failure)
	o.sum(bigPower(failure, int(size)), mean, func(term *big.Float, j float64) {
		term.Mul(term, exact(size-j)).Mul(term, odds).Quo(term, exact(j+1))
	})
	return o
}

// sum tables all counts up to where nothing above 2^-300 is left. Tails above are added from there down.
func (o *oracle) sum(first *big.Float, mean float64, next func(term *big.Float, j float64)) {
	terms := []*big.Float{first}
	for j := 0.0; j < o.most; j++ {
		term := zero().Set(terms[int(j)])
		if next(term, j); j > mean && term.MantExp(nil) < -330 {
			break
		}
		terms = append(terms, term)
	}
	o.atMost, o.above = make([]*big.Float, len(terms)), make([]*big.Float, len(terms))
	below, above := zero(), zero()
	for j := range terms {
		o.atMost[j] = zero().Set(below.Add(below, terms[j]))
	}
	for j := len(terms) - 1; j >= 0; j-- {
		o.above[j] = zero().Set(above)
		above.Add(above, terms[j])
	}
}

// tails is P(X <= k) and P(X > k).
func (o *oracle) tails(k float64) (atMost, above *big.Float) {
	if o.mirrored { // X <= k says that most-X is above most-k-1.
		above, atMost = o.table(o.most - k - 1)
		return atMost, above
	}
	return o.table(k)
}

func (o *oracle) table(k float64) (atMost, above *big.Float) {
	switch {
	case k < 0:
		return zero(), exact(1)
	case int(k) >= len(o.atMost):
		return exact(1), zero()
	}
	return o.atMost[int(k)], o.above[int(k)]
}

// bigPower is x^n by squaring.
func bigPower(x *big.Float, n int) *big.Float {
	result, square := exact(1), zero().Set(x)
	for ; n > 0; n >>= 1 {
		if n&1 == 1 {
			result.Mul(result, square)
		}
		square.Mul(square, square)
	}
	return result
}

// bigExp halves its argument until Taylor's series is short, then squares back.
func bigExp(x *big.Float) *big.Float {
	halvings := max(0, x.MantExp(nil)+8)
	y := zero().SetMantExp(x, -halvings)
	sum, term := exact(1), exact(1)
	for i := 1.0; term.Sign() != 0 && term.MantExp(nil) > -oracleBits-20; i++ {
		term.Mul(term, y).Quo(term, exact(i))
		sum.Add(sum, term)
	}
	return bigPower(sum, 1<<halvings)
}

// relative is got/want - 1.
func relative(got float64, want *big.Float) float64 {
	if want.Sign() == 0 {
		return got
	}
	d := zero().Sub(exact(got), want)
	f, _ := d.Quo(d, want).Float64()
	return f
}

func TestOracleIsWhole(t *testing.T) {
	for _, o := range []*oracle{
		poissonOracle(t, 0.05), poissonOracle(t, 500), binomialOracle(t, 1, 0.3), binomialOracle(t, 1e5, 0.005),
		binomialOracle(t, 1e5, 0.995), binomialOracle(t, 1000, 0.5),
	} {
		last := len(o.atMost) - 1
		if e := relative(1, o.atMost[last]); math.Abs(e) > 1e-80 {
			t.Errorf("%s: all probabilities add up to 1%+g", o.name, -e)
		}
		for _, k := range []int{0, last / 2, last} {
			if e := relative(1, zero().Add(o.atMost[k], o.above[k])); math.Abs(e) > 1e-80 {
				t.Errorf("%s: both tails at %d add up to 1%+g", o.name, k, -e)
			}
		}
	}
	// e to 50 digits (from memory).
	e, _ := new(big.Float).SetPrec(oracleBits).SetString("2.71828182845904523536028747135266249775724709369995")
	if d := zero().Sub(bigExp(exact(1)), e); d.MantExp(nil) > -160 {
		t.Errorf("e is off by %g", d)
	}
}
