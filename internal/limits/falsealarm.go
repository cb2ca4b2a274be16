package limits

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
)

// FalseAlarm is the rate at which single points of an unchanged process fall beyond the three-sigma lines of the location
// trace. Lines from few results may lie too near or too far, so the rate they will have is itself uncertain: half of all
// bases of this size give a rate above the median, one in ten one below P10, and one in ten one above P90. Nominal is the
// rate of lines from known figures. A fixed or absent line adds nothing to it.
type FalseAlarm struct{ Median, P10, P90, Nominal float64 }

// alarmLaw says how centre and sigma of a basis vary, in units of the true sigma of a plotted point. The centre is off by
// a normal amount with standard deviation error, 0 where it is given. The square of the estimated sigma, independent of
// it, is the larger of
//
//	scale·χ²/freedom - shift    and    floor·χ²/floorFreedom
//
// the second for run means only, whose sigma is never below the part within. Freedom is infinite where sigma is given.
type alarmLaw struct {
	error                 float64
	freedom, scale, shift float64
	floor, floorFreedom   float64
	twoSided              bool
}

func (res *Result) falseAlarm() *FalseAlarm {
	lower, upper := res.Location.LowerAction.Basis == chart.SigmaMultiple, res.Location.UpperAction.Basis == chart.SigmaMultiple
	law := alarmLaw{freedom: math.Inf(1), scale: 1}
	if res.runs != nil {
		law = res.runs.alarmLaw()
	} else if e := res.chosen(); e != nil {
		mean := chiMean(e.DegreesOfFreedom)
		law.freedom, law.scale = e.DegreesOfFreedom, 1/(mean*mean)
	}
	law.twoSided = lower && upper
	if res.CentreOrigin == Estimated {
		law.error = res.centreError() / res.locationSigma()
	}
	if !lower && !upper || law.error == 0 && math.IsInf(law.freedom, 1) {
		return nil
	}
	rates := alarmRates.of(law)
	return &rates
}

// alarmLaw is that of a run mean of nominal size, for the variances as settled. Of S² - (κ-1/n)·s_w² the first varies by
// far the most where sizes differ; where they do not, it is the only one. What the second varies is left out of the shift,
// so that with s_b far below s_w and sizes that differ the points are cautious, P90 holding for up to 95 of 100 bases.
func (a *runAnalysis) alarmLaw() alarmLaw {
	location := a.between + a.within/a.size
	within := a.within / a.size / location
	if a.given {
		return alarmLaw{freedom: a.withinFreedom, scale: within, shift: -a.between / location}
	}
	return alarmLaw{
		freedom: a.meansFreedom, scale: a.fitted() / location, shift: (a.fitted() - location) / location,
		floor: within, floorFreedom: a.withinFreedom,
	}
}

// alarmMemory keeps the rates of laws met before: bases of one shape have one law. It is emptied when full.
type alarmMemory struct {
	mutex sync.Mutex
	rates map[alarmLaw]FalseAlarm
}

// alarmLawsMax bounds the memory, some 30 kB.
const alarmLawsMax = 512

var alarmRates = alarmMemory{rates: map[alarmLaw]FalseAlarm{}}

func (m *alarmMemory) of(law alarmLaw) FalseAlarm {
	m.mutex.Lock()
	rates, ok := m.rates[law]
	m.mutex.Unlock()
	if ok {
		return rates
	}
	rates = FalseAlarm{Median: law.quantile(0.5), P10: law.quantile(0.1), P90: law.quantile(0.9), Nominal: law.rate(0, chart.ActionMultiple)}
	m.mutex.Lock()
	defer m.mutex.Unlock()
	if len(m.rates) >= alarmLawsMax {
		clear(m.rates)
	}
	m.rates[law] = rates
	return rates
}

// rate beyond lines at reach true sigmas around a centre that lies off by as many.
func (l *alarmLaw) rate(off, reach float64) float64 {
	if l.twoSided {
		return normalAbove(reach+off) + normalAbove(reach-off)
	}
	return normalAbove(reach + off)
}

// quantile gives the rate that a share p of all bases stays under. A rate is written as that of a centred pair (or
// single line) at t sigmas, and t solved for: the share under it falls as t grows.
func (l *alarmLaw) quantile(p float64) float64 {
	if math.IsInf(l.freedom, 1) {
		if l.twoSided { // the rate grows with the size of the error alone
			return l.rate(l.error*distuv.UnitNormal.Quantile((1+p)/2), chart.ActionMultiple)
		}
		return l.rate(-l.error*distuv.UnitNormal.Quantile(p), chart.ActionMultiple)
	}
	// With the centre known the answer is a quantile of χ²; the error of the centre moves it a little, downwards if the
	// lines are a pair.
	chi := distuv.ChiSquared{K: l.freedom}.Quantile(1 - p)
	known := min(chart.ActionMultiple*math.Sqrt(max(0, l.scale*chi/l.freedom-l.shift)), farReach)
	over := func(t float64) float64 { return l.shareUnder(t) - p }
	step := max(0.01, l.error*l.error*known)
	low, high := known-step, known
	for over(low) < 0 && low > -farReach {
		step *= 2
		low -= step
	}
	for step = 0.01; over(high) > 0 && high < farReach; step *= 2 {
		high += step
	}
	if l.twoSided {
		low = max(low, 0) // there the rate is 1
	}
	return l.rate(0, solveFalling(over, low, high))
}

// farReach is where a normal tail is still above the smallest float64.
const farReach = 36.

// shareUnder is the probability that the rate is at most that at t, the integral over the error of the centre by the
// trapezoid rule, whose step follows the width over which the integrand changes.
func (l *alarmLaw) shareUnder(t float64) float64 {
	if l.error == 0 {
		return l.reaches(t)
	}
	width := 1 / (math.Sqrt(2*l.freedom) * l.error * l.error)
	step := max(min(width/2, 1./2, offStepMax/l.error), 1./32)
	sum, reach := normalDensity(0)*l.reaches(t), t
	for z := step; z <= errorReach; z += step {
		if l.twoSided {
			reach = reachOn(reach, l.error*(z-step), l.error*z)
			sum += 2 * normalDensity(z) * l.reaches(reach)
		} else {
			sum += normalDensity(z) * (l.reaches(t-l.error*z) + l.reaches(t+l.error*z))
		}
	}
	return min(1, sum*step)
}

// offStepMax bounds one step of the error, in true sigmas: the rate is then right to about five digits.
const offStepMax = 0.15

// errorReach is where the normal density times any probability has fallen under 1e-10.
const errorReach = 6.5

// reaches is the probability that three estimated sigmas are at least reach true ones.
func (l *alarmLaw) reaches(reach float64) float64 {
	if reach <= 0 {
		return 1
	}
	square := reach / chart.ActionMultiple * reach / chart.ActionMultiple
	first := chiAbove((square+l.shift)/l.scale, l.freedom)
	if l.floor == 0 {
		return first
	}
	return 1 - (1-first)*(1-chiAbove(square/l.floor, l.floorFreedom))
}

// chiAbove is the probability that χ²/freedom is above x.
func chiAbove(x, freedom float64) float64 {
	switch {
	case x <= 0 || math.IsInf(freedom, 1) && x < 1:
		return 1
	case math.IsInf(freedom, 1):
		return 0
	}
	return mathext.GammaIncRegComp(freedom/2, freedom*x/2)
}

// reachOn gives the reach at which a pair of lines, off by some sigmas, has the rate of the pair that is off by less and
// has the reach given. Along lines of one rate the reach grows with the error by φ(reach-off) - φ(reach+off) over their
// sum, which is tanh(reach·off): one step of the classical Runge-Kutta method.
func reachOn(reach, off, next float64) float64 {
	h := next - off
	a := math.Tanh(reach * off)
	b := math.Tanh((reach + a*h/2) * (off + h/2))
	c := math.Tanh((reach + b*h/2) * (off + h/2))
	d := math.Tanh((reach + c*h) * next)
	return reach + h/6*(a+2*b+2*c+d)
}

// solveFalling gives the zero of a falling function within 1e-8, by false position with the Illinois halving.
func solveFalling(f func(float64) float64, low, high float64) float64 {
	atLow, atHigh, side := f(low), f(high), 0
	for range 200 {
		if high-low < 1e-8 || atLow == atHigh {
			break
		}
		x := (low*atHigh - high*atLow) / (atHigh - atLow)
		if !(x > low && x < high) {
			x = low + (high-low)/2
		}
		at := f(x)
		switch {
		case math.Abs(at) < 1e-9:
			return x
		case at > 0:
			if low, atLow = x, at; side > 0 {
				atHigh /= 2
			}
			side = 1
		default:
			if high, atHigh = x, at; side < 0 {
				atLow /= 2
			}
			side = -1
		}
	}
	return low + (high-low)/2
}
