package limits

import (
	"math"

	"limitary/internal/chart"
)

// Comparison is a figure of the results against one that was given.
type Comparison struct {
	Estimate float64
	Interval Interval
}

// compareTargets holds the results against the figures that were given for them. What the results say of the spread is
// taken from them alone, so that a wrong sigma does not make the interval of the bias wrong as well.
func (res *Result) compareTargets(b *basis) {
	own := res.usual()
	if res.CentreOrigin == Target && b.groups > 0 {
		mean, half := res.dataCentre(b, own)
		bias := mean - res.CentreUnrounded
		res.Bias = &Comparison{bias, Interval{bias - half, bias + half}}
	}
	if res.SigmaOrigin == Target && own != nil {
		res.SigmaRatio = ratioOf(own, res.SigmaUnrounded)
	}
	if res.BetweenOrigin == Target && res.Model.BetweenSigma > 0 && b.groups > 1 {
		a := res.alone(b, own)
		in := a.betweenInterval()
		res.BetweenRatio = &Comparison{
			math.Sqrt(a.between) / res.BetweenUnrounded,
			Interval{in.Lower / res.BetweenUnrounded, in.Upper / res.BetweenUnrounded},
		}
	}
}

// usual gives the kind's default estimate, nil where the results have none above zero.
func (res *Result) usual() *Estimate {
	for i := range res.Estimates {
		if e := &res.Estimates[i]; e.Name == EstimatorsOf(res.Kind)[0] && e.Sigma > 0 {
			return e
		}
	}
	return nil
}

func ratioOf(e *Estimate, sigma float64) *Comparison {
	in := chiInterval(e.Sigma, e.DegreesOfFreedom)
	return &Comparison{e.Sigma / sigma, Interval{in.Lower / sigma, in.Upper / sigma}}
}

// alone analyses runs by what they show themselves; the sigma within is the given one only where they show none.
func (res *Result) alone(b *basis, own *Estimate) *runAnalysis {
	within, freedom := res.SigmaUnrounded*res.SigmaUnrounded, math.Inf(1)
	if own != nil {
		within, freedom = own.meanSquare(), own.DegreesOfFreedom
	}
	var between *float64
	if b.groups < 2 {
		between = &res.BetweenUnrounded
	}
	return analyse(b, within, freedom, between, res.SubgroupSize)
}

// dataCentre gives the mean of the results and half the width of its interval.
func (res *Result) dataCentre(b *basis, own *Estimate) (mean, half float64) {
	if res.Kind == chart.RunMeans {
		a := res.alone(b, own)
		return a.centre, a.centreHalf()
	}
	sigma, spread := res.SigmaUnrounded, studentQuantile((1+Confidence)/2, math.Inf(1))
	if e := res.chosen(); e != nil {
		own = e
	}
	if own != nil {
		sigma, spread = own.Sigma, own.spread()
	}
	return res.dataMean, spread * sigma / math.Sqrt(float64(res.Readings))
}

// spread is the quantile that takes the place of the normal one where sigma is this estimate.
func (e *Estimate) spread() float64 {
	return studentQuantile((1+Confidence)/2, e.DegreesOfFreedom) * chiMean(e.DegreesOfFreedom)
}
