package data

import (
	"math"
	"math/rand/v2"
)

// Range points are ranges of N normal readings whose standard deviation is Ratio times the process sigma of the limits,
// seen from the centre d2 in units of d3.
type Range struct {
	N             int
	Ratio         float64
	Centre, Sigma float64 // d2 and d3, in process sigmas
}

// Between gives P(lo < Z < hi).
func (d Range) Between(lo, hi float64) float64 {
	a, b := d.readings(lo), d.readings(hi)
	if a >= b {
		return 0
	}
	if a > 2 { // about where half of the ranges lie higher, and the upper tails keep the digits
		return rangeAbove(a, d.N) - rangeAbove(b, d.N)
	}
	return rangeBelow(b, d.N) - rangeBelow(a, d.N)
}

// readings turns a point into a range in standard deviations of the readings.
func (d Range) readings(z float64) float64 { return max(0, (d.Centre+d.Sigma*z)/d.Ratio) }

// Density gives the probability density, by differences: no exact method asks for it.
func (d Range) Density(z float64) float64 {
	const h = 1e-4
	return d.Between(z-h, z+h) / (2 * h)
}

// Support gives where points lie.
func (d Range) Support() (lo, hi float64) {
	return -d.Centre / d.Sigma, (2*normalReach*d.Ratio - d.Centre) / d.Sigma
}

// Draw gives a random point.
func (d Range) Draw(r *rand.Rand) float64 {
	lo, hi := math.Inf(1), math.Inf(-1)
	for range d.N {
		x := r.NormFloat64()
		lo, hi = min(lo, x), max(hi, x)
	}
	return (d.Ratio*(hi-lo) - d.Centre) / d.Sigma
}

const (
	// rangeStep is that of the trapezoid rule over the whole line, whose error for analytic integrands falls exponentially
	// with 1/step; rangeReach is where the integrands have fallen under 1e-18.
	rangeStep, rangeReach = 1. / 12, 9.0
)

func overLine(f func(float64) float64) (sum float64) {
	for x := -rangeReach; x <= rangeReach; x += rangeStep {
		sum += f(x)
	}
	return sum * rangeStep
}

// rangeBelow gives P(R <= w) = n ∫ φ(x)·[Φ(x+w)-Φ(x)]ⁿ⁻¹ dx for the range of n standard normal values. For one pair it
// is the distribution of |X1-X2|.
func rangeBelow(w float64, n int) float64 {
	switch {
	case w <= 0:
		return 0
	case math.IsInf(w, 1):
		return 1
	case n == 2:
		return math.Erf(w / 2)
	}
	unit := Normal{0, 1}
	return float64(n) * overLine(func(x float64) float64 {
		return unit.Density(x) * math.Pow(unit.Between(x, x+w), float64(n-1))
	})
}

// rangeAbove gives P(R > w) = n ∫ φ(x)·[(1-Φ(x))ⁿ⁻¹ - (Φ(x+w)-Φ(x))ⁿ⁻¹] dx, which keeps the digits of the tail.
func rangeAbove(w float64, n int) float64 {
	switch {
	case math.IsInf(w, 1):
		return 0
	case n == 2:
		return math.Erfc(w / 2)
	}
	unit, power := Normal{0, 1}, float64(n-1)
	return float64(n) * overLine(func(x float64) float64 {
		above := below(-x)
		missed := -math.Expm1(power * math.Log1p(-below(-x-w)/above))
		return unit.Density(x) * math.Pow(above, power) * missed
	})
}

// Spread points are standard deviations of N normal readings, seen from c4 in units of √(1-c4²); Ratio as for Range.
type Spread struct {
	N             int
	Ratio         float64
	Centre, Sigma float64
}

// Between gives P(lo < Z < hi): (N-1)·s² over the variance is χ² with N-1 degrees of freedom.
func (d Spread) Between(lo, hi float64) float64 {
	half := float64(d.N-1) / 2
	return gammaBetween(half, half*d.squared(lo), half*d.squared(hi))
}

// squared turns a point into s² in variances of the readings.
func (d Spread) squared(z float64) float64 {
	s := max(0, (d.Centre+d.Sigma*z)/d.Ratio)
	return s * s
}

// Density gives the probability density.
func (d Spread) Density(z float64) float64 {
	s, half := (d.Centre+d.Sigma*z)/d.Ratio, float64(d.N-1)/2
	if s <= 0 {
		return 0
	}
	log, _ := math.Lgamma(half)
	x := half * s * s
	return math.Exp((half-1)*math.Log(x)-x-log) * 2 * half * s * d.Sigma / d.Ratio
}

// Support gives where points lie.
func (d Spread) Support() (lo, hi float64) {
	reach := 1 + normalReach/math.Sqrt(float64(d.N-1))
	return -d.Centre / d.Sigma, (reach*d.Ratio - d.Centre) / d.Sigma
}

// Draw gives a random point.
func (d Spread) Draw(r *rand.Rand) float64 {
	half := float64(d.N-1) / 2
	s := math.Sqrt(gammaDraw(r, half) / half)
	return (d.Ratio*s - d.Centre) / d.Sigma
}
