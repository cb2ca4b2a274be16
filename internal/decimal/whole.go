package decimal

import (
	"math"
	"math/bits"
)

// Where quick cannot tell, near a half and where nothing is rounded, values of up to 15 digits are still exact as whole
// numbers of some power of ten, and whole numbers need no big.Int. Every function here gives up, ok false, where a
// number would not fit.

// wholeMax bounds whole numbers to 15 digits: then no other decimal as short reads as the same float64.
const wholeMax = 1e15

// wholeOf gives x as the whole number w of 10^-scale, of the smallest scale from least on.
func wholeOf(x float64, least int) (w int64, scale int, ok bool) {
	for scale = least; scale < len(pow10); scale++ {
		y := math.Round(x * pow10[scale])
		if !(math.Abs(y) < wholeMax) {
			return 0, 0, false
		}
		if y/pow10[scale] == x {
			return int64(y), scale, true
		}
	}
	return 0, 0, false
}

// wholeSum gives the exact sum of xs as a whole number of 10^-scale.
func wholeSum(xs []float64) (sum int64, scale int, ok bool) {
	for i := 0; i < len(xs); i++ {
		w, finer, ok := wholeOf(xs[i], scale)
		if !ok || len(xs) > 1000 { // a thousand of 15 digits fit an int64
			return 0, 0, false
		}
		if finer > scale { // those before were counted too coarsely
			sum, scale, i = 0, finer, -1
			continue
		}
		sum += w
	}
	return sum, scale, true
}

// wholeRatio gives sum·10^-scale / n, n > 0, rounded to places or nearest to it.
func wholeRatio(sum int64, scale int, n int64, places int) (rounded float64, ok bool) {
	size := uint64(max(sum, -sum))
	if places < 0 {
		over, den := bits.Mul64(uint64(n), uint64(pow10[scale]))
		if over != 0 || den > 1<<53 || size > 1<<53 {
			return 0, false
		}
		return float64(sum) / float64(den), true // both exact, so the quotient is the nearest
	}
	num, den := size, uint64(n)
	var overNum, overDen uint64
	if scale > places {
		overDen, den = bits.Mul64(den, uint64(pow10[scale-places]))
	} else {
		overNum, num = bits.Mul64(num, uint64(pow10[places-scale]))
	}
	if overNum|overDen != 0 || num > 1<<61 || den > 1<<61 {
		return 0, false
	}
	whole := (2*num + den) / (2 * den) // half away from zero
	if whole > 1<<53 {
		return 0, false
	}
	if whole == 0 {
		return 0, true
	}
	return math.Copysign(float64(whole)/pow10[places], float64(sum)), true
}

// wholeLine gives centre + z·sigma exactly as a whole number of 10^-scale.
func wholeLine(centre, z, sigma float64) (sum int64, scale int, ok bool) {
	c, cScale, ok1 := wholeOf(centre, 0)
	a, aScale, ok2 := wholeOf(z, 0)
	b, bScale, ok3 := wholeOf(sigma, 0)
	scale = aScale + bScale
	if !ok1 || !ok2 || !ok3 || max(scale, cScale) >= len(pow10) {
		return 0, 0, false
	}
	high, product := bits.Mul64(uint64(max(a, -a)), uint64(max(b, -b)))
	if high != 0 || product > wholeSumMax {
		return 0, 0, false
	}
	sum = int64(product)
	if (a < 0) != (b < 0) {
		sum = -sum
	}
	if cScale > scale {
		sum, scale, ok = shifted(sum, cScale-scale), cScale, fits(sum, cScale-scale)
	} else {
		c, ok = shifted(c, scale-cScale), fits(c, scale-cScale)
	}
	return sum + c, scale, ok
}

// wholeSumMax leaves room for one addition in an int64.
const wholeSumMax = 1 << 61

// shifted gives w·10^n; fits says whether that is exact.
func shifted(w int64, n int) int64 { return w * int64(pow10[n]) }

func fits(w int64, n int) bool {
	high, low := bits.Mul64(uint64(max(w, -w)), uint64(pow10[n]))
	return high == 0 && low <= wholeSumMax
}
