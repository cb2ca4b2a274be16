package limits

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
)

// Confidence is the level of every interval.
const Confidence = 0.95

// Interval is a two-sided confidence interval, unrounded.
type Interval struct{ Lower, Upper float64 }

// Intervals tell how far the figures of a result are known from its basis, if readings are independent and normal with
// one mean and one sigma. Where subgroup means vary more than the scatter within explains, the intervals of the location
// trace are too narrow. A figure that is given, fixed or absent has none.
type Intervals struct {
	// Sigma is the process sigma (for run means that within runs): with ν effective degrees of freedom, σ̂·c4(ν+1)·√(ν/χ²) at both quantiles of χ².
	Sigma *Interval
	// Centre is the location centre: Student's t at ν degrees of freedom, or the normal quantile where sigma is given. For
	// run means the variance is 1/Σ1/(s_b² + s_w²/n_i), with Satterthwaite's degrees of freedom.
	Centre *Interval
	// DispersionCentre is the centre of the dispersion trace at the nominal size.
	DispersionCentre *Interval
	// LowerAction to UpperWarning are the lines by trace. Those of the location trace combine the two intervals
	// above by the square-root rule of Donner and Zou (2012, Statistical Methods in Medical Research 21, 347-359; from
	// memory), which keeps the skewness of sigma's. Those of the dispersion trace are multiples of sigma.
	LowerAction, UpperAction, LowerWarning, UpperWarning [chart.Roles]*Interval
}

// each calls f for the intervals and lines of a trace, with the multiple of sigma of each line.
func (in *Intervals) each(role chart.Role, t *chart.Trace, f func(into **Interval, line chart.Line, multiple float64)) {
	f(&in.LowerAction[role], t.LowerAction, -chart.ActionMultiple)
	f(&in.UpperAction[role], t.UpperAction, chart.ActionMultiple)
	f(&in.LowerWarning[role], t.LowerWarning, -chart.WarningMultiple)
	f(&in.UpperWarning[role], t.UpperWarning, chart.WarningMultiple)
}

func (res *Result) intervals() Intervals {
	var in Intervals
	spread := studentQuantile((1+Confidence)/2, math.Inf(1))
	if e := res.chosen(); e != nil {
		in.Sigma = chiInterval(e.Sigma, e.DegreesOfFreedom)
		spread = e.spread()
	}
	if res.CentreOrigin == Estimated {
		half := spread * res.centreError()
		if res.runs != nil {
			half = res.runs.centreHalf()
		}
		in.Centre = &Interval{res.CentreUnrounded - half, res.CentreUnrounded + half}
	}
	sigma := res.locationSigmaInterval(in.Sigma)
	in.each(chart.Location, &res.Location, func(into **Interval, line chart.Line, multiple float64) {
		*into = in.line(res, line, multiple, sigma)
	})
	scale, _ := At(res.Kind, 1, res.SubgroupSize)
	in.dispersion(&res.Dispersion, scale)
	return in
}

// dispersion fills the intervals of the dispersion trace: all of it is a multiple of process sigma. Scale is that of a
// process sigma of 1.
func (in *Intervals) dispersion(t *chart.Trace, scale Scale) {
	in.DispersionCentre = in.multiple(chart.Line{}, scale.DispersionCentre)
	in.each(chart.Dispersion, t, func(into **Interval, line chart.Line, multiple float64) {
		*into = in.multiple(line, scale.DispersionCentre+multiple*scale.DispersionSigma)
	})
}

// locationSigmaInterval is that of the sigma of the location trace; nil where nothing of it is estimated.
func (res *Result) locationSigmaInterval(process *Interval) *Interval {
	known := process == nil
	if known {
		process = &Interval{res.SigmaUnrounded, res.SigmaUnrounded}
	}
	switch {
	case res.runs != nil && !(known && res.BetweenOrigin == Target):
		return res.runs.locationInterval(process)
	case known:
		return nil
	}
	root := math.Sqrt(float64(res.SubgroupSize))
	return &Interval{process.Lower / root, process.Upper / root}
}

func (res *Result) chosen() *Estimate {
	for i := range res.Estimates {
		if res.Estimates[i].Chosen {
			return &res.Estimates[i]
		}
	}
	return nil
}

// chiInterval turns an unbiased estimate back into the root of a mean square before it is set against χ².
func chiInterval(sigma, freedom float64) *Interval {
	return chiOfMeanSquare(sigma*chiMean(freedom), freedom)
}

// chiOfMeanSquare is the interval of the root of a mean square.
func chiOfMeanSquare(root, freedom float64) *Interval {
	root *= math.Sqrt(freedom)
	chi := distuv.ChiSquared{K: freedom}
	tail := (1 - Confidence) / 2
	return &Interval{root / math.Sqrt(chi.Quantile(1-tail)), root / math.Sqrt(chi.Quantile(tail))}
}

// line gives the interval of centre + z·sigma of the location trace.
func (in *Intervals) line(res *Result, line chart.Line, z float64, sigma *Interval) *Interval {
	if line.Basis != chart.SigmaMultiple || in.Centre == nil && sigma == nil {
		return nil
	}
	var centreDown, centreUp, sigmaDown, sigmaUp float64
	if in.Centre != nil {
		centreDown, centreUp = res.CentreUnrounded-in.Centre.Lower, in.Centre.Upper-res.CentreUnrounded
	}
	own := res.locationSigma()
	if sigma != nil {
		sigmaDown, sigmaUp = math.Abs(z)*(own-sigma.Lower), math.Abs(z)*(sigma.Upper-own)
	}
	if z < 0 { // a larger sigma lowers the line
		sigmaDown, sigmaUp = sigmaUp, sigmaDown
	}
	at := res.CentreUnrounded + z*own
	return &Interval{at - math.Hypot(centreDown, sigmaDown), at + math.Hypot(centreUp, sigmaUp)}
}

func (in *Intervals) multiple(line chart.Line, z float64) *Interval {
	if line.Basis != chart.SigmaMultiple || in.Sigma == nil {
		return nil
	}
	return &Interval{z * in.Sigma.Lower, z * in.Sigma.Upper}
}
