package changetest

import (
	"math"

	"limitary/internal/limits"
)

// countSide is a mean of counts: inspected so much, freed of what it holds less because samples vary more than counting
// explains; without end for a target. freedom is that of the factor it was freed of.
type countSide struct{ mean, inspected, freedom float64 }

// score is the interval of means within q standard errors, the standard error being that at the mean in question
// (Wilson 1927 for items, Rao's score for nonconformities; from memory). It holds for few counts and for none, and its
// ends stay within the scale: they are the roots of (1+k)θ² - (2m+k)θ + m² = 0, k = q²/inspected, without the 1+k's k
// for nonconformities.
func (s countSide) score(items bool, q float64) (lower, upper float64) {
	if math.IsInf(s.inspected, 1) {
		return s.mean, s.mean
	}
	k, lead := q*q/s.inspected, 1.0
	if items {
		lead += k
	}
	middle := s.mean + k/2
	upper = (middle + math.Sqrt(k*countVariance(items, s.mean)+k*k/4)) / lead
	if items {
		upper = math.Min(upper, 1)
	}
	if s.mean > 0 {
		lower = s.mean * s.mean / (upper * lead) // the product of the roots, which keeps the digits
	}
	return math.Min(lower, s.mean), math.Max(upper, s.mean)
}

// countTest sets two means of counts against each other: the difference over unit. The intervals of the two are joined
// by the square-and-add rule (Newcombe 1998, Statistics in Medicine 17, from memory; Donner and Zou, as in package limits),
// which keeps their skewness.
type countTest struct {
	items    bool
	now, old countSide
	unit     float64
	// tau is the relative variance that the correlation brings in; shared says that the factor of the old side is the new
	// side's.
	tau    float64
	shared bool
}

// freedom is Satterthwaite's for both factors together, where so many times as many new samples are had. Under no
// difference both sides vary as 1/inspected.
func (m countTest) freedom(times float64) float64 {
	relative := m.tau / times
	if m.shared || math.IsInf(m.old.inspected, 1) {
		return 2 / (relative + 2/(m.now.freedom*times))
	}
	now, old := 1/(m.now.inspected*times), 1/m.old.inspected
	now, old = now/(now+old), old/(now+old)
	return 2 / (relative + 2*now*now/(m.now.freedom*times) + 2*old*old/m.old.freedom)
}

// within gives the differences within q standard errors.
func (m countTest) within(q, times float64) limits.Interval {
	now := m.now
	now.inspected *= times
	nowLower, nowUpper := now.score(m.items, q)
	oldLower, oldUpper := m.old.score(m.items, q)
	apart := now.mean - m.old.mean
	return limits.Interval{
		Lower: (apart - math.Hypot(now.mean-nowLower, oldUpper-m.old.mean)) / m.unit,
		Upper: (apart + math.Hypot(nowUpper-now.mean, m.old.mean-oldLower)) / m.unit,
	}
}

// interval is the one that times as many new samples like these would give.
func (m countTest) interval(times float64) *limits.Interval {
	in := m.within(tQuantile((1+Confidence)/2, m.freedom(times)), times)
	return &in
}

// test is the inverse of the interval: the q at which it reaches no difference, and its probability.
func (m countTest) test() *Test {
	apart := m.now.mean - m.old.mean
	low, high := 0.0, 1.0
	holds := func(q float64) bool {
		in := m.within(q, 1)
		return in.Lower <= 0 && in.Upper >= 0
	}
	for !holds(high) && high < apartMax {
		low, high = high, 2*high
	}
	for range 80 {
		if middle := low + (high-low)/2; holds(middle) {
			high = middle
		} else {
			low = middle
		}
	}
	freedom, q := m.freedom(1), 0.0
	if apart != 0 {
		q = math.Copysign(high, apart)
	}
	return &Test{Statistic: q, Freedom: freedom, P: tTwoSided(q, freedom)}
}

// plain is Pearson's χ² of two totals, or of one against a target, as its root: a normal deviate. It takes counting for
// all there is.
func (m countTest) plain(f *InForce) *Test {
	pooled, scale := m.old.mean, 1/m.now.inspected
	if !f.CentreTarget {
		pooled = m.old.mean + (m.now.mean-m.old.mean)/(1+m.old.inspected/m.now.inspected)
		scale += 1 / m.old.inspected
	}
	z := (m.now.mean - m.old.mean) / math.Sqrt(countVariance(m.items, pooled)*scale)
	return &Test{Statistic: z, Freedom: math.Inf(1), P: tTwoSided(z, math.Inf(1))}
}
