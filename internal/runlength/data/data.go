// Package data holds the distributions of the points of a trace, in the sigmas of the limits and from their centre: where
// limits are right and the process in control, points have mean 0 and standard deviation 1.
//
// Points of the location trace are normal unless another shape is asked for, and those of a dispersion trace are
// ranges or standard deviations of normal readings. Probabilities between two values keep their digits in both tails.
package data

import (
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// Distribution is the distribution of a point.
type Distribution interface {
	// Between gives P(lo < Z < hi); the ends may be infinite.
	Between(lo, hi float64) float64
	// Density gives the probability density.
	Density(z float64) float64
	// Support gives values outside which less than 1e-17 lies.
	Support() (lo, hi float64)
	// Draw gives a random point.
	Draw(r *rand.Rand) float64
}

// Normal points have mean Mean and standard deviation SD.
type Normal struct{ Mean, SD float64 }

// Between gives P(lo < Z < hi).
func (d Normal) Between(lo, hi float64) float64 {
	a, b := (lo-d.Mean)/d.SD, (hi-d.Mean)/d.SD
	if a > 0 { // the difference of two upper tails keeps its digits there
		a, b = -b, -a
	}
	switch {
	case a >= b:
		return 0
	case b > 0 && math.IsInf(a, -1):
		return 1 - below(-b)
	case a < 0 && b > 0:
		return (math.Erf(b/math.Sqrt2) - math.Erf(a/math.Sqrt2)) / 2
	}
	return below(b) - below(a)
}

func below(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }

// Density gives the probability density.
func (d Normal) Density(z float64) float64 {
	x := (z - d.Mean) / d.SD
	return math.Exp(-x*x/2) / (d.SD * math.Sqrt(2*math.Pi))
}

// normalReach leaves less than 1e-17 outside on either side.
const normalReach = 8.6

// Support gives where points lie.
func (d Normal) Support() (lo, hi float64) {
	return d.Mean - normalReach*d.SD, d.Mean + normalReach*d.SD
}

// Draw gives a random point.
func (d Normal) Draw(r *rand.Rand) float64 { return d.Mean + d.SD*r.NormFloat64() }

// T points follow Student's t with Freedom > 2 degrees of freedom, scaled to mean Mean and standard deviation SD: more
// far points than normal ones.
type T struct{ Freedom, Mean, SD float64 }

// scale is the factor of a t value: its variance is Freedom/(Freedom-2).
func (d T) scale() float64 { return d.SD * math.Sqrt((d.Freedom-2)/d.Freedom) }

// Between gives P(lo < Z < hi).
func (d T) Between(lo, hi float64) float64 {
	a, b := (lo-d.Mean)/d.scale(), (hi-d.Mean)/d.scale()
	if a > 0 {
		a, b = -b, -a
	}
	if a >= b {
		return 0
	}
	if b > 0 {
		return 1 - d.tail(-b) - d.tail(a)
	}
	return d.tail(b) - d.tail(a)
}

// tail gives P(T < t) for t <= 0 by the incomplete beta function (Abramowitz and Stegun 26.7.1, from memory).
func (d T) tail(t float64) float64 {
	if math.IsInf(t, -1) {
		return 0
	}
	return mathext.RegIncBeta(d.Freedom/2, 0.5, d.Freedom/(d.Freedom+t*t)) / 2
}

// Density gives the probability density.
func (d T) Density(z float64) float64 {
	return distuv.StudentsT{Mu: d.Mean, Sigma: d.scale(), Nu: d.Freedom}.Prob(z)
}

// Support gives where points lie; the tails of few degrees of freedom reach far.
func (d T) Support() (lo, hi float64) {
	reach := d.scale() * math.Pow(1e17, 1/d.Freedom) * math.Sqrt(d.Freedom)
	return d.Mean - reach, d.Mean + reach
}

// Draw gives a random point: a normal value over the root of a mean square.
func (d T) Draw(r *rand.Rand) float64 {
	chi := 2 * gammaDraw(r, d.Freedom/2)
	return d.Mean + d.scale()*r.NormFloat64()*math.Sqrt(d.Freedom/chi)
}

// Gamma points follow a gamma distribution of Shape, moved and scaled to mean Mean and standard deviation SD: skewed to
// high values by 2/√Shape, and none lies lower than √Shape standard deviations below the mean.
type Gamma struct{ Shape, Mean, SD float64 }

// standard gives the value of a gamma variable of unit scale: it has mean and variance Shape.
func (d Gamma) standard(z float64) float64 {
	return d.Shape + math.Sqrt(d.Shape)*(z-d.Mean)/d.SD
}

// Between gives P(lo < Z < hi).
func (d Gamma) Between(lo, hi float64) float64 {
	return gammaBetween(d.Shape, d.standard(lo), d.standard(hi))
}

func gammaBetween(shape, a, b float64) float64 {
	a, b = max(a, 0), max(b, 0)
	if a >= b {
		return 0
	}
	if a > shape {
		return upperGamma(shape, a) - upperGamma(shape, b)
	}
	return lowerGamma(shape, b) - lowerGamma(shape, a)
}

func lowerGamma(shape, x float64) float64 {
	if math.IsInf(x, 1) {
		return 1
	}
	return mathext.GammaIncReg(shape, x)
}

func upperGamma(shape, x float64) float64 {
	if math.IsInf(x, 1) {
		return 0
	}
	return mathext.GammaIncRegComp(shape, x)
}

// Density gives the probability density.
func (d Gamma) Density(z float64) float64 {
	x := d.standard(z)
	if x <= 0 {
		return 0
	}
	log, _ := math.Lgamma(d.Shape)
	return math.Exp((d.Shape-1)*math.Log(x)-x-log) * math.Sqrt(d.Shape) / d.SD
}

// Support gives where points lie.
func (d Gamma) Support() (lo, hi float64) {
	root := math.Sqrt(d.Shape)
	return d.Mean - root*d.SD, d.Mean + (45+9*root)*d.SD/root
}

// Draw gives a random point.
func (d Gamma) Draw(r *rand.Rand) float64 {
	return d.Mean + d.SD*(gammaDraw(r, d.Shape)-d.Shape)/math.Sqrt(d.Shape)
}

// gammaDraw gives a gamma variable of unit scale by the squeeze of Marsaglia and Tsang (2000, ACM Transactions on
// Mathematical Software 26(3), from memory).
func gammaDraw(r *rand.Rand, shape float64) float64 {
	if shape < 1 {
		return gammaDraw(r, shape+1) * math.Pow(1-r.Float64(), 1/shape)
	}
	d := shape - 1./3
	c := 1 / math.Sqrt(9*d)
	for {
		x := r.NormFloat64()
		v := 1 + c*x
		if v <= 0 {
			continue
		}
		v = v * v * v
		if math.Log(1-r.Float64()) < x*x/2+d-d*v+d*math.Log(v) {
			return d * v
		}
	}
}

// Truncated points are those of Whole that lie between Lo and Hi, which have probability Inside.
type Truncated struct {
	Whole          Distribution
	Lo, Hi, Inside float64
}

// Truncate gives the points of d between lo and hi.
func Truncate(d Distribution, lo, hi float64) Truncated {
	return Truncated{d, lo, hi, d.Between(lo, hi)}
}

// Between gives P(lo < Z < hi).
func (d Truncated) Between(lo, hi float64) float64 {
	return d.Whole.Between(max(lo, d.Lo), min(hi, d.Hi)) / d.Inside
}

// Density gives the probability density.
func (d Truncated) Density(z float64) float64 {
	if z < d.Lo || z > d.Hi {
		return 0
	}
	return d.Whole.Density(z) / d.Inside
}

// Support gives where points lie.
func (d Truncated) Support() (lo, hi float64) {
	lo, hi = d.Whole.Support()
	return max(lo, d.Lo), min(hi, d.Hi)
}

// Draw gives a random point.
func (d Truncated) Draw(r *rand.Rand) float64 {
	for {
		if z := d.Whole.Draw(r); z > d.Lo && z < d.Hi {
			return z
		}
	}
}

// Mirrored points are those of Whole with their sign changed.
type Mirrored struct{ Whole Distribution }

// Between gives P(lo < Z < hi).
func (d Mirrored) Between(lo, hi float64) float64 { return d.Whole.Between(-hi, -lo) }

// Density gives the probability density.
func (d Mirrored) Density(z float64) float64 { return d.Whole.Density(-z) }

// Support gives where points lie.
func (d Mirrored) Support() (lo, hi float64) {
	lo, hi = d.Whole.Support()
	return -hi, -lo
}

// Draw gives a random point.
func (d Mirrored) Draw(r *rand.Rand) float64 { return -d.Whole.Draw(r) }

// Rounded points are those of Exact rounded to the nearest multiple of Step.
type Rounded struct {
	Exact Distribution
	Step  float64
}

// At gives the probability of the value that rounds as z does.
func (d Rounded) At(z float64) float64 {
	cell := math.Round(z/d.Step) * d.Step
	return d.Exact.Between(cell-d.Step/2, cell+d.Step/2)
}

// onLattice reports whether z is a multiple of the step, as far as decimals in float64 can say.
func (d Rounded) onLattice(z float64) bool {
	cells := z / d.Step
	return math.Abs(cells-math.Round(cells)) < 1e-9*max(1, math.Abs(cells))
}

// Between gives P(lo < Z < hi) for the rounded value: whole cells strictly inside.
func (d Rounded) Between(lo, hi float64) float64 {
	return d.Exact.Between(d.edge(lo, true), d.edge(hi, false))
}

// edge gives the cell border that separates multiples beyond z, above or below it.
func (d Rounded) edge(z float64, above bool) float64 {
	if math.IsInf(z, 0) {
		return z
	}
	half := d.Step / 2
	if d.onLattice(z) {
		cell := math.Round(z/d.Step) * d.Step
		if above {
			return cell + half
		}
		return cell - half
	}
	return math.Floor(z/d.Step)*d.Step + half
}

// On gives P(Z = z).
func (d Rounded) On(z float64) float64 {
	if !d.onLattice(z) {
		return 0
	}
	return d.At(z)
}

// Density is not defined for rounded values; it gives that of the exact ones.
func (d Rounded) Density(z float64) float64 { return d.Exact.Density(z) }

// Support gives where points lie.
func (d Rounded) Support() (lo, hi float64) {
	lo, hi = d.Exact.Support()
	return lo - d.Step, hi + d.Step
}

// Draw gives a random point.
func (d Rounded) Draw(r *rand.Rand) float64 { return math.Round(d.Exact.Draw(r)/d.Step) * d.Step }
