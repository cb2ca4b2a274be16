package limits

import (
	"fmt"
	"math"
)

// spreadFit is sigma as a function of the size of the mean, σ² = s0² + b²·mean², fitted to the variances v_i of sets of
// duplicates with ν_i degrees of freedom each. For normal readings ν_i·v_i/σ_i² follows χ², a gamma distribution, whose
// likelihood is
//
//	-½ Σ ν_i·(log σ_i² + v_i/σ_i²)
//
// a generalised linear model with gamma errors and identity link (McCullagh and Nelder 1989, from memory). Of s0² and b²,
// neither below zero, the likeliest are taken. They are found along their ratio: for a given ratio the common factor has a
// closed form, so that one figure is searched for, from end to end, and no local maximum is mistaken for the highest.
// Fisher's scoring, here weighted least squares of v on mean² with weights ν/σ⁴, then sharpens the answer.
//
// The estimates are consistent. From few sets s0 and b are a little small, as roots of nearly unbiased squares are: by
// about 1/(4·degrees of freedom), see the tests.
type spreadFit struct {
	sets []replicates
	// unit is the largest mean, in which x = (mean/unit)² is, and scale the pooled variance, in which alpha (s0²) and beta
	// (b²·unit²) are.
	unit, scale float64
	alpha, beta float64
	// The inverse of Fisher's information for alpha and beta.
	varAlpha, varBeta, covariance float64
	freedom                       float64
}

// meansSpanMin is the ratio of largest to smallest mean that a function of the mean needs.
const meansSpanMin = 2

// fitSpread refuses a basis that cannot tell s0 from b.
func fitSpread(d *duplicates) (*spreadFit, error) {
	const field = "duplicates.function"
	if len(d.sets) < PartGroupsMin {
		return nil, refuse("groups", fmt.Sprintf("%d sets", len(d.sets)), "a function of the mean needs at least %d sets of duplicates that are not excluded; or give s0 and b", PartGroupsMin)
	}
	f := &spreadFit{sets: d.sets}
	least := math.Inf(1)
	for _, s := range d.sets {
		f.unit, least = max(f.unit, s.size), min(least, s.size)
		f.scale += s.squares
		f.freedom += float64(s.n - 1)
	}
	f.scale /= f.freedom
	switch {
	case f.scale == 0:
		return nil, refuse("groups", "spread 0", "the spread is zero, so there is nothing to fit; the results are equal or reported too coarsely")
	case f.unit == 0 || f.unit < meansSpanMin*least:
		return nil, refuse(field, fmt.Sprintf("means from %g to %g", least, f.unit), "growth with the mean shows only over means that differ by a factor of %d or more; use one sigma, or bands", meansSpanMin)
	}
	if f.search() {
		return nil, refuse(field, "s0 is 0", "the scatter is proportional to the mean, down to the smallest, so that none would be left at zero; use a relative_range chart or bands, or give s0 and b")
	}
	f.informed()
	return f, nil
}

// x and v of a set, in units.
func (f *spreadFit) x(s *replicates) float64 { return (s.size / f.unit) * (s.size / f.unit) }
func (f *spreadFit) v(s *replicates) float64 { return s.squares / float64(s.n-1) / f.scale }

// likeliest gives the factor that suits shares alpha : beta best, and minus twice the logarithm of the likelihood there.
func (f *spreadFit) likeliest(alpha, beta float64) (factor, deviance float64) {
	for i := range f.sets {
		s := &f.sets[i]
		at, freedom := alpha+beta*f.x(s), float64(s.n-1)
		factor += freedom * f.v(s) / at
		deviance += freedom * math.Log(at)
	}
	factor /= f.freedom
	return factor, deviance + f.freedom*math.Log(factor)
}

const (
	// ratioReach bounds the logarithm of alpha/beta, in steps of ratioStep.
	ratioReach, ratioStep = 28., 0.5
	// sameDeviance is a difference that no data tell apart.
	sameDeviance = 1e-6
)

// search finds alpha and beta, and reports whether the likeliest alpha is zero.
func (f *spreadFit) search() (proportional bool) {
	shares := func(log float64) (alpha, beta float64) { return 1 / (1 + math.Exp(-log)), 1 / (1 + math.Exp(log)) }
	deviance := func(log float64) float64 {
		alpha, beta := shares(log)
		_, d := f.likeliest(alpha, beta)
		return d
	}
	best, lowest := 0.0, math.Inf(1)
	for log := -ratioReach; log <= ratioReach; log += ratioStep {
		if d := deviance(log); d < lowest {
			best, lowest = log, d
		}
	}
	best = goldenLowest(deviance, best-ratioStep, best+ratioStep)
	lowest = min(lowest, deviance(best))
	if _, d := f.likeliest(0, 1); d <= lowest+sameDeviance { // not so, or NaN, where a mean is zero
		return true
	}
	if _, d := f.likeliest(1, 0); d <= lowest+sameDeviance {
		f.alpha, f.beta = 1, 0 // in units of the pooled variance
		return false
	}
	alpha, beta := shares(best)
	factor, _ := f.likeliest(alpha, beta)
	f.alpha, f.beta = factor*alpha, factor*beta
	f.sharpen()
	return false
}

// goldenLowest gives the place of the lowest value by golden section, to about seven digits.
func goldenLowest(f func(float64) float64, low, high float64) float64 {
	ratio := (math.Sqrt(5) - 1) / 2
	a, b := high-ratio*(high-low), low+ratio*(high-low)
	atA, atB := f(a), f(b)
	for high-low > 1e-7 {
		if atA < atB {
			high, b, atB = b, a, atA
			a = high - ratio*(high-low)
			atA = f(a)
		} else {
			low, a, atA = a, b, atB
			b = low + ratio*(high-low)
			atB = f(b)
		}
	}
	return low + (high-low)/2
}

// sharpen repeats Fisher's scoring while it stays inside and moves.
func (f *spreadFit) sharpen() {
	for range 50 {
		var w, wx, wxx, wv, wxv float64
		for i := range f.sets {
			s := &f.sets[i]
			x, v := f.x(s), f.v(s)
			weight := float64(s.n-1) / ((f.alpha + f.beta*x) * (f.alpha + f.beta*x))
			w, wx, wxx, wv, wxv = w+weight, wx+weight*x, wxx+weight*x*x, wv+weight*v, wxv+weight*x*v
		}
		determinant := w*wxx - wx*wx
		alpha, beta := (wxx*wv-wx*wxv)/determinant, (w*wxv-wx*wv)/determinant
		if !(alpha > 0) || !(beta > 0) {
			return
		}
		moved := math.Abs(alpha-f.alpha)/alpha + math.Abs(beta-f.beta)/beta
		if f.alpha, f.beta = alpha, beta; moved < 1e-13 {
			return
		}
	}
}

// informed takes the variances of alpha and beta from Fisher's information, ½Σν/σ⁴·(1, x; x, x²). Where there is no growth
// alpha is simply the pooled variance.
func (f *spreadFit) informed() {
	var w, wx, wxx float64
	for i := range f.sets {
		s := &f.sets[i]
		x := f.x(s)
		weight := float64(s.n-1) / 2 / ((f.alpha + f.beta*x) * (f.alpha + f.beta*x))
		w, wx, wxx = w+weight, wx+weight*x, wxx+weight*x*x
	}
	determinant := w*wxx - wx*wx
	f.varAlpha, f.varBeta, f.covariance = wxx/determinant, w/determinant, -wx/determinant
	if f.beta == 0 {
		f.varAlpha, f.covariance = 2/f.freedom, 0
	}
}

// part gives a figure whose square is value, in units of the pooled variance, estimated with such a variance. Its interval
// is that of a mean square with Satterthwaite's freedom, or where there is hardly any, that of a normal square.
func (f *spreadFit) part(name string, value, variance, unit float64) Part {
	root := func(v float64) float64 { return math.Sqrt(max(0, v)*f.scale) / unit }
	p := Part{Name: name, Groups: len(f.sets), Sigma: root(value), DegreesOfFreedom: 2 * value * value / variance}
	if p.DegreesOfFreedom >= partFreedomMin {
		p.Interval = chiOfMeanSquare(p.Sigma, p.DegreesOfFreedom)
		return p
	}
	reach := studentQuantile((1+Confidence)/2, math.Inf(1)) * math.Sqrt(variance)
	p.Interval = &Interval{root(value - reach), root(value + reach)}
	return p
}

// partFreedomMin is the freedom under which a square is known so little that it may as well be zero.
const partFreedomMin = 2

// settleFunction fits s0 and b or takes them as given.
func (res *Result) settleFunction(d *duplicates) error {
	o := &d.req.Duplicates
	middle := d.medianSize()
	if o.S0 != nil {
		res.SigmaOrigin = Target
		res.Parts = []Part{{Name: PartS0, Groups: len(d.sets), Sigma: *o.S0, Origin: Target}, {Name: PartB, Groups: len(d.sets), Sigma: *o.B, Origin: Target}}
		res.SigmaUnrounded = math.Hypot(*o.S0, *o.B*middle)
		res.SigmaRatio = d.ratioTo(*o.S0, *o.B)
		return nil
	}
	f, err := fitSpread(d)
	if err != nil {
		return err
	}
	res.Parts = []Part{f.part(PartS0, f.alpha, f.varAlpha, 1), f.part(PartB, f.beta, f.varBeta, f.unit)}
	x := (middle / f.unit) * (middle / f.unit)
	process := f.part("", f.alpha+x*f.beta, f.processVariance(x), 1)
	res.SigmaUnrounded, res.Intervals.Sigma = process.Sigma, process.Interval
	return nil
}

// processVariance is that of alpha + x·beta; without growth, where beta is no longer estimated, that of alpha.
func (f *spreadFit) processVariance(x float64) float64 {
	if f.beta == 0 {
		return f.varAlpha
	}
	return f.varAlpha + 2*x*f.covariance + x*x*f.varBeta
}

// ratioTo gives the pooled standard deviation of readings that are each divided by what s0 and b say of them.
func (d *duplicates) ratioTo(s0, b float64) *Comparison {
	squares, freedom := 0.0, 0
	for _, s := range d.sets {
		root := math.Sqrt(s.squares) / math.Hypot(s0, b*s.size)
		squares += root * root
		freedom += s.n - 1
	}
	if e, ok := chiEstimate(Pooled, squares, freedom, len(d.sets)); ok && e.Sigma > 0 {
		return ratioOf(&e, 1)
	}
	return nil
}
