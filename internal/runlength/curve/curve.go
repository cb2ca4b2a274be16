// Package curve holds the distribution of a run length, the number N of points to the first signal, as a survival curve:
// P(N > t) point by point until it falls by a constant factor, and that factor.
//
// A chart with finitely many states, and just as well one whose state is a density, forgets how it began. Its survival
// falls from then on geometrically, at a rate that is the largest eigenvalue of its transitions among states without a
// signal. Follow steps a chain until then and sums the tail in closed form, which makes the moments exact and says how
// exact they are.
package curve

import (
	"errors"
	"math"
	"sort"

	"limitary/internal/runlength/effort"
)

// Curve is the distribution of N. The zero value is of no use.
type Curve struct {
	// Survive[t] is P(N > t) and Signalled[t] is P(N <= t), for t = 0 to the length less one. Both are kept, because
	// either may be too small to be told from 1 less the other.
	Survive, Signalled []float64
	// Hazard is P(N = t+1 given N > t) from the last t on. It is 0 only where nothing survives.
	Hazard float64
	// RelativeError bounds the relative error of Mean.
	RelativeError float64
}

// last gives the last t of the table.
func (c *Curve) last() int { return len(c.Survive) - 1 }

// Within gives P(N <= t).
func (c *Curve) Within(t int) float64 {
	last := c.last()
	if t <= last {
		return c.Signalled[max(t, 0)]
	}
	return c.Signalled[last] - c.Survive[last]*math.Expm1(float64(t-last)*math.Log1p(-c.Hazard))
}

// Beyond gives P(N > t).
func (c *Curve) Beyond(t int) float64 {
	last := c.last()
	if t <= last {
		return c.Survive[max(t, 0)]
	}
	return c.Survive[last] * math.Exp(float64(t-last)*math.Log1p(-c.Hazard))
}

// At gives P(N = t), for t >= 1.
func (c *Curve) At(t int) float64 {
	switch last := c.last(); {
	case t > last:
		return c.Beyond(t-1) * c.Hazard
	case c.Signalled[t] < 0.5: // the smaller of the two keeps the digits of the difference
		return c.Signalled[t] - c.Signalled[t-1]
	default:
		return c.Survive[t-1] - c.Survive[t]
	}
}

// Geometric gives the run length of a limit on single points: a signal with probability p at each.
func Geometric(p float64) Curve {
	return Curve{Survive: []float64{1}, Signalled: []float64{0}, Hazard: p}
}

// Mean gives E(N), the average run length: Σ P(N > t).
func (c *Curve) Mean() float64 {
	last, sum := c.last(), 0.0
	for t := last - 1; t >= 0; t-- {
		sum += c.Survive[t]
	}
	if c.Survive[last] > 0 {
		sum += c.Survive[last] / c.Hazard
	}
	return sum
}

// SD gives the standard deviation of N, from squares about the mean so that nothing cancels where N hardly varies.
func (c *Curve) SD() float64 {
	mean, last, sum := c.Mean(), c.last(), 0.0
	for t := last; t >= 1; t-- { // the points of the table one by one
		d := float64(t) - mean
		sum += d * d * c.At(t)
	}
	if left := c.Survive[last]; left > 0 { // a geometric tail that begins at last
		d, rest := float64(last)+1/c.Hazard-mean, (1-c.Hazard)/(c.Hazard*c.Hazard)
		sum += left * (d*d + rest)
	}
	return math.Sqrt(sum)
}

// Quantile gives the least n with P(N <= n) >= p, for 0 < p < 1. It is a float64 because it may pass every integer.
func (c *Curve) Quantile(p float64) float64 {
	last := c.last()
	if c.Signalled[last] >= p {
		return float64(sort.SearchFloat64s(c.Signalled, p))
	}
	left := (1 - p) / c.Survive[last]
	n := math.Ceil(math.Log(left) / math.Log1p(-c.Hazard))
	if n < 1e15 { // one step either way where rounding decides
		for n > 1 && c.Within(last+int(n)-1) >= p {
			n--
		}
		for c.Within(last+int(n)) < p {
			n++
		}
	}
	return float64(last) + n
}

// Independent gives the curve of the first signal of two charts whose points are independent of each other: the
// probabilities that neither has signalled multiply.
func Independent(a, b Curve) Curve {
	last := max(a.last(), b.last())
	c := Curve{
		Survive: make([]float64, last+1), Signalled: make([]float64, last+1),
		Hazard: a.Hazard + b.Hazard - a.Hazard*b.Hazard, RelativeError: a.RelativeError + b.RelativeError,
	}
	for t := range c.Survive {
		fa, fb := a.Within(t), b.Within(t)
		c.Survive[t] = a.Beyond(t) * b.Beyond(t)
		c.Signalled[t] = fa + fb - fa*fb
	}
	return c
}

// Chain is a chart stepped point by point: how its state is distributed where no signal has come yet.
type Chain interface {
	// Advance takes one point. It gives the probability that the first signal comes there, and a bound on the
	// probability misplaced by the representation in this step.
	Advance() (signalled, misplaced float64)
	// Mass gives the probability that no signal has come.
	Mass() float64
	// Change gives the sum of |state now - factor·state before the last Advance|, or a bound on it.
	Change(factor float64) float64
	// Cost is the work of one Advance.
	Cost() int64
}

// ErrNeverSignals says that a signal is so improbable that float64 holds no number for it.
var ErrNeverSignals = errors.New("the rules never complete: the probability of a signal is 0")

const (
	// tolerance is the relative error of the mean at which a chain is not followed further.
	tolerance = 2e-12
	// stepsMin and stepsPerPoint bound the number of steps by the memory of the chart.
	stepsMin, stepsPerPoint = 2000, 400
	// survivalLeast is where nothing is left to follow.
	survivalLeast = 1e-30
	// stillWindows is how many windows the hazard must have stayed the same where rounding hides the state's own change.
	stillWindows = 4
	// rounding is allowed for the arithmetic itself.
	rounding = 1e-14
)

// Follow steps a chain until its tail is geometric. Memory is the number of points the chart looks back, roughly.
//
// With p the state, h the hazard and p' = (1-h)·p + e the next state, the mean left from p is (mass + mean left from
// e)/h, and no state has more left than a fresh chart. So the sum of |e| over h bounds the relative error of the tail. Where
// rounding keeps e from falling far enough, as it does for run lengths of many millions, the error is judged by how
// still the hazard has become; that is a check of convergence, not a bound.
func Follow(chain Chain, memory int, meter *effort.Meter) (Curve, error) {
	c := Curve{Survive: []float64{1}, Signalled: []float64{0}}
	mass, misplaced, lost, tail := chain.Mass(), 0.0, 0.0, math.Inf(1)
	c.Survive[0] = mass
	var hazards []float64
	for step := 1; ; step++ {
		if err := meter.Spend(chain.Cost()); err != nil {
			return c, err
		}
		var signalled float64
		signalled, misplaced = chain.Advance()
		lost += misplaced
		before := mass
		mass = chain.Mass()
		c.Survive = append(c.Survive, max(mass, 0))
		c.Signalled = append(c.Signalled, c.Signalled[step-1]+signalled)
		c.Hazard = min(max(signalled/before, 0), 1)
		hazards = append(hazards, c.Hazard)
		if mass <= survivalLeast {
			c.Survive[step], tail = 0, 0
			break
		}
		if step < memory || c.Hazard == 0 && step < stepsPerPoint*memory {
			continue
		}
		tail = min(chain.Change(1-c.Hazard)/mass/c.Hazard, still(hazards, stillWindows*memory)) * mass
		if tail <= tolerance || step >= stepsMin+stepsPerPoint*memory {
			break
		}
	}
	if mass > survivalLeast && !(c.Hazard > 0) {
		return c, ErrNeverSignals
	}
	c.RelativeError = tail + lost + rounding
	if mass > survivalLeast {
		c.RelativeError += misplaced / c.Hazard
	}
	return c, nil
}

// still gives how much the latest hazards differ, relative to their size and with a margin; infinite for too few.
func still(hazards []float64, n int) float64 {
	n = max(n, 40)
	if len(hazards) < 2*n {
		return math.Inf(1)
	}
	low, high := math.Inf(1), 0.0
	for _, h := range hazards[len(hazards)-n:] {
		low, high = min(low, h), max(high, h)
	}
	const margin = 10
	return margin * (high - low) / high
}
