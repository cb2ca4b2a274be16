package diagnostics

import (
	"math"
	"strconv"
)

// grid is the decimal lattice that readings lie on.
type grid struct {
	// step is the greatest common step of the readings' differences, in their unit: 0 where all are equal, or where
	// readings are written with so many digits over so wide a range that no step can be told.
	step float64
	// whole are the readings in steps above the lowest; nil where step is 0.
	whole []int64
}

// wholeMax bounds whole numbers of the finest decimal: differences of two still fit.
const wholeMax = int64(1) << 61

// gridOf finds the grid. Readings are taken for the shortest decimals that read back as they are, so that the step of
// 0.1, 0.2 and 0.3 is 0.1 exactly.
func gridOf(readings []float64) grid {
	if len(readings) < 2 {
		return grid{}
	}
	digits, exponents := make([]int64, len(readings)), make([]int, len(readings))
	finest := math.MaxInt
	for i, x := range readings {
		digits[i], exponents[i] = shortest(x)
		if digits[i] != 0 {
			finest = min(finest, exponents[i])
		}
	}
	lowest := int64(math.MaxInt64)
	for i := range digits {
		w, ok := scaled(digits[i], exponents[i]-finest)
		if !ok {
			return grid{}
		}
		digits[i], lowest = w, min(lowest, w)
	}
	common := int64(0)
	for i := range digits {
		digits[i] -= lowest
		common = greatestDivisor(common, digits[i])
	}
	if common == 0 {
		return grid{}
	}
	for i := range digits {
		digits[i] /= common
	}
	step, err := strconv.ParseFloat(strconv.FormatInt(common, 10)+"e"+strconv.Itoa(finest), 64)
	if err != nil || step == 0 {
		return grid{}
	}
	return grid{step, digits}
}

// shortest gives x as digits·10^exponent, the digits without trailing zeros.
func shortest(x float64) (digits int64, exponent int) {
	var buffer [32]byte
	text := strconv.AppendFloat(buffer[:0], x, 'e', -1, 64)
	negative, decimals := false, 0
	for i, c := range text {
		switch {
		case c == '-':
			negative = true
		case c == 'e':
			exponent, _ = strconv.Atoi(string(text[i+1:]))
			exponent -= decimals
			for digits != 0 && digits%10 == 0 {
				digits, exponent = digits/10, exponent+1
			}
			if negative {
				digits = -digits
			}
			return digits, exponent
		case c != '.':
			digits = digits*10 + int64(c-'0')
			if i > 1+btoi(negative) {
				decimals++
			}
		}
	}
	return 0, 0
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// scaled gives digits·10^power, and whether it stays below wholeMax.
func scaled(digits int64, power int) (int64, bool) {
	for ; power > 0 && digits != 0; power-- {
		if digits > wholeMax/10 || digits < -wholeMax/10 {
			return 0, false
		}
		digits *= 10
	}
	return digits, digits < wholeMax && digits > -wholeMax
}

func greatestDivisor(a, b int64) int64 {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}
