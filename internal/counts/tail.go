package counts

import "math"

// AtMost is P(X <= k), Above is P(X > k). Both are accurate to a relative 1e-12 for sizes and means up to 1e6, and to
// 1e-11 up to the greatest, however small they are down to 1e-290: the smaller tail is always summed and the other one is
// its complement. k need not be whole or possible; for NaN the answer is NaN.
func AtMost(l Law, k float64) float64 {
	atMost, _ := l.split(k)
	return atMost
}

// Above is P(X > k), see AtMost.
func Above(l Law, k float64) float64 {
	_, above := l.split(k)
	return above
}

// beyondAnyCount is where P(X > k) has long become zero in float64 for every Poisson law.
const beyondAnyCount = 1e12

func (l Law) split(k float64) (atMost, above float64) {
	k = math.Floor(k)
	switch {
	case math.IsNaN(k):
		return k, k
	case k < 0:
		return 0, 1
	case k >= l.most() || k >= max(beyondAnyCount, 2*l.mean):
		return 1, 0
	case l.p > l.q: // With p at most one half neither complement is far below one half, so neither cancels.
		above, atMost = l.reflected().split(l.size - k - 1)
		return atMost, above
	case k+1 > l.mean:
		above = l.sumUp(k + 1)
		return 1 - above, above
	}
	atMost = l.sumDown(k)
	return atMost, 1 - atMost
}

// negligible ends a sum: what is left of it is at most the standard deviation times this, relative to the sum.
const negligible = 0x1p-62

// sumUp is P(X >= k) for k of at least the mean, below which terms grow.
func (l Law) sumUp(k float64) float64 {
	sum, term := 1.0, 1.0
	for j, end := k, l.most(); j < end && term > negligible*sum; j++ {
		term *= l.up(j)
		sum += term
	}
	return l.probability(k) * sum
}

// sumDown is P(X <= k) for k of at most the mean.
func (l Law) sumDown(k float64) float64 {
	sum, term := 1.0, 1.0
	for j := k; j > 0 && term > negligible*sum; j-- {
		term *= l.down(j)
		sum += term
	}
	return l.probability(k) * sum
}
