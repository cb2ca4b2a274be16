package counts

import "math"

// Confidence is the level of every interval.
const Confidence = 0.95

// outside is the probability on each side of an interval.
const outside = (1 - Confidence) / 2

// TotalMax bounds the totals that an interval is computed from.
const TotalMax = 1e12

// Interval is a two-sided confidence interval, unrounded.
type Interval struct{ Lower, Upper float64 }

// ProportionInterval is the exact interval for the fraction nonconforming, given how many of all items inspected were:
// both whole, inspected from 1 to TotalMax (Clopper and Pearson 1934, from memory). At its lower end P(X >= nonconforming)
// is 0.025, at its upper end P(X <= nonconforming) is; it reaches 0 where there is none, and 1 where there is no other.
// It rests on one fraction for all samples; where counts vary more than the binomial law says it is too narrow.
func ProportionInterval(nonconforming, inspected float64) (in Interval, err error) {
	if err := checkWhole("inspected", inspected, 1, TotalMax); err != nil {
		return in, err
	}
	if err := checkWhole("nonconforming", nonconforming, 0, inspected); err != nil {
		return in, err
	}
	x, n := nonconforming, inspected
	in.Upper = 1
	if x > 0 {
		in.Lower = solve(true, x/n, 1, func(p float64) (tail, slope float64) {
			l := binomial(n, p)
			return Above(l, x-1), x / p * l.probability(x)
		})
	}
	if x < n {
		in.Upper = solve(false, (x+1)/n, 1, func(p float64) (tail, slope float64) {
			l := binomial(n, p)
			return AtMost(l, x), -(n - x) / l.q * l.probability(x)
		})
	}
	return in, nil
}

// RateInterval is the exact interval for the nonconformities to be expected in one unit inspected, given how many were
// found, whole and at most TotalMax, in all units inspected, from InspectedMin to 1e15 (Garwood 1936, from memory). At
// its lower end P(X >= nonconformities) is 0.025, at its upper end P(X <= nonconformities) is; it reaches 0 where none was
// found. It rests on one rate for all samples, as ProportionInterval does.
func RateInterval(nonconformities, inspected float64) (in Interval, err error) {
	if err := checkRange("inspected", inspected, InspectedMin, 1e15); err != nil {
		return in, err
	}
	if err := checkWhole("nonconformities", nonconformities, 0, TotalMax); err != nil {
		return in, err
	}
	x := nonconformities
	if x > 0 {
		in.Lower = solve(true, x, math.Inf(1), func(mean float64) (tail, slope float64) {
			l := poisson(mean)
			return Above(l, x-1), l.probability(x - 1)
		}) / inspected
	}
	in.Upper = solve(false, x+1, math.Inf(1), func(mean float64) (tail, slope float64) {
		l := poisson(mean)
		return AtMost(l, x), -l.probability(x)
	}) / inspected
	return in, nil
}

// stepsMax is far more than solve takes: Newton's steps double the digits, halvings settle the rest.
const stepsMax = 200

// solve finds where a tail that rises, or falls, from 0 to most is outside, by Newton's steps on its logarithm within a
// bracket. The logarithm of such a tail is concave, and nearly straight far out.
func solve(rising bool, at, most float64, tail func(float64) (tail, slope float64)) float64 {
	low, high := 0.0, most
	at = min(at, most*(1-0x1p-53))
	for range stepsMax {
		value, slope := tail(at)
		if (value > outside) == rising {
			high = at
		} else {
			low = at
		}
		next := at - math.Log(value/outside)*value/slope
		if !(next > low && next < high) {
			next = inside(low, high)
		}
		if math.Abs(next-at) <= 0x1p-51*at {
			return next
		}
		at = next
	}
	return at
}

// inside is a point inside a bracket; one without an upper end is doubled.
func inside(low, high float64) float64 {
	if math.IsInf(high, 1) {
		return 2 * low
	}
	return low + (high-low)/2
}
