package limits

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// Φ and 1-Φ of the standard normal distribution, and its density.
func normalBelow(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }
func normalAbove(x float64) float64 { return 0.5 * math.Erfc(x/math.Sqrt2) }
func normalDensity(x float64) float64 {
	return math.Exp(-x*x/2) / math.Sqrt(2*math.Pi)
}

const (
	// normalReach is where the integrands below, at most 100 times a normal tail, have fallen under 1e-18.
	normalReach = 9.5
	// meanStep and belowStep are the steps of the trapezoid rule over the whole line, where its error for analytic
	// integrands falls exponentially with 1/step; at twice these steps it is still under 1e-13.
	meanStep, belowStep = 1. / 16, 1. / 8
	// rangeReach bounds the range of 100 values: beyond it lies less than 1e-25.
	rangeReach = 18.
	// panelPoints is the order of each Gauss-Legendre panel over the range; 32 and 64 points agree to 1e-14.
	panelPoints = 40
)

// rangeMean gives d2 = ∫ 1 - Φ(x)ⁿ - (1-Φ(x))ⁿ dx over the whole line (Tippett 1925, from memory). The integrand is
// even, and 1 - Φⁿ is taken as -expm1(n·log1p(-(1-Φ))), which keeps the digits of the tail.
func rangeMean(n int) float64 {
	integrand := func(x float64) float64 {
		above := normalAbove(x)
		return -math.Expm1(float64(n)*math.Log1p(-above)) - math.Pow(above, float64(n))
	}
	sum := integrand(0) / 2
	for x := meanStep; x <= normalReach; x += meanStep {
		sum += integrand(x)
	}
	return 2 * sum * meanStep
}

// rangeBelow gives P(R <= r) = n ∫ φ(x)·[Φ(x+r)-Φ(x)]ⁿ⁻¹ dx for the range R of n standard normal values.
func rangeBelow(r float64, n int) float64 {
	sum := 0.0
	for x := -normalReach; x <= normalReach; x += belowStep {
		var inside float64
		if x > 0 { // the difference of two upper tails keeps its digits there
			inside = normalAbove(x) - normalAbove(x+r)
		} else {
			inside = normalBelow(x+r) - normalBelow(x)
		}
		sum += normalDensity(x) * math.Pow(inside, float64(n-1))
	}
	return float64(n) * sum * belowStep
}

// rangeAbove gives P(R > r) = n ∫ φ(x)·[(1-Φ(x))ⁿ⁻¹ - (Φ(x+r)-Φ(x))ⁿ⁻¹] dx, which keeps the digits of the tail where
// 1 - rangeBelow would leave the rounding error of 1 to be multiplied by (r-d2).
func rangeAbove(r float64, n int) float64 {
	sum, power := 0.0, float64(n-1)
	for x := -normalReach; x <= normalReach; x += belowStep {
		above := normalAbove(x)
		missed := -math.Expm1(power * math.Log1p(-normalAbove(x+r)/above))
		sum += normalDensity(x) * math.Pow(above, power) * missed
	}
	return float64(n) * sum * belowStep
}

// rangeSigma gives d3 from the distribution function G of the range,
//
//	d3² = 2 ∫₀^d2 (d2-r)·G(r) dr + 2 ∫_d2^∞ (r-d2)·(1-G(r)) dr,
//
// a sum of positive terms: E(R²) - d2² would lose two digits at n = 100.
func rangeSigma(n int, d2 float64) float64 {
	below := func(r float64) float64 { return (d2 - r) * rangeBelow(r, n) }
	above := func(r float64) float64 { return (r - d2) * rangeAbove(r, n) }
	low := quad.Fixed(below, 0, d2, panelPoints, quad.Legendre{}, 0)
	high := quad.Fixed(above, d2, rangeReach, panelPoints, quad.Legendre{}, 0)
	return math.Sqrt(2 * (low + high))
}
