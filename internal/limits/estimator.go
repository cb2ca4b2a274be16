package limits

import (
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
)

// Estimator names a way to estimate the process sigma from the basis of a chart.
type Estimator uint8

const (
	// DefaultEstimator asks for the usual one of the kind, the first of EstimatorsOf.
	DefaultEstimator Estimator = iota
	// MeanMovingRange is the mean moving range over d2(2), for individuals. Slow drift and shifts of level hardly enter.
	MeanMovingRange
	// MedianMovingRange is the median moving range over 0.9539, for individuals. A few large jumps hardly enter. Its
	// divisor is the limit for many ranges, as in the literature; for m of them the estimate is
	// too large by a relative 0.5/m or so.
	MedianMovingRange
	// RBar is the mean of R_i/d2(n_i), weighted where sizes differ by (d2/d3)², which gives the smallest variance
	// (Burr 1969, J. Qual. Technology 1(3), from memory); with equal sizes it is R-bar/d2.
	RBar
	// SBar is the mean of s_i/c4(n_i), weighted where sizes differ by c4²/(1-c4²); with equal sizes it is s-bar/c4.
	SBar
	// Pooled is the root of Σ(n_i-1)s_i²/Σ(n_i-1), divided by c4 of its degrees of freedom plus one, hence unbiased.
	Pooled
	// Overall is the standard deviation of all readings about their one mean, divided by c4 of their number, hence
	// unbiased where all readings are independent. It holds what varies between subgroups as well as within.
	Overall

	estimatorCount
)

var estimatorNames = [estimatorCount]string{
	DefaultEstimator:  "DEFAULT",
	MeanMovingRange:   "MEAN_MOVING_RANGE_OVER_D2",
	MedianMovingRange: "MEDIAN_MOVING_RANGE",
	RBar:              "R_BAR_OVER_D2",
	SBar:              "S_BAR_OVER_C4",
	Pooled:            "POOLED",
	Overall:           "OVERALL",
}

// String is the name in the API and in messages.
func (e Estimator) String() string {
	if e < estimatorCount {
		return estimatorNames[e]
	}
	return fmt.Sprintf("ESTIMATOR_%d", uint8(e))
}

// ParseEstimator reads a name written by String.
func ParseEstimator(name string) (Estimator, error) {
	if i := slices.Index(estimatorNames[:], name); i >= 0 {
		return Estimator(i), nil
	}
	return DefaultEstimator, refuse("estimator", fmt.Sprintf("%q", name), "want one of %v", estimatorNames[1:])
}

// EstimatorsOf lists the estimators that fit a kind, the default first; none for counts. For run means the process sigma
// is the one within runs: Overall is shown beside the others, since it holds what varies between runs as well, and
// cannot be chosen.
func EstimatorsOf(kind chart.Kind) []Estimator {
	switch kind {
	case chart.Individuals:
		return []Estimator{MeanMovingRange, MedianMovingRange, Overall}
	case chart.XbarR:
		return []Estimator{RBar, SBar, Pooled, Overall}
	case chart.XbarS:
		return []Estimator{SBar, RBar, Pooled, Overall}
	case chart.RunMeans:
		return []Estimator{Pooled, SBar, RBar, Overall}
	case chart.DuplicateRange, chart.RelativeRange:
		return []Estimator{RBar, Pooled}
	}
	return nil
}

// Estimate is the process sigma by one estimator.
type Estimate struct {
	Name Estimator
	// Sigma is unrounded, in the chart's unit; zero where the statistics it rests on are all zero.
	Sigma float64
	// DegreesOfFreedom are effective: those of a standard deviation that varies as much as this estimate does.
	DegreesOfFreedom float64
	// N is the number of statistics behind it: moving ranges, ranges, standard deviations, or readings.
	N int
	// Chosen marks the estimate that the limits rest on.
	Chosen bool
	// variance is V: the variance of the estimate is V·σ² where readings are independent and normal.
	variance float64
}

// estimates computes every estimator of the kind that the basis allows.
func (b *basis) estimates() []Estimate {
	var all []Estimate
	for _, name := range EstimatorsOf(b.kind) {
		if e, ok := b.estimate(name); ok {
			if e.DegreesOfFreedom == 0 {
				e.DegreesOfFreedom = freedomOf(e.variance)
			}
			all = append(all, e)
		}
	}
	return all
}

func (b *basis) estimate(name Estimator) (Estimate, bool) {
	switch name {
	case MeanMovingRange, MedianMovingRange:
		return b.movingRangeEstimate(name)
	case RBar:
		return b.weightedEstimate(name, rangeInformation, func(w within) float64 {
			return w.spread / factorsOf(w.n).RangeMean
		})
	case SBar:
		return b.weightedEstimate(name, sInformation, func(w within) float64 {
			return math.Sqrt(w.squares/float64(w.n-1)) / factorsOf(w.n).SMean
		})
	case Pooled:
		return b.pooledEstimate()
	}
	return b.overallEstimate()
}

func (b *basis) movingRangeEstimate(name Estimator) (Estimate, bool) {
	m := len(b.movingRanges)
	if m == 0 {
		return Estimate{}, false
	}
	neighbours := m - b.chains
	if name == MedianMovingRange {
		return Estimate{
			Name: name, N: m,
			Sigma:    median(b.movingRanges) / medianMovingRangeFactor,
			variance: medianMovingRangeVariance(m, neighbours),
		}, true
	}
	sum := 0.0
	for _, r := range b.movingRanges {
		sum += r
	}
	return Estimate{
		Name: name, N: m,
		Sigma:    sum / float64(m) / factorsOf(2).RangeMean,
		variance: meanMovingRangeVariance(m, neighbours),
	}, true
}

// weightedEstimate is the mean of the subgroups' own estimates of sigma, each weighted by its information.
func (b *basis) weightedEstimate(name Estimator, information func(n int) float64, sigma func(within) float64) (Estimate, bool) {
	sum, weights := 0.0, 0.0
	for _, w := range b.within {
		weight := information(w.n)
		sum += weight * sigma(w)
		weights += weight
	}
	if weights == 0 {
		return Estimate{}, false
	}
	return Estimate{Name: name, N: len(b.within), Sigma: sum / weights, variance: 1 / weights}, true
}

func (b *basis) pooledEstimate() (Estimate, bool) {
	squares, freedom := 0.0, 0
	for _, w := range b.within {
		squares += w.squares
		freedom += w.n - 1
	}
	return chiEstimate(Pooled, squares, freedom, len(b.within))
}

func (b *basis) overallEstimate() (Estimate, bool) {
	if len(b.readings) < 2 {
		return Estimate{}, false
	}
	_, squares := deviations(b.readings, b.places)
	return chiEstimate(Overall, squares, len(b.readings)-1, len(b.readings))
}

// chiEstimate is an unbiased standard deviation, whose degrees of freedom are exact.
func chiEstimate(name Estimator, squares float64, freedom, n int) (Estimate, bool) {
	if freedom < 1 {
		return Estimate{}, false
	}
	v := float64(freedom)
	return Estimate{
		Name: name, N: n,
		Sigma:            math.Sqrt(squares/v) / chiMean(v),
		DegreesOfFreedom: v,
		variance:         chiVariance(v),
	}, true
}

func median(xs []float64) float64 {
	sorted := slices.Sorted(slices.Values(xs))
	middle := len(sorted) / 2
	if len(sorted)%2 == 1 {
		return sorted[middle]
	}
	return (sorted[middle-1] + sorted[middle]) / 2
}
