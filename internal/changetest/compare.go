package changetest

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// Compare sets new results against the limits in force, or gives an *Error naming the field that is wrong. It neither
// keeps nor changes what it is given.
func Compare(req Request) (Result, error) {
	if err := req.check(); err != nil {
		return Result{}, err
	}
	if req.InForce.Kind.Counts() {
		return compareCounts(&req)
	}
	d, err := gather(&req)
	if err != nil {
		return Result{}, err
	}
	res := req.InForce.outline(req.Relevance)
	res.Groups, res.Readings, res.ExcludedLeftOut, res.BasisLeftOut = d.groups(), d.total, d.excluded, d.inOldBasis
	res.Looks = looks(req.Looks)
	switch {
	case req.InForce.Kind.Duplicates(): // whose means say nothing of the process
		n := float64(d.groups())
		res.Correlation = Correlation{EffectiveForCentre: n, EffectiveForSpread: n}
	case d.groups() > 0:
		res.Correlation = d.correlation()
	}
	res.fill(&req, d)
	res.planned(&req)
	res.finish(&req)
	return res, nil
}

// outline is a result with the figures that a chart of the kind has.
func (f *InForce) outline(r Relevance) Result {
	res := Result{Relevance: r, Tails: 1, Dispersion: 1, Estimator: f.Estimator}
	ratios := limits.Interval{Lower: 1 / r.SigmaRatio, Upper: r.SigmaRatio}
	res.Spread = &Comparison{Old: f.Sigma, Relevance: ratios}
	if f.Kind.Duplicates() {
		return res
	}
	res.Centre = &Comparison{Old: f.Centre, Relevance: limits.Interval{Lower: -r.CentreSigmas, Upper: r.CentreSigmas}}
	if f.Kind != chart.Individuals {
		res.Means = &Comparison{Old: f.unit() * f.Sigma, Relevance: ratios}
	}
	return res
}

func (res *Result) fill(req *Request, d *fresh) {
	few := d.groups() < GroupsMin
	if res.Centre != nil {
		if res.Centre.Reason = TooFew; d.groups() > 0 {
			res.Centre.takeCentre(req, d, res.Correlation, few)
		}
	}
	old, now, phi, reason := req.spreadSides(d, res.Correlation)
	res.Tails = phi
	res.Spread.takeSpread(&req.InForce, old, now, reason, few, d.groups())
	if res.Means == nil {
		return
	}
	if req.InForce.MeansSigma != nil {
		res.Means.Old = *req.InForce.MeansSigma
	}
	old, now, reason = req.meansSides(d, res.Correlation)
	res.Means.takeSpread(&req.InForce, old, now, reason, few, d.groups())
}

// takeCentre compares the centres.
func (c *Comparison) takeCentre(req *Request, d *fresh, r Correlation, few bool) {
	f := &req.InForce
	level, unit := d.level(), f.unit()
	at, apart := f.Centre+level*f.Sigma, level/unit
	c.New, c.Estimate = &at, &apart
	switch {
	case few:
		return // TooFew, as it was
	case d.meansSigma() < spreadMin:
		c.Reason = NoSpread
		return
	}
	c.Plain = plainT(f, d)
	now, fine := d.newVariance(r)
	old, fineOld := f.oldVariance(d, r)
	if !fine || !fineOld {
		c.Reason = TooCorrelated
		return
	}
	now.of, old.of = now.of/unit/unit, old.of/unit/unit
	m := meanTest{apart: apart, now: now, old: old, tau: r.inflationVariance(float64(r.Pairs))}
	c.Test = m.test()
	c.decide(0, d.groups(), m.interval)
	m.old = variance{}
	c.Published = c.published(d.groups(), m.interval)
}

// takeSpread compares two sigmas, of which the new one is there if without is Settled.
func (c *Comparison) takeSpread(f *InForce, old, now side, without Reason, few bool, groups int) {
	if without == Settled {
		sigma, ratio := now.sigma*f.Sigma, now.sigma/old.sigma
		c.New, c.Estimate = &sigma, &ratio
	}
	if c.Reason = without; few {
		c.Reason = TooFew
	}
	if c.Reason != Settled {
		return
	}
	p := now.plainRoot() / old.plainRoot()
	c.Plain = &Test{p * p, now.plain, old.plain, fTwoSided(p*p, now.plain, old.plain)}
	s := spreadTest{ratio: now.root() / old.root(), now: now.used, old: old.used}
	square := s.ratio * s.ratio
	c.Test = &Test{square, s.now, s.old, fTwoSided(square, s.now, s.old)}
	c.decide(1, groups, s.interval)
	s.ratio, s.old = now.root()/old.sigma, math.Inf(1)
	c.Published = c.published(groups, s.interval)
}
