package changetest

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// side is what one side says of a spread: an unbiased sigma, and degrees of freedom for normal independent readings
// (plain) and for readings as they are (used). Sigmas are in units of the process sigma in force throughout.
type side struct {
	sigma       float64
	plain, used float64
	// square marks a sigma whose square is a mean square, so that plain turns it into one; a mean of ranges or of standard
	// deviations only matches one in its first two moments, and used is what matches.
	square bool
}

// root is the sigma as the root of a mean square.
func (s side) root() float64 {
	switch {
	case math.IsInf(s.plain, 1):
		return s.sigma
	case s.square:
		return s.sigma * chiMean(s.plain)
	}
	return s.sigma * chiMean(s.used)
}

// plainRoot is the same where the readings are taken for normal.
func (s side) plainRoot() float64 {
	if math.IsInf(s.plain, 1) {
		return s.sigma
	}
	return s.sigma * chiMean(s.plain)
}

// reduced takes degrees of freedom down by a factor, though not below one, where an interval for a ratio already says
// nothing and its ends would soon leave the range of numbers.
func reduced(freedom, factor float64) float64 { return math.Min(freedom, math.Max(1, freedom*factor)) }

func isSquare(name limits.Estimator) bool { return name == limits.Overall || name == limits.Pooled }

// spreadSides gives the process sigma of both sides by the estimator in force: like with like. A mean moving range hardly
// sees drift and an overall standard deviation does, so setting one against the other would show drift as spread. The
// reason is Settled unless the new results give no estimate, or zero.
func (r *Request) spreadSides(d *fresh, c Correlation) (old, now side, phi float64, without Reason) {
	f := &r.InForce
	e, ok := d.estimate(f.Estimator)
	switch {
	case !ok:
		return old, now, 1, TooFew
	case e.Sigma < spreadMin:
		return old, now, 1, NoSpread
	}
	phi = d.tails(f.Estimator, e.Sigma)
	factor := 1 / phi
	if f.Estimator == limits.Overall {
		factor *= c.squaresFactor()
	}
	square := isSquare(f.Estimator)
	now = side{sigma: e.Sigma, plain: e.DegreesOfFreedom, used: reduced(e.DegreesOfFreedom, factor), square: square}
	freedom := f.freedom()
	if f.Kind.Duplicates() {
		freedom = f.duplicatesFreedom(d.parts)
	}
	old = side{sigma: 1, plain: freedom, used: reduced(freedom, factor), square: square}
	return old, now, phi, Settled
}

// meansSides gives the scatter of the means of both sides, for charts of means. Where the means of the old basis are not
// described, the old side is what the scatter within explains, on which the lines rest.
func (r *Request) meansSides(d *fresh, c Correlation) (old, now side, without Reason) {
	f := &r.InForce
	switch {
	case d.groups() < 2:
		return old, now, TooFew
	case d.meansSigma() < spreadMin:
		return old, now, NoSpread
	}
	factor := c.squaresFactor() / math.Max(1, kurtosisTails(d.means))
	freedom := d.freedomMeans()
	now = side{sigma: d.meansSigma() / chiMean(freedom), plain: freedom, used: reduced(freedom, factor), square: true}
	old = side{sigma: f.unit(), plain: f.freedom(), used: f.freedom(), square: isSquare(f.Estimator)}
	if sigma, v, known := f.means(); known {
		if !math.IsInf(v, 1) {
			sigma /= chiMean(v)
		}
		old = side{sigma: sigma, plain: v, used: reduced(v, factor), square: true}
	}
	return old, now, Settled
}

// variance is that of a mean, and its degrees of freedom. The zero value is that of a target.
type variance struct{ of, freedom float64 }

// newVariance is that of the mean of the new results; false where they repeat each other so much that next to no
// independent ones are left.
func (d *fresh) newVariance(c Correlation) (variance, bool) {
	k := d.weight()
	factor, ok := c.meanFactor(float64(d.groups()))
	s := d.meansSigma()
	return variance{s * s * factor / k, d.freedomMeans() * c.squaresFactor()}, ok
}

// oldVariance is that of the centre in force. Nothing is known of the old results' order, so they are taken to repeat
// each other as the new ones do; a moving range of such results sees only σ√(1-r). Nor is it known how the old means
// varied, where MeansSigma is not given: as much beyond the scatter within as the new ones do.
func (f *InForce) oldVariance(d *fresh, c Correlation) (variance, bool) {
	if f.CentreTarget {
		return variance{}, true
	}
	k := float64(f.Readings) / float64(f.SubgroupSize)
	factor, ok := c.meanFactor(float64(f.Groups))
	freedom := f.freedom()
	square := f.unit() * f.unit()
	if !f.SigmaTarget {
		root := chiMean(freedom)
		square *= root * root
	}
	sigma, v, known := f.means()
	switch {
	case known:
		square, freedom = sigma*sigma, v*c.squaresFactor()
		if math.IsInf(v, 1) {
			factor = c.inflation()
		}
	case f.Kind != chart.Individuals:
		factor = c.inflation()
		if excess, relative := d.betweenExcess(f.Estimator); excess > 1 {
			square *= excess
			freedom = 2 / (2/freedom + relative)
		}
	case f.SigmaTarget:
		factor = c.inflation()
	case isMovingRange(f.Estimator):
		factor = c.inflation() / (1 - c.Used)
	default:
		freedom *= c.squaresFactor()
	}
	return variance{square * factor / k, freedom}, ok
}

// betweenExcess is the F of the analysis of variance, how much more the new means vary than the scatter within explains,
// and the relative variance of that figure.
func (d *fresh) betweenExcess(name limits.Estimator) (excess, relative float64) {
	e, ok := d.estimate(name)
	if !ok || e.Sigma < spreadMin {
		return 1, 0
	}
	ratio := d.meansSigma() / (e.Sigma * chiMean(e.DegreesOfFreedom))
	return ratio * ratio * float64(d.size), 2/d.freedomMeans() + 2/e.DegreesOfFreedom
}
