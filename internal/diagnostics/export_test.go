package diagnostics

import "limitary/internal/rules"

// What the tests look at from outside beyond the public interface.

var (
	AndersonDarling  = andersonDarling
	AndersonDarlingP = andersonDarlingP
	LogNormalBelow   = logNormalBelow
	SkewnessP        = skewnessP
	BestSplit        = bestSplit
	SplitCritical    = splitCritical
	RangeCritical    = rangeCritical
	FTails           = fTails
	LagMoments       = lagMoments
	Neighbours       = neighbours
	LongestRepeat    = longestRepeat
	StretchCritical  = stretchCritical
	EqualNeighbours  = equalNeighbours
	ExpectedHits     = func(r rules.Spec, n int) float64 { return expectedHits(r, n) }
	AlternatingShare = alternatingShare
	Contrasts        = contrasts
)

// Standardise gives z in order and by size of values near one.
func Standardise(values []float64) (z, sorted []float64) {
	s := newSample("values", append([]float64(nil), values...), 0, 1, 0)
	return s.z, s.sorted
}

// Spread gives sorted values, rounded to a step, drawn apart.
func Spread(values []float64, step float64) []float64 {
	return newSample("values", append([]float64(nil), values...), 0, 1, step).spread()
}

// GridOf gives the step and the readings in steps above the lowest.
func GridOf(readings []float64) (float64, []int64) {
	g := gridOf(readings)
	return g.step, g.whole
}

// HistogramOf draws values on their own grid.
func HistogramOf(values []float64) Histogram { return histogramOf(values, gridOf(values)) }
