package counts

import (
	"math"
	"math/big"
)

const (
	// undecided is how near, relatively, a computed tail may come to the one asked for before float64 is not trusted to
	// tell which is greater. Computed tails are a hundred times better.
	undecided = 1e-9
	// precisionBits, negligibleExponent and tiedBits belong together: weights are left out below 2^-280 of the greatest,
	// rounding is 2^-320 a step for at most 2^22 steps, tails are at least 2^-40; two figures that agree in 180 bits are
	// therefore taken to be equal.
	precisionBits      = 320
	negligibleExponent = -280
	tiedBits           = 180
)

// exceeds tells whether P(X > k), or P(X <= k) where not upper, is greater than a tail. The computed value decides
// unless the two are as good as equal, as for 10 tosses of a coin and the tail 11/1024: equal does not exceed.
func (l Law) exceeds(computed, tail, k float64, upper bool) bool {
	if math.Abs(computed-tail) > undecided*tail {
		return computed > tail
	}
	return l.exceedsExtended(tail, k, upper)
}

// exceedsExtended compares in extended precision. It needs no logarithm: the counts are weighted by their probabilities
// relative to the mode's, and the weights of the tail are compared with tail times all weights.
func (l Law) exceedsExtended(tail, k float64, upper bool) bool {
	atMost, above := l.weigh(k)
	side := atMost
	if upper {
		side = above
	}
	asked := extended(0).Add(atMost, above)
	asked.Mul(asked, extended(tail))
	difference := extended(0).Sub(side, asked)
	return difference.Sign() > 0 && difference.MantExp(nil) > asked.MantExp(nil)-tiedBits
}

// weigh sums P(X=j)/P(X=mode) over j <= k and over j > k, from the mode outward.
func (l Law) weigh(k float64) (atMost, above *big.Float) {
	atMost, above = extended(0), extended(0)
	add := func(j float64, weight *big.Float) bool {
		if j > k {
			above.Add(above, weight)
		} else {
			atMost.Add(atMost, weight)
		}
		return weight.Sign() > 0 && weight.MantExp(nil) > negligibleExponent
	}
	success, failure := extended(l.mean), extended(1)
	if l.size > 0 {
		success, failure = extended(l.p), extended(l.q)
		if l.p < l.q {
			failure.Sub(extended(1), success)
		}
	}
	mode := min(math.Floor(l.mean), l.most())
	weight := extended(1)
	add(mode, weight)
	for j := mode; j < l.most(); j++ {
		weight.Mul(weight, extended(l.ways(j))).Mul(weight, success)
		weight.Quo(weight, extended(j+1)).Quo(weight, failure)
		if !add(j+1, weight) {
			break
		}
	}
	weight = extended(1)
	for j := mode; j > 0; j-- {
		weight.Mul(weight, extended(j)).Mul(weight, failure)
		weight.Quo(weight, extended(l.ways(j-1))).Quo(weight, success)
		if !add(j-1, weight) {
			break
		}
	}
	return atMost, above
}

// ways is in how many ways a count of j can grow by one: the items left, or 1 for Poisson, whose mean holds them.
func (l Law) ways(j float64) float64 {
	if l.size > 0 {
		return l.size - j
	}
	return 1
}

func extended(x float64) *big.Float { return new(big.Float).SetPrec(precisionBits).SetFloat64(x) }
