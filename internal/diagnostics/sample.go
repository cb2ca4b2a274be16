package diagnostics

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"

	"limitary/internal/decimal"
)

// sample is a set of values that should be normal with one mean and one sigma if the basis is clean.
type sample struct {
	subject string
	// z are the values in order, less their mean, in units of their standard deviation (divisor n-1); nil where all are
	// equal. sorted are the same by size.
	z, sorted []float64
	// mean and sd of the values in the chart's unit.
	mean, sd float64
	// step is the rounding step of the values in units of sd; 0 where there is none worth speaking of.
	step float64
	n    int
}

// newSample standardises deviations, given in units of scale, of values around mean. It takes the slice over. Scaled by
// the largest deviation first, nothing overflows.
func newSample(subject string, deviations []float64, mean, scale, step float64) *sample {
	s := &sample{subject: subject, mean: mean, n: len(deviations)}
	largest := 0.0
	for _, e := range deviations {
		largest = max(largest, math.Abs(e))
	}
	if len(deviations) < 2 || largest == 0 {
		return s
	}
	shift := 0.0
	for i := range deviations {
		deviations[i] /= largest
		shift += deviations[i]
	}
	shift /= float64(s.n)
	squares := 0.0
	for i := range deviations {
		deviations[i] -= shift
		squares += deviations[i] * deviations[i]
	}
	sd := math.Sqrt(squares / float64(s.n-1))
	if sd < 1e-12 { // equal up to the rounding of float64
		return s
	}
	for i := range deviations {
		deviations[i] /= sd
	}
	s.z, s.sorted = deviations, slices.Clone(deviations)
	slices.Sort(s.sorted)
	s.mean += shift * largest * scale
	s.sd = sd * largest * scale
	s.step = step / scale / (sd * largest)
	return s
}

// constant says whether there is no spread to test.
func (s *sample) constant() bool { return s.z == nil }

// deviationsOf gives the exact deviations from the mean, rounded to the readings' own decimals, in units of their
// largest, and that unit. A reading near 1e100 has a deviation, but not always a finite square.
func deviationsOf(readings []float64) (deviations []float64, origin, scale float64) {
	places := placesOf(readings)
	origin = decimal.Mean(readings, places)
	deviations = make([]float64, len(readings))
	for i, x := range readings {
		deviations[i] = decimal.Difference(x, origin, places)
		scale = max(scale, math.Abs(deviations[i]))
	}
	if scale == 0 {
		return deviations, origin, 1
	}
	for i := range deviations {
		deviations[i] /= scale
	}
	return deviations, origin, scale
}

// placesOf gives the number of decimals that holds every reading exactly, or decimal.Unrounded where that is too many.
func placesOf(readings []float64) int {
	places := 0
	for _, x := range readings {
		for decimal.Round(x, places) != x {
			if places++; places > decimal.PlacesMax {
				return decimal.Unrounded
			}
		}
	}
	return places
}

// tiesMatter is the product n·(step/sd)² above which ties are spread: below it they add less than about 0.01 to A²,
// whose excess is nearly n·(step/sd)²/25.
const tiesMatter = 0.25

// apart gives the sorted values for a test of shape, those made equal by rounding spread where that matters.
func (s *sample) apart() (sorted []float64, reason string) {
	if float64(s.n)*s.step*s.step <= tiesMatter {
		return s.sorted, ""
	}
	return s.spread(), "Equal values were spread over the rounding step first."
}

// spread gives the sorted values with those that rounding made equal drawn apart again: over their step, or half way to
// the next value if that is nearer, as a normal law with the sample's mean and sd would lay them. The sd is freed of the
// variance step²/12 that rounding adds (Sheppard's correction, from memory). What comes out no longer shows the ties,
// and shows everything that is coarser than a step.
func (s *sample) spread() []float64 {
	out := slices.Clone(s.sorted)
	inflation := 1 / math.Sqrt(max(0.25, 1-s.step*s.step/12))
	for i := range out {
		out[i] *= inflation
	}
	half := s.step * inflation / 2
	for first := 0; first < len(out); {
		next := first + 1
		for next < len(out) && s.sorted[next]-s.sorted[first] < 1e-9*(1+s.step) {
			next++
		}
		if next-first > 1 {
			lower, upper := out[first]-half, out[first]+half
			if first > 0 {
				lower = max(lower, (out[first]+s.sorted[first-1]*inflation)/2)
			}
			if next < len(out) {
				upper = min(upper, (out[first]+out[next])/2)
			}
			layNormal(out[first:next], lower, upper)
		}
		first = next
	}
	return out
}

// layNormal lays values at the middles of equal probabilities of a standard normal law between lower and upper.
func layNormal(out []float64, lower, upper float64) {
	k := float64(len(out))
	far := math.Abs(lower+upper)/2 > 8 // probabilities vanish there
	sign := 1.0
	if lower+upper > 0 { // the lower tail keeps its digits
		sign, lower, upper = -1, -upper, -lower
	}
	p, q := normalBelow(lower), normalBelow(upper)
	for j := range out {
		u := (float64(j) + 0.5) / k
		if sign < 0 {
			u = 1 - u
		}
		if far {
			out[j] = sign * (lower + u*(upper-lower))
			continue
		}
		out[j] = sign * mathext.NormalQuantile(p+u*(q-p))
	}
}

// normalBelow is the standard normal distribution function.
func normalBelow(z float64) float64 { return math.Erfc(-z/math.Sqrt2) / 2 }

// logNormalBelow is its logarithm. Far out it is the first terms of the asymptotic series of Mills' ratio (from memory).
func logNormalBelow(z float64) float64 {
	if z > -30 {
		return math.Log(normalBelow(z))
	}
	zz := z * z
	return -zz/2 - math.Log(-z) - math.Log(2*math.Pi)/2 + math.Log1p((-1+(3-15/zz)/zz)/zz)
}
