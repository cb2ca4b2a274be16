package changetest

import (
	"math"
	"sync"

	"limitary/internal/limits"
)

// NeededMax is the largest number of groups that is looked at for Needed.
const NeededMax = 10_000

// Needed says about how many new groups, those at hand included, would settle a comparison. It is a plan: it takes the
// estimate, the scatter and the correlation as they are now.
type Needed struct {
	// Reachable is false where NeededMax groups would not do, because the old side is too uncertain or the estimate lies at
	// a relevance limit.
	Reachable bool
	Groups    int
}

// decide reads the interval against the relevance limits; interval(times) is what times as many new results like these
// would give, and none the figure of no difference.
func (c *Comparison) decide(none float64, groups int, interval func(times float64) *limits.Interval) {
	c.Interval = interval(1)
	c.Differs = none < c.Interval.Lower || none > c.Interval.Upper
	c.Decision, c.Reason = verdict(c.Interval, c.Relevance), Settled
	if c.Decision == NotEnoughData {
		c.Reason, c.Needed = Straddles, c.needed(groups, interval)
	}
}

// published does the same for the figure as published, after decide.
func (c *Comparison) published(groups int, interval func(times float64) *limits.Interval) *Published {
	p := Published{Interval: interval(1)}
	p.Decision = verdict(p.Interval, c.Relevance)
	if p.Decision == NotEnoughData && c.Needed != nil && !c.Needed.Reachable {
		p.Needed = c.needed(groups, interval)
	}
	return &p
}

// needed says what would settle an open comparison.
func (c *Comparison) needed(groups int, interval func(times float64) *limits.Interval) *Needed {
	needed := search(groups+1, func(n int) bool {
		return verdict(interval(float64(n)/float64(groups)), c.Relevance) != NotEnoughData
	})
	return &needed
}

// verdict: Keep within, Change beyond, the limits themselves counting as not mattering.
func verdict(in *limits.Interval, relevance limits.Interval) Decision {
	switch {
	case relevance.Lower <= in.Lower && in.Upper <= relevance.Upper:
		return Keep
	case in.Lower > relevance.Upper || in.Upper < relevance.Lower:
		return Change
	}
	return NotEnoughData
}

// neededStep is how finely Needed is found: to a twentieth, far finer than its plan deserves.
const neededStep = 20

// search finds about the least n from low to NeededMax that settles. More results only narrow an interval, so what settles
// at one n does so at all larger ones.
func search(low int, settles func(n int) bool) Needed {
	if low > NeededMax || !settles(NeededMax) {
		return Needed{}
	}
	high := NeededMax
	for low < high && high-low >= low/neededStep {
		middle := int(math.Sqrt(float64(low) * float64(high))) // halves the steps, each a part of what is reached
		if settles(middle) {
			high = middle
		} else {
			low = middle + 1
		}
	}
	return Needed{Reachable: true, Groups: high}
}

// planned fills in what would settle a comparison that has too few results, if nothing had changed: independent normal
// results around the centre and with the sigma in force.
func (res *Result) planned(req *Request) {
	f := &req.InForce
	perGroup := sync.OnceValue(func() float64 { return freedomPerGroup(f) })
	if res.Centre != nil {
		res.Centre.plan(f.plannedCentre)
	}
	res.Spread.plan(func(n float64, old bool) *limits.Interval {
		return spreadTest{1, n * perGroup(), freedomIf(old, f.freedom())}.interval(1)
	})
	if res.Means == nil {
		return
	}
	_, freedom, known := f.means()
	if !known {
		freedom = f.freedom()
	}
	res.Means.plan(func(n float64, old bool) *limits.Interval {
		return spreadTest{1, n - 1, freedomIf(old, freedom)}.interval(1)
	})
}

// plannedCentre is the interval of a centre that has not changed.
func (f *InForce) plannedCentre(n float64, old bool) *limits.Interval {
	m := meanTest{now: variance{1 / n, n - 1}}
	if old && !f.CentreTarget {
		m.old = variance{float64(f.SubgroupSize) / float64(f.Readings), f.freedom()}
		if _, freedom, known := f.means(); known {
			m.old.freedom = freedom
		}
	}
	return m.interval(1)
}

// plan takes the interval that n groups would give, with the old side's error or without.
func (c *Comparison) plan(interval func(n float64, old bool) *limits.Interval) {
	if c.Reason != TooFew {
		return
	}
	find := func(old bool) *Needed {
		needed := search(GroupsMin, func(n int) bool { return verdict(interval(float64(n), old), c.Relevance) == Keep })
		return &needed
	}
	c.Needed = find(true)
	if !c.Needed.Reachable {
		c.Published = &Published{Needed: find(false)}
	}
}

// freedomIf is without end where the old side's error is left out.
func freedomIf(old bool, freedom float64) float64 {
	if old {
		return freedom
	}
	return math.Inf(1)
}

// freedomPerGroup is what each of many groups adds to the degrees of freedom of the estimator in force.
func freedomPerGroup(f *InForce) float64 {
	const many = 200
	zero, one := 0.0, 1.0
	groups := make([]limits.Group, many)
	for i := range groups {
		for j := range f.SubgroupSize {
			groups[i].Readings = append(groups[i].Readings, float64((3*i+2*j)%7))
		}
	}
	res, err := limits.Compute(limits.Request{Kind: f.estimating(), SubgroupSize: f.SubgroupSize, Groups: groups, Centre: &zero, Sigma: &one})
	if err != nil {
		return 0.5 // not reached: the groups above are fit for every kind that was checked
	}
	for _, e := range res.Estimates {
		if e.Name == f.Estimator {
			return e.DegreesOfFreedom / many
		}
	}
	return 0.5
}

// Looks says what looking often does to the level of each look.
type Looks struct {
	// Count in twelve months, this one included; Alpha is 1 less Confidence.
	Count int
	Alpha float64
	// OneWrongMax is 1-(1-Alpha)^Count: the chance that the interval of at least one of so many looks misses, where looks
	// are independent. Looks that share results are right or wrong together, so it is less for them.
	OneWrongMax float64
}

func looks(count int) Looks {
	alpha := 1 - Confidence
	return Looks{Count: count, Alpha: alpha, OneWrongMax: -math.Expm1(float64(count) * math.Log1p(-alpha))}
}
