package limits

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/counts"
)

// ExactCountLine gives the whole count that leaves at most chart.TailOf(z) beyond it on the side of z, in units of the
// plotted statistic; infinite where no count can lie beyond it. Where the expected count is more than counts.MeanMax, no
// single count matters any more, and the line is the normal one.
func ExactCountLine(kind chart.Kind, centre, inspected, z float64) float64 {
	law, err := countLaw(kind, centre, inspected)
	if err != nil {
		sigma, _ := CountSigma(kind, centre, inspected, &chart.Model{})
		return NormalCountLine(kind, centre, sigma, inspected, z)
	}
	tail := max(chart.TailOf(z), counts.TailMin) // about seven sigmas; a line farther out stays there
	var line float64
	var ok bool
	if z > 0 {
		line, _, ok = counts.Upper(law, tail)
	} else {
		line, _, ok = counts.Lower(law, tail)
	}
	switch {
	case !ok:
		return math.Inf(sign(z))
	case kind == chart.P || kind == chart.U:
		return line / inspected
	}
	return line
}

func sign(z float64) int {
	if z < 0 {
		return -1
	}
	return 1
}

// countLaw is how a count varies in a sample of the given size while the process stays at the centre.
func countLaw(kind chart.Kind, centre, inspected float64) (counts.Law, error) {
	switch kind {
	case chart.P:
		return counts.Binomial(inspected, centre)
	case chart.NP:
		return counts.Binomial(inspected, centre/inspected)
	case chart.U:
		return counts.Poisson(centre * inspected)
	}
	return counts.Poisson(centre)
}
