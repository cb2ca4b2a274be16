package limits

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/counts"
	"limitary/internal/decimal"
)

// settleCentre takes the mean of all counts over all that was inspected, or what is set in its place. A mean of zero, or
// of all items, has no sigma and no lines: a rule beyond them would be one for certain events.
func (w *countWork) settleCentre() error {
	res, b, bound := &w.res, w.b, w.req.Counts.MeanUpperBound
	none, all := b.count == 0, b.family == counts.Nonconforming && b.count == b.inspected
	switch {
	case w.req.Centre != nil:
		res.CentreOrigin, res.CentreUnrounded = Target, *w.req.Centre
		return w.checkCentre("centre")
	case len(w.req.Groups) == 0:
		return refuse("groups", "none", "there is nothing to take the centre from; give counts, or a centre")
	case res.N == 0:
		return refuse("groups", fmt.Sprintf("%d groups", len(w.req.Groups)), "all are excluded, so there is nothing to take the centre from")
	case bound != nil && !none:
		return refuse("counts.meanUpperBound", *bound, "takes the place of the mean where all counts are zero, and here they add up to %g; leave it out, or give a centre", b.count)
	case bound != nil:
		res.CentreOrigin, res.CentreUnrounded = Target, *bound
		return w.checkCentre("counts.meanUpperBound")
	case none:
		return refuse("groups", fmt.Sprintf("%d samples", res.N), "all counts are zero, so their mean gives no lines; give a centre as a target, or an upper bound of the mean (counts.meanUpperBound)")
	case all:
		return refuse("groups", fmt.Sprintf("%d samples", res.N), "all items are nonconforming, so their mean gives no lines; give a centre as a target")
	}
	res.CentreUnrounded = w.mean()
	return w.checkCentre("groups")
}

// mean of the plotted statistic over the samples used.
func (w *countWork) mean() float64 {
	if w.req.Kind == chart.P || w.req.Kind == chart.U {
		return w.b.count / w.b.inspected
	}
	return w.b.count / float64(w.res.N)
}

// checkCentre refuses a centre outside the scale of the chart, or one at its ends.
func (w *countWork) checkCentre(field string) error {
	centre, end := w.res.CentreUnrounded, scaleEnd(w.req.Kind, float64(w.req.SubgroupSize))
	switch {
	case !(centre > 0) || math.IsInf(centre, 0):
		return refuse(field, centre, "the centre of a chart of kind %s must be larger than zero", w.req.Kind)
	case centre >= end:
		return refuse(field, centre, "the centre of a chart of kind %s must be less than %g", w.req.Kind, end)
	case w.expected(centre, w.b.largest) > counts.MeanMax:
		return refuse(field, centre, "leads to more than %g expected in the largest sample, of %g; use a larger unit", counts.MeanMax, w.b.largest)
	}
	return nil
}

// expected is the count to be expected in a sample of a size.
func (w *countWork) expected(centre, size float64) float64 {
	if w.req.Kind == chart.P || w.req.Kind == chart.U {
		return centre * size
	}
	return centre
}

// scarce is the lesser of the counts to be expected in a sample of a size: of what is counted, or of the items without.
func (w *countWork) scarce(centre, size float64) float64 {
	expected := w.expected(centre, size)
	if w.req.Kind.Items() {
		return min(expected, size-expected)
	}
	return expected
}

// unitVariance is the variance of the fraction or rate that counting leaves for one item or unit inspected.
func (w *countWork) unitVariance(centre float64) float64 {
	switch w.req.Kind {
	case chart.P:
		return centre * (1 - centre)
	case chart.NP:
		p := centre / float64(w.req.SubgroupSize)
		return p * (1 - p)
	}
	return centre
}

// settleExtra estimates how much more samples vary than counting explains. It is taken about the mean of the samples,
// also where the centre is a target: a bias is no variation between samples.
func (w *countWork) settleExtra() error {
	res, extra := &w.res, w.req.Counts.Extra
	res.SigmaOrigin, res.Origin = res.CentreOrigin, res.CentreOrigin
	if len(w.b.samples) > 1 {
		if c, err := counts.Between(w.b.family, w.b.samples); err == nil {
			w.component = &c
		}
	}
	if extra == NoExtra {
		return nil
	}
	if w.component == nil {
		return refuse("counts.extra", fmt.Sprintf("%d samples", res.N), "extra variation needs at least 2 samples that are not excluded, and counts that are not all zero, nor all that was inspected")
	}
	if res.SigmaOrigin = Estimated; res.CentreOrigin == Target {
		res.Origin = Mixed
	}
	if extra == BetweenSamples {
		res.Model.BetweenSigma = math.Sqrt(w.component.Variance)
		return nil
	}
	return w.laney()
}

func (w *countWork) laney() error {
	z, _, err := counts.Standardised(w.b.family, w.b.samples)
	if err != nil {
		return &Error{"groups", "", err.Error()}
	}
	factor, ranges, err := counts.Laney(z, w.b.breakBefore)
	switch {
	case err != nil:
		return &Error{"groups", "", err.Error()}
	case ranges == 0:
		return refuse("groups", fmt.Sprintf("%d samples", w.res.N), "no two samples follow each other without an exclusion or a break between, so there is no moving range for the factor")
	case factor == 0:
		return refuse("groups", fmt.Sprintf("%d samples", w.res.N), "all moving ranges are zero, so the factor is zero; the samples are equal")
	}
	w.res.MovingRanges, w.res.Model.Inflation = ranges, factor
	return nil
}

// settleInspected chooses the size that lines are published for: the one of all samples (np, c), or the mean of those used,
// for p to a whole item and for u to significantDigits digits.
func (w *countWork) settleInspected() error {
	m := &w.res.Model
	switch {
	case w.req.Kind == chart.NP || w.req.Kind == chart.C:
		m.Inspected = float64(w.req.SubgroupSize)
	case w.res.N == 0:
		return refuse("groups", "none", "a chart of kind %s publishes its lines for the mean size of samples; give at least one sample, which a given centre keeps from moving it", w.req.Kind)
	case w.req.Kind == chart.P:
		m.Inspected = max(1, math.Round(w.b.mean))
	default:
		m.Inspected = decimal.Round(w.b.mean, min(digitsPlaces(w.b.mean), decimal.PlacesMax))
	}
	w.b.smallest, w.b.largest = min(w.b.smallest, m.Inspected), max(w.b.largest, m.Inspected)
	return nil
}
