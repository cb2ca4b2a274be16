package changetest

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// compareCounts sets new counts against the centre in force.
func compareCounts(req *Request) (Result, error) {
	w, err := gatherCounts(req)
	if err != nil {
		return Result{}, err
	}
	f := &req.InForce
	res := Result{
		Groups: w.groups(), Inspected: w.inspected, ExcludedLeftOut: w.excluded, BasisLeftOut: w.inOldBasis,
		Relevance: req.Relevance, Tails: 1, Dispersion: math.Max(w.dispersion(), f.modelDispersion(w.meanSize())), Looks: looks(req.Looks),
	}
	res.Centre = &Comparison{Old: f.Centre, Relevance: limits.Interval{Lower: -req.Relevance.CentreSigmas, Upper: req.Relevance.CentreSigmas}, Reason: TooFew}
	if w.groups() > 0 {
		res.Correlation = w.correlated(res.Dispersion)
		res.Centre.takeCounts(f, w, res.Dispersion, res.Correlation)
	}
	res.Centre.plan(func(n float64, old bool) *limits.Interval { return f.plannedCounts(n, old).interval(1) })
	res.finish(req)
	return res, nil
}

// meanSize is the size of sample that the variance between samples counts with in the pooled mean: Σn²/N.
func (w *tally) meanSize() float64 {
	if w.inspected == 0 {
		return 0
	}
	return w.squares / w.inspected
}

// takeCounts compares the centres; New is in the unit of the chart.
func (c *Comparison) takeCounts(f *InForce, w *tally, phi float64, r Correlation) {
	at := w.mean() * f.perMean()
	apart := (at - f.Centre) / f.Sigma
	c.New, c.Estimate = &at, &apart
	if w.groups() < GroupsMin {
		return // TooFew, as it was
	}
	m := f.countTest()
	m.now = countSide{w.mean(), w.inspected, w.freedomMeans() * r.squaresFactor()}
	c.Plain = m.plain(f)
	factor, ok := r.meanFactor(float64(w.groups()))
	if !ok {
		c.Reason = TooCorrelated
		return
	}
	m.now.inspected /= phi * factor
	m.tau = r.inflationVariance(float64(r.Pairs))
	f.widenOld(&m, phi, r)
	c.Test = m.test()
	c.decide(0, w.groups(), m.interval)
	m.old = countSide{mean: m.old.mean, inspected: math.Inf(1), freedom: math.Inf(1)}
	c.Published = c.published(w.groups(), m.interval)
}

// perMean turns a fraction or rate into what the chart plots.
func (f *InForce) perMean() float64 {
	if f.Kind == chart.NP {
		return float64(f.SubgroupSize)
	}
	return 1
}

// countTest holds the old side as counting alone has it; the new side is to be filled in.
func (f *InForce) countTest() countTest {
	old := countSide{f.Centre / f.perMean(), math.Inf(1), math.Inf(1)}
	if !f.CentreTarget {
		old.inspected = f.oldInspected()
	}
	return countTest{items: f.Kind.Items(), old: old, unit: f.Sigma / f.perMean()}
}

func (f *InForce) oldInspected() float64 {
	if f.Inspected > 0 {
		return f.Inspected
	}
	return float64(f.Groups) * f.sampleSize()
}

// sampleSize is the size that the lines in force are published for.
func (f *InForce) sampleSize() float64 {
	if f.Kind == chart.NP {
		return float64(f.SubgroupSize)
	}
	return f.Model.Inspected
}

// modelDispersion is φ of samples of a size as the model in force has it, at least 1.
func (f *InForce) modelDispersion(size float64) float64 {
	between := f.Model.BetweenSigma * f.Model.BetweenSigma
	phi := 1 + size*between/countVariance(f.Kind.Items(), f.Centre/f.perMean())
	return math.Max(phi, f.Model.Inflation*f.Model.Inflation)
}

// rangesFreedom are the degrees of freedom of a mean moving range for each of its ranges, 0.6 to two digits (Cryer and
// Ryan 1990, from memory, have a relative variance of 0.83/n for n of them, against 1/(2ν)). The factor of Laney is one.
const rangesFreedom = 0.6

// widenOld widens the old side by what its model says of the variation between samples, or, where it says nothing, by
// what the new counts show. The old results are taken to repeat each other as the new ones do; a factor from moving
// ranges sees only 1-r of their variance.
func (f *InForce) widenOld(m *countTest, phi float64, r Correlation) {
	if f.CentreTarget {
		return
	}
	own := float64(f.Groups - 1)
	factor := r.inflation()
	switch {
	case f.Model.Inflation > 0:
		phi, m.old.freedom = f.modelDispersion(f.sampleSize()), math.Max(1, own*rangesFreedom)
		factor /= 1 - r.Used
	case f.Model.BetweenSigma > 0:
		phi, m.old.freedom = f.modelDispersion(f.sampleSize()), math.Max(1, own)
	default:
		m.shared = true
	}
	m.old.inspected /= phi * factor
}

// plannedCounts is what n samples of the size in force would give if nothing had changed.
func (f *InForce) plannedCounts(n float64, old bool) countTest {
	m := f.countTest()
	phi := f.modelDispersion(f.sampleSize())
	m.now = countSide{m.old.mean, n * f.sampleSize() / phi, n - 1}
	if !old {
		m.old.inspected = math.Inf(1)
		return m
	}
	f.widenOld(&m, phi, Correlation{})
	return m
}
