package changetest

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// freedomLargest is where a t or F law takes the form of its limit; the two differ by a relative 1/ν there.
const freedomLargest = 1e7

// tQuantile of Student's t at freedom degrees of freedom, or of the normal law where they have no end.
func tQuantile(p, freedom float64) float64 {
	if freedom > freedomLargest {
		return distuv.UnitNormal.Quantile(p)
	}
	return distuv.StudentsT{Sigma: 1, Nu: freedom}.Quantile(p)
}

// tTwoSided is the chance of a value as far from zero as t or further.
func tTwoSided(t, freedom float64) float64 {
	if freedom > freedomLargest {
		return math.Erfc(math.Abs(t) / math.Sqrt2)
	}
	return 2 * distuv.StudentsT{Sigma: 1, Nu: freedom}.CDF(-math.Abs(t))
}

// fQuantile of the ratio of two independent mean squares, either of which may have degrees of freedom without end.
func fQuantile(p, above, below float64) float64 {
	switch {
	case above > freedomLargest && below > freedomLargest:
		return 1
	case below > freedomLargest:
		return distuv.ChiSquared{K: above}.Quantile(p) / above
	case above > freedomLargest:
		return below / distuv.ChiSquared{K: below}.Quantile(1-p)
	}
	return distuv.F{D1: above, D2: below}.Quantile(p)
}

// fTwoSided is twice the smaller tail at the ratio f of two mean squares.
func fTwoSided(f, above, below float64) float64 {
	var tail float64
	switch {
	case below > freedomLargest:
		chi := distuv.ChiSquared{K: above}
		tail = math.Min(chi.CDF(f*above), chi.Survival(f*above))
	default:
		law, mirrored := distuv.F{D1: above, D2: below}, distuv.F{D1: below, D2: above}
		tail = math.Min(law.CDF(f), mirrored.CDF(1/f)) // the mirrored law keeps the digits of the upper tail
	}
	return math.Min(1, 2*tail)
}

// seriesFrom is where chiMean leaves log-gamma for its series, whose first term left out is below 1e-12 there.
const seriesFrom = 300

// chiMean gives the mean of √(χ²/ν), c4 of ν+1 readings: √(2/ν)·Γ((ν+1)/2)/Γ(ν/2) (from memory, as in package limits).
// An unbiased sigma times this is the root of a mean square, which χ² and F are laws of.
func chiMean(freedom float64) float64 {
	if freedom > seriesFrom {
		v := 1 / freedom
		return 1 + v*(-1./4+v*(1./32+v*(5./128+v*(-21./2048))))
	}
	above, _ := math.Lgamma((freedom + 1) / 2)
	below, _ := math.Lgamma(freedom / 2)
	return math.Sqrt(2/freedom) * math.Exp(above-below)
}
