package limits

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// runAnalysis is the one-way analysis of variance of analytical runs of any sizes, with the run a random effect. With n_i
// readings in run i, a runs, κ the mean of 1/n_i and S² the variance of the run means (each counting alike, divisor a-1),
//
//	E(S²) = s_b² + κ·s_w²    so    s_b² = S² - κ·s_w²
//
// which is unbiased whatever the sizes and, where they are equal, the estimate of the usual table, (MSB - MSW)/n. At
// unequal sizes it is preferred to the form with weights n_i and n0: run means have variances of the like size wherever
// there is anything between runs, so that S² follows χ² closely, on which the intervals rest (Thomas and Hultquist 1978,
// Annals of Statistics 6, 582-587; Burdick and Graybill 1992; both from memory). Where s_b is far below s_w, the weighted
// form would be more precise.
type runAnalysis struct {
	// runs is a, inverse κ, size the nominal number of readings.
	runs          int
	inverse, size float64
	// within is s_w² and between s_b², not below zero; raw is s_b² as estimated. meanSquare is S².
	within, between, raw, meanSquare float64
	// withinFreedom is infinite where s_w is given; meansFreedom belongs to S².
	withinFreedom, meansFreedom float64
	// given says that s_b is.
	given bool
	// centre is the mean of the run means with weights 1/(s_b² + s_w²/n_i).
	centre, centreError, centreFreedom float64
	// betweenFreedom belongs to s_b².
	betweenFreedom float64
}

// negligibleBetween is the share of a run mean's sigma under which the part between runs may vanish in rounding: it then
// moves no line by a thousandth of a sigma.
const negligibleBetween = 0.04

// settleBetween takes or estimates the sigma between runs.
func (res *Result) settleBetween(req *Request, b *basis) error {
	if req.Kind != chart.RunMeans {
		return nil
	}
	if req.BetweenSigma != nil {
		res.BetweenOrigin, res.BetweenUnrounded = Target, *req.BetweenSigma
	} else if b.groups < 2 {
		return refuse("groups", b.groups, "the sigma between runs needs at least 2 runs that are not excluded; or give it")
	}
	if b.groups == 0 {
		return nil
	}
	within, freedom := res.SigmaUnrounded*res.SigmaUnrounded, math.Inf(1)
	if e := res.chosen(); e != nil {
		within, freedom = e.meanSquare(), e.DegreesOfFreedom
	}
	res.runs = analyse(b, within, freedom, req.BetweenSigma, req.SubgroupSize)
	if req.BetweenSigma == nil {
		res.BetweenUnrounded = math.Sqrt(res.runs.between)
	}
	return nil
}

// meanSquare turns the unbiased estimate of σ into the unbiased one of σ²; for the pooled one it is the mean square.
func (e *Estimate) meanSquare() float64 { return e.Sigma * e.Sigma / (1 + e.variance) }

// analyse needs one run where between is given, else two.
func analyse(b *basis, within, freedom float64, between *float64, size int) *runAnalysis {
	a := &runAnalysis{runs: len(b.runs), size: float64(size), within: within, withinFreedom: freedom, given: between != nil}
	means := make([]float64, len(b.runs))
	for i, r := range b.runs {
		means[i] = r.mean
		a.inverse += 1 / float64(r.n)
	}
	a.inverse /= float64(a.runs)
	if a.runs > 1 {
		_, squares := deviations(means, decimal.Unrounded)
		a.meanSquare = squares / float64(a.runs-1)
		a.raw = a.meanSquare - a.inverse*within
	}
	a.between = max(0, a.raw)
	if a.given {
		a.between = *between * *between
	}
	a.countFreedom(b.runs)
	a.takeCentre(b)
	return a
}

// fitted is the mean variance of the run means as settled.
func (a *runAnalysis) fitted() float64 { return a.between + a.inverse*a.within }

// countFreedom gives S² the freedom of a multiple of χ² with its mean and variance (Satterthwaite 1946, from memory). For
// independent means of variances v_i, in units of their average, var(S²) = 2·(Σv_i²·(1-2/a) + 1)/(a-1)². The freedom of
// sums of S² and s_w² follows from their variances likewise.
func (a *runAnalysis) countFreedom(runs []run) {
	n, squares := float64(a.runs), 0.0
	for _, r := range runs {
		v := (a.between + a.within/float64(r.n)) / a.fitted()
		squares += v * v
	}
	a.meansFreedom = (n - 1) * (n - 1) / (squares*(1-2/n) + 1)
	unit := a.within / a.fitted()
	share := a.between / a.fitted()
	a.betweenFreedom = a.freedomOf(share, 1, a.inverse*unit)
	if a.given {
		a.betweenFreedom = 0
	}
}

// freedomOf gives the freedom of an estimated variance whose errors are those of S², times means, and of s_w², times
// within; all in units of the fitted variance of the means.
func (a *runAnalysis) freedomOf(variance, means, within float64) float64 {
	errors := within * within / a.withinFreedom
	if means != 0 {
		errors += means * means / a.meansFreedom
	}
	return variance * variance / errors
}

// takeCentre weighs every run mean by its precision. With equal sizes that is the mean of all readings.
func (a *runAnalysis) takeCentre(b *basis) {
	origin := decimal.Mean(b.readings, decimal.Unrounded)
	var weights, squares, inner, sum float64
	equal := true
	for _, r := range b.runs {
		n := float64(r.n)
		w := a.fitted() / (a.between + a.within/n)
		weights += w
		squares += w * w
		inner += w * w / n
		sum += w * difference(r.mean, origin, decimal.Unrounded)
		equal = equal && r.n == b.runs[0].n
	}
	if a.centre = origin; !equal {
		a.centre += sum / weights
	}
	a.centreError = math.Sqrt(a.fitted() / weights)
	// The derivatives of 1/Σw by s_b² and s_w² are Σw²/(Σw)² and Σ(w²/n)/(Σw)²; s_b² holds -κ·s_w².
	unit, by := a.within/a.fitted(), weights*weights
	if a.given {
		a.centreFreedom = a.freedomOf(1/weights, 0, unit*inner/by)
	} else {
		a.centreFreedom = max(1, a.freedomOf(1/weights, squares/by, unit*(inner-a.inverse*squares)/by))
	}
}

// components lists the parts of the variance of a single reading.
func (res *Result) components() []Component {
	if res.Kind != chart.RunMeans {
		return nil
	}
	within := Component{Name: "WITHIN", Sigma: res.SigmaUnrounded, Interval: res.Intervals.Sigma}
	between := Component{Name: "BETWEEN", Sigma: res.BetweenUnrounded}
	total := Component{Name: "TOTAL", Sigma: math.Hypot(res.SigmaUnrounded, res.BetweenUnrounded)}
	if e := res.chosen(); e != nil {
		within.DegreesOfFreedom = e.DegreesOfFreedom
	}
	if a := res.runs; a != nil && res.BetweenOrigin == Estimated {
		between.DegreesOfFreedom, between.Interval, between.Truncated = a.betweenFreedom, a.betweenInterval(), a.raw < 0
	}
	if a := res.runs; a != nil && res.Origin != Target {
		if freedom := a.totalFreedom(); !math.IsInf(freedom, 1) {
			total.DegreesOfFreedom = freedom
			total.Interval = chiOfMeanSquare(total.Sigma, freedom)
		}
	}
	return []Component{within, between, total}
}

// totalFreedom belongs to s_b² + s_w².
func (a *runAnalysis) totalFreedom() float64 {
	unit := a.within / a.fitted()
	share := a.between / a.fitted()
	if a.given {
		return a.freedomOf(share+unit, 0, unit)
	}
	return max(1, a.freedomOf(share+unit, 1, (1-a.inverse)*unit))
}
