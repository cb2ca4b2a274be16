package limits

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/integrate/quad"
)

// Every estimator here is unbiased (but the median moving range, see Estimator) and has a variance V·σ² known from the
// factors. Its effective degrees of freedom ν are those of a standard deviation of ν+1 readings, divided by c4, that has
// the same variance: 1/c4(ν+1)² - 1 = V. This matches two moments of the estimator with those of a multiple of √χ², the
// approximation of Patnaik (1950, Biometrika 37, 78-87; from memory), and is exact for standard deviations.

// freedomOf solves 1/chiMean(ν)² - 1 = variance for ν, which falls as variance grows.
func freedomOf(variance float64) float64 {
	want := 1 / math.Sqrt(1+variance)
	low, high := 0.0, 1/(2*variance)+2
	for range 200 {
		middle := low + (high-low)/2
		if middle == low || middle == high {
			break
		}
		if chiMean(middle) < want {
			low = middle
		} else {
			high = middle
		}
	}
	return low + (high-low)/2
}

// chiVariance is V of a standard deviation with freedom degrees of freedom after division by c4.
func chiVariance(freedom float64) float64 {
	mean := chiMean(freedom)
	return 1/(mean*mean) - 1
}

// rangeInformation is 1/V of one range of n readings divided by d2; sInformation that of one standard deviation divided
// by c4. Independent estimates weighted by it have the smallest variance, and its sum is 1/V of the weighted mean.
func rangeInformation(n int) float64 {
	f := factorsOf(n)
	ratio := f.RangeMean / f.RangeSigma
	return ratio * ratio
}

func sInformation(n int) float64 {
	c4 := factorsOf(n).SMean
	return c4 * c4 / (1 - c4*c4)
}

// movingRangeCovariance is the covariance of two moving ranges that share a value, in σ². Their differences before the
// sign is dropped have variance 2 and correlation -1/2, and for a correlation ρ
//
//	E|XY| = (2/π)·(√(1-ρ²) + ρ·asin ρ)
//
// (Nabeya 1951, from memory); at ρ = -1/2 the covariance is 2·(2/π)·(√3/2 + π/12 - 1). Ranges further apart share
// nothing and are independent. The sum leads to the V of the mean moving range that Cryer and Ryan (1990, J. Qual.
// Technology 22(3), from memory) give, near 0.83/n.
var movingRangeCovariance = 4 / math.Pi * (math.Sqrt(3)/2 + math.Pi/12 - 1)

// meanMovingRangeVariance is V of the mean of ranges moving ranges over d2, where neighbours of them share a value.
func meanMovingRangeVariance(ranges, neighbours int) float64 {
	f := factorsOf(2)
	m, pairs := float64(ranges), float64(neighbours)
	sum := m*f.RangeSigma*f.RangeSigma + 2*pairs*movingRangeCovariance
	return sum / (m * m * f.RangeMean * f.RangeMean)
}

// upperQuartile is the 0.75 quantile of the standard normal distribution: half of |Z| lies below it.
var upperQuartile = math.Sqrt2 * math.Erfinv(0.5)

// medianMovingRangeFactor is the median of |X1 - X2| in sigmas, 0.9539: the difference has variance 2.
var medianMovingRangeFactor = math.Sqrt2 * upperQuartile

// medianMovingRangeVariance is the asymptotic V of the median moving range over its factor: a sample median has variance
// (Σ covariances of the indicators "below the median")/(m·density)² at the median.
func medianMovingRangeVariance(ranges, neighbours int) float64 {
	m, pairs := float64(ranges), float64(neighbours)
	spread := m/4 + 2*pairs*medianIndicatorCovariance()
	slope := 2 * upperQuartile * normalDensity(upperQuartile) // factor times density of the moving range there
	return spread / (m * m * slope * slope)
}

// medianIndicatorCovariance is P(both neighbours below their median) - 1/4 for two moving ranges that share a value,
// ∫ φ(x)·P(|Y| < q given x) dx over |x| < q, where Y given x has mean -x/2 and variance 3/4.
var medianIndicatorCovariance = sync.OnceValue(func() float64 {
	q, deviation := upperQuartile, math.Sqrt(3)/2
	joint := func(x float64) float64 {
		return normalDensity(x) * (normalBelow((q+x/2)/deviation) - normalBelow((-q+x/2)/deviation))
	}
	return quad.Fixed(joint, -q, q, panelPoints, quad.Legendre{}, 0) - 0.25
})
