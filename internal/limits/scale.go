package limits

import (
	"math"

	"limitary/internal/chart"
)

// Scale is what a process sigma means for one plotted point, unrounded.
type Scale struct {
	// LocationSigma is the standard deviation of the value or mean.
	LocationSigma float64
	// DispersionCentre and DispersionSigma are mean and standard deviation of the moving range, range or standard
	// deviation; zero where there is no such point.
	DispersionCentre, DispersionSigma float64
}

// At gives the scale of a group of n readings on a chart of the kind, and whether such a chart can have such a group:
// n = 1 for individuals, 2 to chart.SubgroupSizeMax for duplicates, else 1 to chart.SubgroupSizeMax. For run means the
// process sigma is the one within runs, and what varies between runs is left out; see AtModel. An individual value has a
// moving range of two; a subgroup of one reading has a location and no point on the dispersion trace, so its
// DispersionSigma is zero.
func At(kind chart.Kind, processSigma float64, n int) (Scale, bool) {
	switch kind {
	case chart.Individuals:
		if n != 1 {
			return Scale{}, false
		}
		f := factorsOf(2)
		return Scale{processSigma, f.RangeMean * processSigma, f.RangeSigma * processSigma}, true
	case chart.DuplicateRange, chart.RelativeRange:
		if n < 2 || n > chart.SubgroupSizeMax {
			return Scale{}, false
		}
		f := factorsOf(n)
		return Scale{0, f.RangeMean * processSigma, f.RangeSigma * processSigma}, true
	case chart.XbarR, chart.XbarS, chart.RunMeans:
		if n < 1 || n > chart.SubgroupSizeMax {
			return Scale{}, false
		}
	default:
		return Scale{}, false
	}
	s := Scale{LocationSigma: processSigma / math.Sqrt(float64(n))}
	switch {
	case n == 1:
	case kind == chart.XbarR:
		f := factorsOf(n)
		s.DispersionCentre, s.DispersionSigma = f.RangeMean*processSigma, f.RangeSigma*processSigma
	default:
		c4 := factorsOf(n).SMean
		s.DispersionCentre, s.DispersionSigma = c4*processSigma, math.Sqrt(1-c4*c4)*processSigma
	}
	return s, true
}
