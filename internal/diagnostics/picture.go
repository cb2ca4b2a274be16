package diagnostics

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
)

const (
	// BinsMax bounds the bins of a histogram, and NormalPointsMax the points of a normal plot.
	BinsMax, NormalPointsMax = 100, 500
	// tailPoints at either end of a normal plot are never thinned: that is where one looks.
	tailPoints = 100
)

// Rules for the width of bins.
const (
	// FreedmanDiaconis is twice the interquartile range over the cube root of n (1981, from memory).
	FreedmanDiaconis = "Freedman-Diaconis"
	// Scott is 3.49 standard deviations over the cube root of n (1979, from memory), where half the values are equal.
	Scott = "Scott"
)

// Picture is what a histogram and a normal plot of one subject are drawn from, on the judged scale.
type Picture struct {
	Subject string
	// Histogram is of the readings or of the means as they are.
	Histogram Histogram
	// NormalPlot has what the tests looked at, by size; nil where all are equal. For StandardisedRanges it is a half-normal
	// plot.
	NormalPlot []NormalPoint
}

// Histogram counts values in bins of one width. Bin i has the values from Lower + i·Width up to the next; where values
// lie on a rounding step, the width is a multiple of it and edges lie half way between possible values, so that no bin
// is fuller than its neighbour for the number of steps in it.
type Histogram struct {
	Lower, Width float64
	// Step is the rounding step the bins follow, 0 if none.
	Step   float64
	Counts []int
	// Rule is the name of the rule for the width before it was fitted to the step and to BinsMax.
	Rule string
}

// NormalPoint is one of n ordered values at the normal quantile of (i - 3/8)/(n + 1/4) (Blom 1958, from memory); in a
// half-normal plot, at the quantile that the size of a standard normal value stays below with that probability.
type NormalPoint struct {
	Quantile, Value float64
}

// histogramOf counts values; g is their grid, or has no step.
func histogramOf(values []float64, g grid) Histogram {
	ordered := slices.Clone(values)
	slices.Sort(ordered)
	n := len(ordered)
	low, high := ordered[0], ordered[n-1]
	if !(high-low > 0) {
		width := max(1, math.Abs(low)*1e-6)
		return Histogram{Lower: low - width/2, Width: width, Counts: []int{n}, Rule: Scott}
	}
	width, rule := binWidth(ordered)
	if g.step > 0 {
		return alignedHistogram(g, low, width, rule)
	}
	bins := int(math.Ceil(min(BinsMax, max(1, (high-low)/width))))
	width = (high - low) / float64(bins)
	h := Histogram{Lower: low, Width: width, Counts: make([]int, bins), Rule: rule}
	for _, x := range ordered {
		h.Counts[min(bins-1, int((x-low)/width))]++
	}
	return h
}

// alignedHistogram counts values in whole steps.
func alignedHistogram(g grid, low, width float64, rule string) Histogram {
	span := slices.Max(g.whole) + 1
	steps := (span + BinsMax - 1) / BinsMax
	if wanted := width / g.step; wanted > float64(steps) {
		steps = min(span, int64(math.Round(wanted)))
	}
	h := Histogram{Lower: low - g.step/2, Width: float64(steps) * g.step, Step: g.step, Rule: rule}
	h.Counts = make([]int, (span+steps-1)/steps)
	for _, w := range g.whole {
		h.Counts[w/steps]++
	}
	return h
}

// binWidth gives the width for sorted values that are not all equal. Differences are taken before anything is squared,
// in units of the range.
func binWidth(ordered []float64) (float64, string) {
	n := len(ordered)
	cube := math.Cbrt(float64(n))
	if quartiles := ordered[n-1-n/4] - ordered[n/4]; quartiles > 0 {
		return 2 * quartiles / cube, FreedmanDiaconis
	}
	low, unit := ordered[0], ordered[n-1]-ordered[0]
	mean, squares := 0.0, 0.0
	for _, x := range ordered {
		mean += (x - low) / unit / float64(n)
	}
	for _, x := range ordered {
		e := (x-low)/unit - mean
		squares += e * e
	}
	return 3.49 * math.Sqrt(squares/float64(max(1, n-1))) / cube * unit, Scott
}

// normalPlot gives the ordered values against their quantiles, in the chart's unit: those given, which the sample was made
// of, or with none what the sample holds. Of more than NormalPointsMax the ends stay and the middle is thinned.
func (s *sample) normalPlot(values []float64) []NormalPoint {
	if s.constant() {
		return nil
	}
	ordered := slices.Clone(values)
	slices.Sort(ordered)
	for i := len(ordered); i < s.n; i++ {
		ordered = append(ordered, s.mean+s.sorted[i]*s.sd)
	}
	var points []NormalPoint
	for _, i := range plottedOf(s.n) {
		points = append(points, NormalPoint{mathext.NormalQuantile(blom(i, s.n)), ordered[i]})
	}
	return points
}

// blom is the plotting position of the ordered value i, from 0, of n.
func blom(i, n int) float64 { return (float64(i) + 1 - 3./8) / (float64(n) + 1./4) }

// plottedOf gives the indices of those of n ordered values that are plotted.
func plottedOf(n int) []int {
	out := make([]int, 0, min(n, NormalPointsMax))
	ends, middle, kept := tailPoints, n-2*tailPoints, NormalPointsMax-2*tailPoints
	if n <= NormalPointsMax {
		ends, middle, kept = n, 0, 0
	}
	for i := range ends {
		out = append(out, i)
	}
	for j := range kept {
		out = append(out, ends+(2*j+1)*middle/(2*kept))
	}
	for i := max(ends, n-tailPoints); i < n; i++ {
		out = append(out, i)
	}
	return out
}
