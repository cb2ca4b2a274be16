package limits

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// centreHalf is half the width of the interval of the centre.
func (a *runAnalysis) centreHalf() float64 {
	return studentQuantile((1+Confidence)/2, a.centreFreedom) * a.centreError
}

// locationInterval is that of the sigma of a run mean at the nominal size, which is never below the part within.
func (a *runAnalysis) locationInterval(within *Interval) *Interval {
	if a.given {
		return &Interval{math.Sqrt(a.between + within.Lower*within.Lower/a.size), math.Sqrt(a.between + within.Upper*within.Upper/a.size)}
	}
	v := a.varianceInterval(max(0, a.inverse-1/a.size))
	return &Interval{
		max(math.Sqrt(v.Lower), within.Lower/math.Sqrt(a.size)),
		max(math.Sqrt(v.Upper), within.Upper/math.Sqrt(a.size)),
	}
}

// betweenInterval is that of s_b.
func (a *runAnalysis) betweenInterval() *Interval {
	v := a.varianceInterval(a.inverse)
	return &Interval{math.Sqrt(v.Lower), math.Sqrt(v.Upper)}
}

// varianceInterval is that of E(S²) - less·s_w², cut at zero: the modified large-sample interval for a difference of mean
// squares (Ting, Burdick, Graybill, Jeyaratnam and Lu 1990, J. Statistical Computation and Simulation 35, 135-143; from
// memory). It is exact where less is zero, and has its end at zero exactly where the F ratio is at its quantile.
func (a *runAnalysis) varianceInterval(less float64) Interval {
	tail := (1 - Confidence) / 2
	unit := max(a.meanSquare, less*a.within)
	if unit == 0 {
		return Interval{}
	}
	s, w := a.meanSquare/unit, less*a.within/unit
	g1, h1 := 1-1/fQuantile(1-tail, a.meansFreedom, math.Inf(1)), 1/fQuantile(tail, a.meansFreedom, math.Inf(1))-1
	g2, h2 := 1-1/fQuantile(1-tail, a.withinFreedom, math.Inf(1)), 1/fQuantile(tail, a.withinFreedom, math.Inf(1))-1
	high, low := fQuantile(1-tail, a.meansFreedom, a.withinFreedom), fQuantile(tail, a.meansFreedom, a.withinFreedom)
	cross := func(f, own, other float64) float64 { return ((f-1)*(f-1) - own*own*f*f - other*other) / f }
	down := g1*g1*s*s + h2*h2*w*w + cross(high, g1, h2)*s*w
	up := h1*h1*s*s + g2*g2*w*w + cross(low, h1, g2)*s*w
	return Interval{
		unit * max(0, s-w-math.Sqrt(max(0, down))),
		unit * max(0, s-w+math.Sqrt(max(0, up))),
	}
}

// fQuantile gives the p quantile of F; either freedom may be infinite.
func fQuantile(p, above, below float64) float64 {
	switch {
	case math.IsInf(above, 1) && math.IsInf(below, 1):
		return 1
	case math.IsInf(below, 1):
		return distuv.ChiSquared{K: above}.Quantile(p) / above
	case math.IsInf(above, 1):
		return below / distuv.ChiSquared{K: below}.Quantile(1-p)
	}
	return distuv.F{D1: above, D2: below}.Quantile(p)
}

// studentQuantile gives the p quantile of Student's t; freedom may be infinite.
func studentQuantile(p, freedom float64) float64 {
	if math.IsInf(freedom, 1) {
		return distuv.UnitNormal.Quantile(p)
	}
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: freedom}.Quantile(p)
}
