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

// What the tests of duplicates look at.
var (
	ZeroShare    = zeroShare
	ZeroIntegral = zeroIntegral
	CutGamma     = cutGamma
	Scatter      = scatter
	OnceIn       = onceIn
)

// LargestBelow gives the probability for sets with so many degrees of freedom each.
func LargestBelow(bound float64, freedoms []int) float64 {
	sets := make([]set, len(freedoms))
	for i, f := range freedoms {
		sets[i].freedom = f
	}
	return largestBelow(bound, float64(len(sets)), sets)
}

// RankCorrelation gives r and its variance for pairs with the given means and scatter, by stratum.
func RankCorrelation(means, scatters [][]float64) (r, variance float64) {
	d := &duplicates{}
	for k := range means {
		for i, mean := range means[k] {
			d.sets = append(d.sets, set{mean: mean, stratum: k, freedom: 1, squares: scatters[k][i] * scatters[k][i]})
		}
	}
	return d.rankCorrelation()
}
