// Package decimal rounds measured values the way a person with pencil and paper does.
//
// A measured value is a decimal text; float64 holds it only nearly. Judging 0.1 + 0.2 against a line at 0.3 must not
// depend on that difference, so every function here takes each float64 for the shortest decimal that reads back as it
// (the text that was measured, for up to 15 significant digits), computes exactly in decimals, rounds half away from
// zero, and returns the float64 nearest to the rounded decimal. Two rounded values of the same number of places are
// equal as float64 exactly where they are equal on paper, up to 15 significant digits.
//
// Everywhere places is the number of decimals, 0 to PlacesMax; Unrounded asks for the float64 nearest to the exact
// result. Arguments must be finite. No result is a negative zero; one too large for float64 is infinite.
package decimal

import (
	"math"
	"math/big"
	"strconv"
)

const (
	// Unrounded, given as places, keeps the exact result.
	Unrounded = -1
	// PlacesMax is the largest number of decimals: float64 carries no more than 15 significant digits of any decimal.
	PlacesMax = 15
)

var pow10 = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

// Round gives x rounded half away from zero to places decimals.
func Round(x float64, places int) float64 {
	if places < 0 {
		return x + 0 // a zero without sign
	}
	if r, ok := quick(x, math.Abs(x)*ulp, places); ok {
		return r
	}
	if w, scale, ok := wholeOf(x, 0); ok {
		if r, ok := wholeRatio(w, scale, 1, places); ok {
			return r
		}
	}
	return exact(x).round(places)
}

// Mean gives the arithmetic mean of xs: the exact sum of the decimals over their number. It needs at least one value.
func Mean(xs []float64, places int) float64 {
	if len(xs) == 1 {
		return Round(xs[0], places)
	}
	sum, size := 0.0, 0.0
	for _, x := range xs {
		sum += x
		size += math.Abs(x)
	}
	n := float64(len(xs))
	if r, ok := quick(sum/n, size*ulp*2, places); ok {
		return r
	}
	if w, scale, ok := wholeSum(xs); ok {
		if r, ok := wholeRatio(w, scale, int64(len(xs)), places); ok {
			return r
		}
	}
	total := exact(xs[0])
	for _, x := range xs[1:] {
		total = total.add(exact(x))
	}
	return total.over(int64(len(xs)), places)
}

// Difference gives a - b.
func Difference(a, b float64, places int) float64 {
	if r, ok := quick(a-b, (math.Abs(a)+math.Abs(b))*ulp, places); ok {
		return r
	}
	terms := [2]float64{a, -b}
	if w, scale, ok := wholeSum(terms[:]); ok {
		if r, ok := wholeRatio(w, scale, 1, places); ok {
			return r
		}
	}
	return exact(a).add(exact(-b)).round(places)
}

// Line gives centre + z·sigma, each factor in its shortest form.
func Line(centre, z, sigma float64, places int) float64 {
	if r, ok := quick(centre+z*sigma, (math.Abs(centre)+2*math.Abs(z*sigma))*ulp, places); ok {
		return r
	}
	if w, scale, ok := wholeLine(centre, z, sigma); ok {
		if r, ok := wholeRatio(w, scale, 1, places); ok {
			return r
		}
	}
	return exact(centre).add(exact(z).times(exact(sigma))).round(places)
}

// Places gives the number of decimals in the shortest form of x: 2 for 0.25, 0 for 100.
func Places(x float64) int {
	s := exact(x).trim().scale
	return max(s, 0)
}

// ulp is a relative bound on one rounding of float64, with the shortest form's own half step included.
const ulp = 0x1p-51

// quick rounds m to places where m's absolute error, err, cannot change the outcome; ok is false where it could, near
// a half and for magnitudes whose scaled value is no exact integer.
func quick(m, err float64, places int) (rounded float64, ok bool) {
	if places < 0 || places >= len(pow10) {
		return 0, false
	}
	p := pow10[places]
	y := math.Abs(m * p)
	if !(y < 1<<50) {
		return 0, false
	}
	whole := math.Floor(y)
	if math.Abs(y-whole-0.5) <= err*p+y*ulp {
		return 0, false
	}
	if y-whole > 0.5 {
		whole++
	}
	if whole == 0 {
		return 0, true // never a negative zero: it would print as -0
	}
	// Both operands are exact, so the quotient is the float64 nearest to the decimal.
	return math.Copysign(whole/p, m), true
}

// number is coef · 10^-scale.
type number struct {
	coef  *big.Int
	scale int
}

// exact reads the shortest decimal form of x.
func exact(x float64) number {
	text := strconv.AppendFloat(make([]byte, 0, 32), x, 'e', -1, 64)
	digits := make([]byte, 0, 24)
	decimals, seenPoint := 0, false
	for i, c := range text {
		switch {
		case c == '.':
			seenPoint = true
		case c == 'e':
			exponent, _ := strconv.Atoi(string(text[i+1:]))
			coef, _ := new(big.Int).SetString(string(digits), 10)
			return number{coef, decimals - exponent}
		default:
			digits = append(digits, c)
			if seenPoint {
				decimals++
			}
		}
	}
	panic("decimal: not a finite number: " + string(text))
}

func tenTo(n int) *big.Int { return new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(n)), nil) }

// at gives the coefficient of a at a scale no smaller than its own.
func (a number) at(scale int) *big.Int {
	if scale == a.scale {
		return a.coef
	}
	return new(big.Int).Mul(a.coef, tenTo(scale-a.scale))
}

func (a number) add(b number) number {
	scale := max(a.scale, b.scale)
	return number{new(big.Int).Add(a.at(scale), b.at(scale)), scale}
}

func (a number) times(b number) number {
	return number{new(big.Int).Mul(a.coef, b.coef), a.scale + b.scale}
}

// trim drops trailing zeros.
func (a number) trim() number {
	ten, rem := big.NewInt(10), new(big.Int)
	for a.coef.Sign() != 0 {
		q, r := new(big.Int).QuoRem(a.coef, ten, rem)
		if r.Sign() != 0 {
			return a
		}
		a = number{q, a.scale - 1}
	}
	return number{a.coef, 0}
}

func (a number) round(places int) float64 { return a.over(1, places) }

// over gives a/n rounded to places, or the nearest float64 to a/n.
func (a number) over(n int64, places int) float64 {
	if places < 0 {
		r := new(big.Rat).SetFrac(a.at(max(a.scale, 0)), new(big.Int).Mul(tenTo(max(a.scale, 0)), big.NewInt(n)))
		f, _ := r.Float64()
		return f + 0 // a zero without sign
	}
	num, den := a.coef, big.NewInt(n)
	if a.scale > places {
		den = new(big.Int).Mul(den, tenTo(a.scale-places))
	} else {
		num = new(big.Int).Mul(num, tenTo(places-a.scale))
	}
	q := halfAway(num, den)
	f, _ := new(big.Rat).SetFrac(q, tenTo(places)).Float64()
	return f
}

// halfAway gives num/den, den > 0, rounded to an integer, half away from zero.
func halfAway(num, den *big.Int) *big.Int {
	twice := new(big.Int).Lsh(new(big.Int).Abs(num), 1)
	q := twice.Add(twice, den)
	q.Quo(q, new(big.Int).Lsh(den, 1))
	if num.Sign() < 0 {
		q.Neg(q)
	}
	return q
}
