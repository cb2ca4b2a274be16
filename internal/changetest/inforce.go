package changetest

import (
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// InForce describes the limits in force and what they rest on.
type InForce struct {
	Kind chart.Kind
	// SubgroupSize is the nominal number of readings a group, 1 for individuals.
	SubgroupSize int
	// Centre of the location trace, and process Sigma, that of single readings and not of means, both in the chart's unit.
	Centre, Sigma float64
	// CentreTarget and SigmaTarget mark figures that were given rather than estimated. A target has no sampling error.
	CentreTarget, SigmaTarget bool
	// Groups and Readings count what the centre was estimated from; not looked at where the centre is a target.
	Groups, Readings int
	// Estimator and DegreesOfFreedom (effective, see limits.Estimate) of Sigma. DefaultEstimator stands for the first of
	// Estimators(Kind). DegreesOfFreedom are not looked at where sigma is a target; the estimator is, since the
	// new sigma is estimated by it.
	Estimator        limits.Estimator
	DegreesOfFreedom float64
	// MeansSigma is the standard deviation that the Groups means of the old basis had about the centre, for charts of
	// means where it is known; nil stands for Sigma/√SubgroupSize, which holds nothing between subgroups.
	MeansSigma *float64
	// BetweenSigma is the standard deviation between runs of a chart of run means, zero or more; nil for the other kinds.
	// The plotted statistic then has sigma √(BetweenSigma² + Sigma²/SubgroupSize). Groups is needed with it, unless sigma is
	// a target: the mean square of so many runs is what that rests on.
	BetweenSigma *float64
	// Model is the one of the version, for counts and duplicates: Inspected, Inflation and BetweenSigma (between samples)
	// for counts, whose Sigma is not looked at but follows from them; Spread for duplicates.
	Model chart.Model
	// Inspected are the items or units behind the centre of counts; 0 stands for Groups times Model.Inspected.
	Inspected float64
	// Parts of the sigma of duplicates where the model has several: one for each band in order, then that of low means.
	// They may be left out where there is one sigma, a target, or a function, whose error follows from Groups and Readings.
	Parts []Part
}

func (f *InForce) check() error {
	if !Compared(f.Kind) {
		return refuse("inForce.kind", f.Kind, "no limits of this kind are compared; want individuals, xbar_r or another kind whose limits are computed")
	}
	if err := f.Kind.CheckSize(f.SubgroupSize); err != nil {
		return &Error{Field: "inForce.subgroupSize", Problem: err.Error()}
	}
	if f.Kind.Counts() {
		return f.checkCounts()
	}
	known := Estimators(f.Kind)
	if f.Estimator == limits.DefaultEstimator {
		f.Estimator = known[0]
		if s := f.Model.Spread; s != nil && s.S0 > 0 {
			f.Estimator = limits.Pooled // the likeliest function rests on variances
		}
	}
	if !slices.Contains(known, f.Estimator) {
		return refuse("inForce.estimator", f.Estimator, "does not fit a chart of kind %s, want one of %v", f.Kind, known)
	}
	if err := checkSigma("inForce.sigma", f.Sigma); err != nil {
		return err
	}
	if f.Kind.Duplicates() {
		return f.checkDuplicates()
	}
	if !(math.Abs(f.Centre) <= limits.MagnitudeMax) {
		return refuse("inForce.centre", f.Centre, "want a finite number of size at most %g", limits.MagnitudeMax)
	}
	if err := f.checkMeans(); err != nil {
		return err
	}
	return f.checkBasis()
}

// checkCounts looks at limits of counts, and fills in the sigma of the plotted statistic.
func (f *InForce) checkCounts() error {
	if err := limits.CheckModel(f.Kind, &f.Model); err != nil {
		e := *err.(*Error)
		e.Field = "inForce.model." + e.Field
		return &e
	}
	if f.Estimator != limits.DefaultEstimator {
		return refuse("inForce.estimator", f.Estimator, "the sigma of counts follows from their mean; leave it out")
	}
	if size := f.Model.Inspected; !(size >= chart.InspectedMin && size <= chart.InspectedMax) {
		return refuse("inForce.model.inspected", size, "want %g to %g", chart.InspectedMin, chart.InspectedMax)
	}
	sigma, ok := limits.CountSigma(f.Kind, f.Centre, f.sampleSize(), &f.Model)
	mean := f.Centre / f.perMean()
	if !(mean > 0 && mean <= BasisMax/chart.InspectedMin && sigma > 0 && ok) || f.Kind.Items() && mean >= 1 {
		return refuse("inForce.centre", f.Centre, "is no centre of a chart of kind %s: want a mean above zero, and below all that is inspected", f.Kind)
	}
	f.Sigma = sigma
	switch {
	case f.CentreTarget:
		return nil
	case f.Groups < 1 || f.Groups > BasisMax:
		return refuse("inForce.groups", f.Groups, "a centre that is no target rests on 1 to %g samples", BasisMax)
	case f.Inspected != 0 && !(f.Inspected >= chart.InspectedMin && f.Inspected <= BasisMax*chart.InspectedMax):
		return refuse("inForce.inspected", f.Inspected, "want the items or units inspected in all, %g to %g, or 0 for groups times model.inspected", chart.InspectedMin, BasisMax*chart.InspectedMax)
	}
	return nil
}

// checkMeans looks at what is said of the means.
func (f *InForce) checkMeans() error {
	if m := f.MeansSigma; m != nil {
		if f.Kind == chart.Individuals {
			return refuse("inForce.meansSigma", *m, "individuals have no means; leave it out")
		}
		if q := *m / f.Sigma; !(q >= spreadMin && q <= 1/spreadMin) {
			return refuse("inForce.meansSigma", *m, "want %g to %g times sigma", spreadMin, 1/spreadMin)
		}
	}
	switch b := f.BetweenSigma; {
	case f.Kind == chart.RunMeans && b == nil:
		return refuse("inForce.betweenSigma", "none", "limits of run means have a sigma between runs, if only zero")
	case f.Kind != chart.RunMeans && b != nil:
		return refuse("inForce.betweenSigma", *b, "only run_means have one; leave it out")
	case b != nil && !(*b >= 0 && *b/f.Sigma <= 1/spreadMin):
		return refuse("inForce.betweenSigma", *b, "want zero to %g times sigma", 1/spreadMin)
	}
	rests := f.MeansSigma != nil || f.BetweenSigma != nil && !f.SigmaTarget
	if rests && (f.Groups < 2 || f.Groups > BasisMax) {
		return refuse("inForce.groups", f.Groups, "the sigma of the means rests on 2 to %g groups", BasisMax)
	}
	return nil
}

// sigmaMin keeps squares of quotients finite beside limits.MagnitudeMax.
const sigmaMin = 1 / limits.MagnitudeMax

func checkSigma(field string, sigma float64) error {
	if !(sigma >= sigmaMin && sigma <= limits.MagnitudeMax) {
		return refuse(field, sigma, "must be a finite number larger than zero, %g to %g", sigmaMin, limits.MagnitudeMax)
	}
	return nil
}

// checkBasis looks at the counts of the old side where something was estimated.
func (f *InForce) checkBasis() error {
	if !f.CentreTarget {
		if f.Groups < 2 || f.Groups > BasisMax {
			return refuse("inForce.groups", f.Groups, "a centre that is no target rests on 2 to %g groups", BasisMax)
		}
		if f.Readings < f.Groups || float64(f.Readings) > float64(f.Groups)*float64(f.SubgroupSize) {
			return refuse("inForce.readings", f.Readings, "%d groups of up to %d readings have at least one each and no more than that", f.Groups, f.SubgroupSize)
		}
	}
	if f.SigmaTarget {
		return nil
	}
	return f.checkFreedom("inForce.degreesOfFreedom", f.DegreesOfFreedom)
}

// freedom of the old sigma, without end for a target.
func (f *InForce) freedom() float64 {
	if f.Kind.Duplicates() {
		return f.duplicatesFreedom(f.partsAlike())
	}
	if f.SigmaTarget {
		return math.Inf(1)
	}
	return f.DegreesOfFreedom
}

// unit is the sigma of the plotted statistic at the nominal subgroup size, which the lines of the location trace rest on, in
// process sigmas.
func (f *InForce) unit() float64 {
	within := 1 / math.Sqrt(float64(f.SubgroupSize))
	if f.BetweenSigma == nil {
		return within
	}
	return math.Hypot(within, *f.BetweenSigma/f.Sigma)
}

// means gives the sigma of the old means in process sigmas and its degrees of freedom; false where nothing is known of
// them beyond the scatter within.
func (f *InForce) means() (sigma, freedom float64, known bool) {
	freedom = float64(f.Groups - 1)
	switch {
	case f.MeansSigma != nil:
		return *f.MeansSigma / f.Sigma, freedom, true
	case f.BetweenSigma == nil:
		return 0, 0, false
	case f.SigmaTarget:
		return f.unit(), math.Inf(1), true
	}
	return f.unit(), freedom, true
}

// Compared reports whether limits of a kind are compared with new results: all kinds but Given.
func Compared(kind chart.Kind) bool { return kind.Counts() || Estimators(kind) != nil }

// Estimators lists the estimators of sigma by which limits of a kind are compared, the default first; nil for counts,
// which have none, and for Given. Run means take those of sigma within runs.
func Estimators(kind chart.Kind) []limits.Estimator {
	if kind == chart.RunMeans {
		return []limits.Estimator{limits.Pooled, limits.SBar, limits.RBar}
	}
	return limits.EstimatorsOf(kind)
}

// estimating is the kind whose estimators give sigma, within subgroups for means.
func (f *InForce) estimating() chart.Kind {
	switch {
	case f.Kind == chart.RunMeans:
		return chart.XbarS
	case f.Kind.Duplicates():
		return chart.XbarR
	}
	return f.Kind
}
