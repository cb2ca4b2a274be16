package limits

import (
	"math"

	"limitary/internal/chart"
)

// CountSigma gives the standard deviation of what a chart of counts plots, for a sample of the given size: that of
// counting, widened by the model. Centre is that of the plotted statistic; ok is false where no count can have it.
func CountSigma(kind chart.Kind, centre, inspected float64, m *chart.Model) (sigma float64, ok bool) {
	variance := 0.0
	switch kind {
	case chart.P:
		variance = centre * (1 - centre) / inspected
	case chart.NP:
		variance = centre * (1 - centre/inspected)
	case chart.C:
		variance = centre
	case chart.U:
		variance = centre / inspected
	}
	if m.Inflation > 0 {
		variance *= m.Inflation * m.Inflation
	}
	sigma = math.Sqrt(variance + m.BetweenSigma*m.BetweenSigma)
	return sigma, sigma > 0 && !math.IsInf(sigma, 0)
}

// NormalCountLine gives the line z sigmas from the centre, infinite where no count lies beyond it: below zero, or above
// all items.
func NormalCountLine(kind chart.Kind, centre, sigma, inspected, z float64) float64 {
	line := centre + z*sigma
	switch {
	case line <= 0:
		return math.Inf(-1)
	case kind == chart.P && line >= 1, kind == chart.NP && line >= inspected:
		return math.Inf(1)
	}
	return line
}
