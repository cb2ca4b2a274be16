package judge

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// Scale gives the centre and sigma of a trace for a subgroup of n readings; ok is false where the trace has no point
// at that size, or where the size alone does not say.
func (j *Judge) Scale(role chart.Role, n int) (s rules.Scale, ok bool) {
	plan := j.plans[role]
	if plan == nil || j.limits.Kind.Counts() {
		return rules.Scale{}, false
	}
	if n == j.limits.SubgroupSize || j.limits.Kind == chart.Given || j.limits.Kind == chart.Individuals {
		return plan.Nominal(), true
	}
	if role == chart.Dispersion && n < 2 || j.limits.ProcessSigma == 0 {
		return rules.Scale{}, false
	}
	return j.scaleOf(role, n, j.limits.ProcessSigma)
}

// scaleOf is Scale for a process sigma other than the nominal one, or another size.
func (j *Judge) scaleOf(role chart.Role, n int, processSigma float64) (s rules.Scale, ok bool) {
	own, ok := limits.AtModel(j.limits.Kind, processSigma, &j.limits.Model, n)
	if !ok {
		return rules.Scale{}, false
	}
	if role == chart.Dispersion {
		// The nominal centre is published rounded; one for another size is rounded alike.
		return rules.Scale{Centre: decimal.Round(own.DispersionCentre, j.limits.Places), Sigma: own.DispersionSigma}, true
	}
	return rules.Scale{Centre: j.plans[role].Nominal().Centre, Sigma: own.LocationSigma}, true
}

// location gives the statistic and scale of the location trace.
func (j *Judge) location(pt Point) (x float64, scale rules.Scale, ok bool) {
	if j.limits.Kind.Counts() {
		return j.count(pt)
	}
	scale, ok = j.Scale(chart.Location, len(pt.Readings))
	if !ok {
		return 0, scale, false
	}
	if pt.Centre != nil {
		scale.Centre = *pt.Centre
	}
	if pt.Sigma != nil {
		scale.Sigma = *pt.Sigma
	}
	return decimal.Mean(pt.Readings, j.limits.Places), scale, true
}

// count gives the statistic and scale of a chart of counts. A quotient is rounded from float64, whose shortest form is
// the tie where there is one.
func (j *Judge) count(pt Point) (x float64, scale rules.Scale, ok bool) {
	plan := j.plans[chart.Location]
	if plan == nil || pt.Count == nil {
		return 0, scale, false
	}
	scale = plan.Nominal()
	scale.Inspected = pt.Count.Inspected
	scale.Sigma, ok = limits.CountSigma(j.limits.Kind, scale.Centre, pt.Count.Inspected, &j.limits.Model)
	return decimal.Round(j.limits.Kind.Statistic(*pt.Count), j.limits.Places), scale, ok
}

// dispersion gives the statistic and scale of the dispersion trace.
func (j *Judge) dispersion(st *State, pt Point) (x float64, scale rules.Scale, ok bool) {
	if j.limits.Kind == chart.Individuals && !st.hasPrev {
		return 0, scale, false
	}
	if j.limits.Kind.Duplicates() {
		return j.duplicates(pt)
	}
	scale, ok = j.Scale(chart.Dispersion, len(pt.Readings))
	if !ok {
		return 0, scale, false
	}
	switch j.limits.Kind {
	case chart.Individuals:
		return distance(pt.Readings[0], st.prev, j.limits.Places), scale, true
	case chart.XbarR:
		return distance(greatest(pt.Readings), least(pt.Readings), j.limits.Places), scale, true
	}
	return decimal.Round(held(limits.StandardDeviation(pt.Readings)), j.limits.Places), scale, true
}

// duplicates gives the range of replicate readings, or that range in percent of their mean, with the scale for such a
// mean.
func (j *Judge) duplicates(pt Point) (x float64, scale rules.Scale, ok bool) {
	if len(pt.Readings) < 2 || j.plans[chart.Dispersion] == nil {
		return 0, scale, false
	}
	mean := decimal.Mean(pt.Readings, decimal.Unrounded)
	sigma, absolute := j.limits.Model.Spread.At(j.limits.ProcessSigma, mean)
	if j.limits.Kind == chart.RelativeRange && !absolute {
		if mean == 0 {
			return 0, scale, false
		}
		spread := distance(greatest(pt.Readings), least(pt.Readings), decimal.Unrounded)
		x = decimal.Round(held(100*spread/math.Abs(mean)), j.limits.Places)
	} else {
		x = distance(greatest(pt.Readings), least(pt.Readings), j.limits.Places)
	}
	if scale, ok = j.Scale(chart.Dispersion, len(pt.Readings)); ok && sigma != j.limits.ProcessSigma {
		scale, ok = j.scaleOf(chart.Dispersion, len(pt.Readings), sigma)
	}
	return x, scale, ok
}

func least(xs []float64) float64 {
	lo := xs[0]
	for _, x := range xs[1:] {
		lo = min(lo, x)
	}
	return lo
}

func greatest(xs []float64) float64 {
	hi := xs[0]
	for _, x := range xs[1:] {
		hi = max(hi, x)
	}
	return hi
}

func distance(a, b float64, places int) float64 {
	if a < b {
		a, b = b, a
	}
	return held(decimal.Difference(a, b, places))
}

// held gives a spread that float64 can hold. One of readings near the largest float64, or its squares, may be more than
// that, and is beyond every line either way.
func held(spread float64) float64 {
	if spread <= math.MaxFloat64 {
		return spread
	}
	return math.MaxFloat64 // for infinity, and for what comes of two of them
}
