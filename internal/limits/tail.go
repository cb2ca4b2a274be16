package limits

import (
	"math"

	"gonum.org/v1/gonum/mathext"

	"limitary/internal/chart"
)

// spreadBeyond gives the probability that the statistic of the dispersion trace lies above, or below, a line given in
// process sigmas, for n independent normal readings of one sigma.
func spreadBeyond(kind chart.Kind, line float64, n int, above bool) float64 {
	switch {
	case kind == chart.Individuals:
		n = 2
	case kind == chart.XbarS || kind == chart.RunMeans:
		freedom := float64(n - 1)
		if above {
			return mathext.GammaIncRegComp(freedom/2, freedom*line*line/2)
		}
		return mathext.GammaIncReg(freedom/2, freedom*line*line/2)
	}
	switch {
	case n == 2 && above:
		return 2 * normalAbove(line/math.Sqrt2) // the difference of two readings has variance 2
	case above:
		return rangeAbove(line, n)
	}
	return rangeBelow(line, n)
}
