package limits

import (
	"fmt"
	"math"

	"limitary/internal/decimal"
)

// StandardDeviation gives the sample standard deviation (divisor n-1) of readings no larger in size than MagnitudeMax;
// of fewer than two, which cannot differ, it is zero.
//
// Nothing cancels: each deviation from the mean is taken exactly, in decimals, before anything is squared, so the error
// is that of adding small squares and does not grow with mean/s. In float64 alone 10000000.2 - 10000000.1 is wrong from
// the ninth digit on, because neither reading is held exactly. The remaining term (Σe)²/n is the correction of the
// two-pass algorithm (Chan, Golub and LeVeque 1983, equation 1.7; from memory).
func StandardDeviation(readings []float64) float64 {
	if len(readings) < 2 {
		return 0
	}
	_, squares := deviations(readings, exactPlaces(readings))
	return math.Sqrt(squares / float64(len(readings)-1))
}

// Lag1Autocorrelation gives Σ(x_i - x̄)(x_{i+1} - x̄)/Σ(x_i - x̄)² of at least two finite readings that are not all
// equal (NIST/SEMATECH e-Handbook 1.3.5.12, from memory). Deviations are those of StandardDeviation.
func Lag1Autocorrelation(readings []float64) (float64, error) {
	if len(readings) < 2 {
		return 0, refuse("readings", len(readings), "an autocorrelation needs at least 2")
	}
	for i, x := range readings {
		if err := checkMagnitude(fmt.Sprintf("readings[%d]", i), x); err != nil {
			return 0, err
		}
	}
	e, squares := deviations(readings, exactPlaces(readings))
	if squares == 0 {
		return 0, refuse("readings", readings[0], "all readings are equal, so their autocorrelation is not defined")
	}
	products := 0.0
	for i := 1; i < len(e); i++ {
		products += e[i] * e[i-1]
	}
	return products / squares, nil
}

// Range gives the largest less the smallest of one or more finite readings, as exact as their decimals: 0.3 - 0.2 is 0.1.
func Range(readings []float64) float64 { return rangeOf(readings, exactPlaces(readings)) }

func rangeOf(readings []float64, places int) float64 {
	low, high := readings[0], readings[0]
	for _, x := range readings[1:] {
		low, high = min(low, x), max(high, x)
	}
	return difference(high, low, places)
}

// deviations gives the deviations e of the readings from their mean and Σe². The origin is the mean rounded to the
// readings' own decimals, itself a short decimal, from which every reading differs exactly.
func deviations(readings []float64, places int) (e []float64, squares float64) {
	n := float64(len(readings))
	origin := decimal.Mean(readings, places)
	e = make([]float64, len(readings))
	shift := 0.0
	for i, x := range readings {
		e[i] = difference(x, origin, places)
		shift += e[i]
	}
	shift /= n
	rest := 0.0
	for i := range e {
		e[i] -= shift
		squares += e[i] * e[i]
		rest += e[i]
	}
	return e, max(0, squares-rest*rest/n)
}

// difference gives a - b as exact as the decimals of both: places is at least the number of decimals of either, so
// rounding to it changes nothing and takes the fast way; it is decimal.Unrounded where float64 has no such number.
func difference(a, b float64, places int) float64 { return decimal.Difference(a, b, places) }

// exactPlaces gives the number of decimals that holds every reading exactly, or decimal.Unrounded where that is more
// than decimal.PlacesMax.
func exactPlaces(readings []float64) int {
	places := 0
	for _, x := range readings {
		if places = atLeastPlaces(x, places); places == decimal.Unrounded {
			return places
		}
	}
	return places
}

// atLeastPlaces gives the decimals of x, not fewer than start. Rounding to a few decimals is much cheaper than reading
// the shortest form, and measured values have few.
func atLeastPlaces(x float64, start int) int {
	for places := start; places <= decimal.PlacesMax; places++ {
		if decimal.Round(x, places) == x {
			return places
		}
	}
	return decimal.Unrounded
}
