package changetest

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// A range of duplicates is expected to be so many times the sigma in force at the mean of its readings, by bands, by a
// function, or in percent. Readings divided by that sigma have one sigma, wherever their mean lies: the ratio looked for.

// gatherDuplicates checks the sets, and estimates the ratio by every estimator.
func gatherDuplicates(req *Request) (*fresh, error) {
	f := &req.InForce
	groups := req.newGroups()
	d := &fresh{size: f.SubgroupSize, parts: make([]float64, len(f.Parts))}
	for i := range groups {
		if err := checkSet(i, &groups[i]); err != nil {
			return nil, err
		}
		if err := d.takeSet(req, groups, i); err != nil {
			return nil, err
		}
	}
	return d, d.estimateAll(f, groups)
}

// checkSet refuses readings that have no range, or none that can be divided; package limits refuses the rest.
func checkSet(i int, g *limits.Group) error {
	if g.Excluded {
		return nil
	}
	field := fmt.Sprintf("groups[%d].readings", i)
	if len(g.Readings) < 2 {
		return refuse(field, fmt.Sprintf("%d readings", len(g.Readings)), "duplicates need at least 2, or an exclusion with its reason")
	}
	for j, x := range g.Readings {
		if !(math.Abs(x) <= limits.MagnitudeMax) {
			return refuse(fmt.Sprintf("%s[%d]", field, j), x, "want a finite number of size at most %g", limits.MagnitudeMax)
		}
	}
	return nil
}

// noScale is the reason by which sets that the limits in force say nothing of are kept from the estimators.
const noScale = "no scale in force"

// takeSet turns the readings of set i into deviations over the sigma in force at their mean.
func (d *fresh) takeSet(req *Request, groups []limits.Group, i int) error {
	g, f := &groups[i], &req.InForce
	if g.Excluded {
		d.leaveOut(g, req.Groups[i].InOldBasis)
		return nil
	}
	sigma, part := f.sigmaAt(g.Readings)
	if sigma == 0 { // a percentage of a mean of zero, which the judge does not judge either
		g.Excluded, g.ExclusionReason = true, noScale
		d.leaveOut(g, false)
		return nil
	}
	apart := make([]float64, len(g.Readings))
	for j, x := range g.Readings {
		apart[j] = decimal.Difference(x, g.Readings[0], decimal.Unrounded) / sigma
		if !(math.Abs(apart[j]) <= apartMax) {
			return refuse(fmt.Sprintf("groups[%d].readings[%d]", i, j), x,
				"lies %.3g sigmas in force from the first of its set, more than the limit of %g; is it in the same unit?", apart[j], apartMax)
		}
	}
	g.Readings, g.Decimals = apart, limits.DecimalsUnknown
	d.add(apart, false)
	if part < len(d.parts) {
		d.parts[part] += float64(len(apart) - 1)
	}
	return nil
}

func (d *fresh) leaveOut(g *limits.Group, inOldBasis bool) {
	g.Readings = nil
	if inOldBasis {
		d.inOldBasis++
	} else {
		d.excluded++
	}
}

// sigmaAt is the sigma in force of readings with such a mean, in the unit of the readings, and the part it is.
func (f *InForce) sigmaAt(readings []float64) (sigma float64, part int) {
	level := math.Abs(decimal.Mean(readings, decimal.Unrounded))
	sigma, absolute := f.Model.Spread.At(f.Sigma, level)
	if f.Kind == chart.RelativeRange && !absolute {
		sigma *= level / 100
	}
	return sigma, f.partAt(level, absolute)
}

// partAt counts the bands, the first holding below its lower end as well; low means of a relative range come last.
func (f *InForce) partAt(level float64, absolute bool) (part int) {
	s := f.Model.Spread
	switch {
	case s == nil:
		return 0
	case absolute:
		return max(1, len(s.Bands))
	}
	for j := 1; j < len(s.Bands); j++ {
		if level >= s.Bands[j].From {
			part = j
		}
	}
	return part
}
