package counts

import "math"

const (
	// TailMin and TailMax bound the tail probability of a line.
	TailMin = 1e-12
	TailMax = 0.5
)

// CheckTail refuses a tail that is no number from TailMin to TailMax.
func CheckTail(tail float64) error { return checkRange("tail", tail, TailMin, TailMax) }

// Upper gives the line U above which a count lies with probability of at most tail: the least whole number U with
// P(X > U) <= tail. The realised tail is P(X > U), never more than tail. Not ok means that there is no line, because no
// count can lie beyond: U is the size of a binomial law. A tail that CheckTail refuses gives NaN, NaN and not ok.
//
// A law that allows no count but 0 has the line 0, and every other count lies beyond it.
func Upper(l Law, tail float64) (u, realised float64, ok bool) {
	if CheckTail(tail) != nil {
		return math.NaN(), math.NaN(), false
	}
	last := l.most() - 1
	k := min(max(math.Floor(l.guess(math.Erfcinv(2*tail)*math.Sqrt2)+1), 0), last)
	above := Above(l, k)
	for step := 1.0; l.exceeds(above, tail, k, true); step *= 2 {
		if k == last {
			return l.size, 0, false
		}
		k = min(k+step, last)
		above = Above(l, k)
	}
	for k > 0 {
		next := above + l.probability(k)
		if l.exceeds(next, tail, k-1, true) {
			break
		}
		k, above = k-1, next
	}
	return k, min(above, tail), true
}

// Lower gives the line L below which a count lies with probability of at most tail: the greatest whole number L with
// P(X < L) <= tail. The realised tail is P(X < L). Not ok means that there is no line, because nothing lies below L = 0.
// A tail that CheckTail refuses gives NaN, NaN and not ok.
func Lower(l Law, tail float64) (lower, realised float64, ok bool) {
	if CheckTail(tail) != nil {
		return math.NaN(), math.NaN(), false
	}
	last := l.most() - 1
	k := min(max(math.Ceil(l.guess(-math.Erfcinv(2*tail)*math.Sqrt2)-2), 0), last)
	atMost := AtMost(l, k)
	for step := 1.0; l.exceeds(atMost, tail, k, false); step *= 2 {
		if k == 0 {
			return 0, 0, false
		}
		k = max(k-step, 0)
		atMost = AtMost(l, k)
	}
	for k < last {
		next := atMost + l.probability(k+1)
		if l.exceeds(next, tail, k+1, false) {
			break
		}
		k, atMost = k+1, next
	}
	return k + 1, min(atMost, tail), true
}

// guess is where the count's quantile for the normal quantile z about lies: the expansion of Cornish and Fisher (from
// memory) up to skewness. Its next term grows without bound as the mean falls to zero.
func (l Law) guess(z float64) float64 {
	return l.mean + z*l.Sigma() + (z*z-1)*(l.q-l.p)/6
}
