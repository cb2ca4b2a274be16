package changetest

import (
	"math"

	"limitary/internal/limits"
)

// meanTest is Welch's (1947, from memory): the difference and the variances of both means, in sigmas in force.
type meanTest struct {
	apart    float64
	now, old variance
	tau      float64 // relative variance that the correlation brings into both variances
}

// freedom is Satterthwaite's (1946, from memory): twice the squared variance over the variance of its estimate.
func (m meanTest) freedom(times float64) (freedom, standardError float64) {
	now := m.now.of / times
	total := now + m.old.of
	relative := m.tau / times
	if now > 0 {
		relative += 2 * (now / total) * (now / total) / (m.now.freedom * times)
	}
	if m.old.of > 0 {
		relative += 2 * (m.old.of / total) * (m.old.of / total) / m.old.freedom
	}
	return 2 / relative, math.Sqrt(total)
}

// interval is the one that times as many new results like these would give.
func (m meanTest) interval(times float64) *limits.Interval {
	freedom, standardError := m.freedom(times)
	half := tQuantile((1+Confidence)/2, freedom) * standardError
	return &limits.Interval{Lower: m.apart - half, Upper: m.apart + half}
}

func (m meanTest) test() *Test {
	freedom, standardError := m.freedom(1)
	t := m.apart / standardError
	return &Test{Statistic: t, Freedom: freedom, P: tTwoSided(t, freedom)}
}

// spreadTest is the F test with degrees of freedom as they are; ratio is that of the roots of two mean squares.
type spreadTest struct{ ratio, now, old float64 }

func (s spreadTest) interval(times float64) *limits.Interval {
	tail := (1 - Confidence) / 2
	return &limits.Interval{
		Lower: s.ratio / math.Sqrt(fQuantile(1-tail, s.now*times, s.old)),
		Upper: s.ratio / math.Sqrt(fQuantile(tail, s.now*times, s.old)),
	}
}

// plainT is Student's with one pooled variance (or the variance of the new means alone against a target centre).
func plainT(f *InForce, d *fresh) *Test {
	s := d.meansSigma()
	v, square, scale := d.freedomMeans(), s*s, 1/d.weight()
	if !f.CentreTarget {
		scale += float64(f.SubgroupSize) / float64(f.Readings)
		old := f.plainVariance()
		if math.IsInf(old.freedom, 1) {
			square, v = old.of, old.freedom
		} else {
			square = (v*square + old.freedom*old.of) / (v + old.freedom)
			v += old.freedom
		}
	}
	t := d.level() / math.Sqrt(square*scale)
	return &Test{Statistic: t, Freedom: v, P: tTwoSided(t, v)}
}

// plainVariance is that of one plotted value of the old side, as a textbook would take it.
func (f *InForce) plainVariance() variance {
	if sigma, freedom, known := f.means(); known {
		return variance{sigma * sigma, freedom}
	}
	root := side{sigma: f.unit(), plain: f.freedom()}.plainRoot()
	return variance{root * root, f.freedom()}
}
