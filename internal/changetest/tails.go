package changetest

import (
	"math"
	"slices"

	"limitary/internal/limits"
)

// The degrees of freedom of a sigma hold for normal readings. Heavy tails make every estimate of it vary more, and the
// plain F test, which does not know that, then finds changes where there are none (Box 1953, Biometrika 40, from memory).
// The functions here give φ >= 1, the factor by which the variance of the new estimate exceeds the normal one, from the
// new results themselves; ν/φ takes the place of ν, on both sides, since nothing but sigma and ν is known of the old one.
// φ is never taken below 1: that few results look light in the tails is weak evidence that they are.

// tails gives φ for an estimator.
func (d *fresh) tails(name limits.Estimator, sigma float64) float64 {
	phi := 1.0
	switch name {
	case limits.MeanMovingRange:
		phi = d.movingRangeTails()
	case limits.Overall:
		phi = kurtosisTails(d.singles())
	case limits.RBar, limits.SBar, limits.Pooled:
		phi = d.withinTails(name, sigma)
	}
	return math.Max(1, phi) // the median moving range does not hang on the tails
}

// kurtosisTails is Shoemaker's (2003, The American Statistician 57, from memory): with n readings of kurtosis κ a
// standard deviation has 2n/(κ - (n-3)/(n-1)) degrees of freedom, n-1 where κ = 3. The kurtosis is Bonett's (2006,
// Computational Statistics and Data Analysis 50, from memory), about a trimmed mean, because the plain one is far too
// small in few readings of a skewed or heavy-tailed law; its excess then gets the correction for n that makes it unbiased
// in normal readings (the G2 of Joanes and Gill 1998, The Statistician 47, from memory).
func kurtosisTails(xs []float64) float64 {
	n := float64(len(xs))
	if n < 5 {
		return 1
	}
	average, trimmed := mean(xs), trimmedMean(xs, 1/(2*math.Sqrt(n-4)))
	s := deviation(xs)
	if s == 0 {
		return 1
	}
	squares, fourths := 0.0, 0.0
	for _, x := range xs {
		z, trim := (x-average)/s, (x-trimmed)/s
		squares += z * z
		fourths += trim * trim * trim * trim
	}
	excess := n*fourths/(squares*squares) - 3
	kurtosis := 3 + (n-1)/((n-2)*(n-3))*((n+1)*excess+6)
	return (n - 1) * (kurtosis - (n-3)/(n-1)) / (2 * n)
}

// trimmedMean leaves out the share of the values at either end, rounded down.
func trimmedMean(xs []float64, share float64) float64 {
	sorted := slices.Sorted(slices.Values(xs))
	cut := min(int(share*float64(len(xs))), (len(xs)-1)/2)
	return mean(sorted[cut : len(sorted)-cut])
}

// Of a moving range of two normal values: its variance over its mean squared, π/2-1, and the correlation of neighbours,
// which share a value: the covariance that package limits derives (Nabeya 1951, from memory) over the variance 2-4/π.
var (
	movingRangeVariance    = math.Pi/2 - 1
	movingRangeCorrelation = 4 / math.Pi * (math.Sqrt(3)/2 + math.Pi/12 - 1) / (2 - 4/math.Pi)
)

// movingRangeTails sets the observed variance of the mean moving range, that of its terms and of neighbours together,
// against the one under normality. An outlier sits in two neighbours, so heavy tails raise their correlation as well.
func (d *fresh) movingRangeTails() float64 {
	chains := d.movingRanges()
	all := slices.Concat(chains...)
	m := float64(len(all))
	if m < 4 {
		return 1
	}
	average := mean(all)
	squares, products, neighbours := 0.0, 0.0, 0.0
	for _, chain := range chains {
		for i, r := range chain {
			squares += (r - average) * (r - average)
			if i > 0 {
				products += (r - average) * (chain[i-1] - average)
				neighbours++
			}
		}
	}
	if squares == 0 {
		return 1
	}
	share := 2 * neighbours / m
	correlation := movingRangeCorrelation
	if neighbours > 0 {
		correlation = math.Max(correlation, products/neighbours/(squares/m))
	}
	seen := squares / (m - 1) / (average * average) * (1 + share*correlation)
	return seen / (movingRangeVariance * (1 + share*movingRangeCorrelation))
}

// withinTails compares how much the subgroups' own estimates of sigma (or of its square, for the pooled one) differ with
// how much they would under normality. Each squared relative deviation is weighted by its expectation's inverse.
func (d *fresh) withinTails(name limits.Estimator, sigma float64) float64 {
	sum, subgroups := 0.0, 0.0
	for _, readings := range d.readings {
		if n := len(readings); n >= 2 {
			relative, variance := withinDeviation(name, readings, sigma)
			sum += relative * relative / variance
			subgroups++
		}
	}
	if subgroups < 4 {
		return 1
	}
	return sum / (subgroups - 1)
}

// withinDeviation gives a subgroup's relative deviation from sigma and the variance of that under normality.
func withinDeviation(name limits.Estimator, readings []float64, sigma float64) (relative, variance float64) {
	n := len(readings)
	f, _ := limits.Factors(n) // n is 2 to the largest subgroup size, checked
	switch name {
	case limits.RBar:
		ratio := f.RangeSigma / f.RangeMean
		return (slices.Max(readings)-slices.Min(readings))/f.RangeMean/sigma - 1, ratio * ratio
	case limits.SBar:
		return deviation(readings)/f.SMean/sigma - 1, 1/(f.SMean*f.SMean) - 1
	}
	s := deviation(readings) / sigma
	return s*s - 1, 2 / float64(n-1)
}

func deviation(xs []float64) float64 {
	average, squares := mean(xs), 0.0
	for _, x := range xs {
		squares += (x - average) * (x - average)
	}
	return math.Sqrt(squares / float64(len(xs)-1))
}
