package rules

import "math/bits"

// words is one feature of up to 128 points in order: before holds the 64 points up to the current word, now the word
// itself, earlier points in lower bits. Windows reach back at most 63 points, so a bit of now never needs more.
type words struct{ before, now uint64 }

// words gives a feature by its position; -1 is a feature no point has.
func (st *State) words(feature int) words {
	if feature < 0 {
		return words{}
	}
	return words{st.past[feature], st.now[feature]}
}

func (w words) and(v words) words { return words{w.before & v.before, w.now & v.now} }
func (w words) or(v words) words  { return words{w.before | v.before, w.now | v.now} }

// back gives at each point the bit of n points earlier, 1 <= n <= 63.
func (w words) back(n int) words {
	n &= 63 // says to the compiler that no shift is longer than the word
	return words{w.before << n, w.now<<n | w.before>>(-n&63)}
}

// run gives a bit for each point of now at which the latest n points all have the feature. Runs of doubling length are
// put together: a run of a+b, b <= a, ends where a run of a ends here and another b points back.
func (w words) run(n int) uint64 {
	for have := 1; have < n; {
		more := min(have, n-have)
		w = w.and(w.back(more))
		have += more
	}
	return w.now
}

// atLeast gives a bit for each point that has the feature while at least k of the latest m have it. The counts of all
// 64 points grow together, as binary digits in separate words.
func (w words) atLeast(k, m int) uint64 {
	if k == m {
		return w.run(m)
	}
	switch {
	case k == 1:
		return w.now
	case k == m-1:
		return w.now &^ w.missTwo(m)
	case w.now == 0:
		return 0
	}
	var digits [7]uint64
	for d := range m {
		carry := w.now
		if d > 0 {
			carry = w.back(d).now
		}
		for i := 0; carry != 0; i++ {
			digits[i], carry = digits[i]^carry, digits[i]&carry
		}
	}
	return w.now & notLess(&digits, k)
}

// missTwo gives a bit where at least two of the latest m lack the feature.
func (w words) missTwo(m int) (two uint64) {
	one := ^w.now
	for d := 1; d < m; d++ {
		lacks := ^w.back(d).now
		two |= one & lacks
		one |= lacks
	}
	return two
}

// notLess gives a bit where the binary number in digits is at least k.
func notLess(digits *[7]uint64, k int) uint64 {
	equal, greater := ^uint64(0), uint64(0)
	for i := len(digits) - 1; i >= 0; i-- {
		if k>>i&1 == 1 {
			equal &= digits[i]
		} else {
			greater |= equal & digits[i]
			equal &^= digits[i]
		}
	}
	return greater | equal
}

// earliest gives how many points back from bit j the earliest point with the feature lies, among the latest m.
func (w words) earliest(j, m int) int {
	window := w.now << (63 - j)
	if j < 63 {
		window |= w.before >> (j + 1)
	}
	if m < 64 {
		window &= ^uint64(0) << (64 - m)
	}
	return 63 - bits.TrailingZeros64(window)
}
