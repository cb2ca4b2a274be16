package changetest

import (
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

const (
	// CentreRelevanceDefault is the difference of centres, in sigmas of the plotted statistic, and SpreadRelevanceDefault
	// the ratio of sigmas, up to which a difference does not matter. Our choice, no source.
	CentreRelevanceDefault = 0.5
	SpreadRelevanceDefault = 1.25
	// CentreRelevanceMax and SpreadRelevanceMax bound what a laboratory may set: beyond five sigmas, or a ratio of ten,
	// every result of the new process lies outside the old lines or none ever does. Our choice, no source.
	CentreRelevanceMax = 5.0
	SpreadRelevanceMax = 10.0
	// LooksMax bounds the looks of twelve months: more than one an hour is a slip of the pen.
	LooksMax = 10_000
	// BasisMax bounds the counts and the degrees of freedom of the old side.
	BasisMax = 1e9
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
}

// Group is a result, and whether it was in the basis of the limits in force. Such a group cannot speak for the new side.
type Group struct {
	limits.Group
	InOldBasis bool
}

// Relevance says what differences matter to the laboratory; zero stands for the default.
type Relevance struct {
	// CentreSigmas is a difference in sigmas of the plotted statistic, up to CentreRelevanceMax.
	CentreSigmas float64
	// SigmaRatio is a ratio above 1, up to SpreadRelevanceMax; its inverse is the limit below.
	SigmaRatio float64
}

// Trigger says why the comparison was made.
type Trigger uint8

const (
	// Planned comparisons were due whatever the results looked like.
	Planned Trigger = iota
	// AfterSignal comparisons were made because the chart had signalled.
	AfterSignal
)

// String names the trigger in messages and files.
func (t Trigger) String() string {
	switch t {
	case Planned:
		return "planned"
	case AfterSignal:
		return "after_signal"
	}
	return "unknown"
}

// Request is what a comparison is made from.
type Request struct {
	InForce InForce
	// Groups in the order of the track. It may be empty; then the answer says how many results are needed.
	Groups    []Group
	Relevance Relevance
	Trigger   Trigger
	// Looks counts the comparisons of the last twelve months, this one included: 1 to LooksMax.
	Looks int
}

// check refuses what is wrong apart from the groups, and fills in the defaults.
func (r *Request) check() error {
	if err := r.InForce.check(); err != nil {
		return err
	}
	if r.Relevance.CentreSigmas == 0 {
		r.Relevance.CentreSigmas = CentreRelevanceDefault
	}
	if r.Relevance.SigmaRatio == 0 {
		r.Relevance.SigmaRatio = SpreadRelevanceDefault
	}
	if d := r.Relevance.CentreSigmas; !(d > 0 && d <= CentreRelevanceMax) {
		return refuse("relevance.centreSigmas", d, "want more than 0 and at most %g sigmas", CentreRelevanceMax)
	}
	if q := r.Relevance.SigmaRatio; !(q > 1 && q <= SpreadRelevanceMax) {
		return refuse("relevance.sigmaRatio", q, "want more than 1 and at most %g", SpreadRelevanceMax)
	}
	if r.Trigger > AfterSignal {
		return refuse("trigger", uint8(r.Trigger), "want %s or %s", Planned, AfterSignal)
	}
	if r.Looks < 1 || r.Looks > LooksMax {
		return refuse("looks", r.Looks, "want 1 to %d looks in twelve months, this one included", LooksMax)
	}
	return nil
}

func (f *InForce) check() error {
	known := Estimators(f.Kind)
	if known == nil {
		return refuse("inForce.kind", f.Kind, "limits are compared for individuals, xbar_r, xbar_s and run_means")
	}
	if err := f.Kind.CheckSize(f.SubgroupSize); err != nil {
		return &Error{Field: "inForce.subgroupSize", Problem: err.Error()}
	}
	if f.Estimator == limits.DefaultEstimator {
		f.Estimator = known[0]
	}
	if !slices.Contains(known, f.Estimator) {
		return refuse("inForce.estimator", f.Estimator, "does not fit a chart of kind %s, want one of %v", f.Kind, known)
	}
	if !(math.Abs(f.Centre) <= limits.MagnitudeMax) {
		return refuse("inForce.centre", f.Centre, "want a finite number of size at most %g", limits.MagnitudeMax)
	}
	if err := checkSigma("inForce.sigma", f.Sigma); err != nil {
		return err
	}
	if err := f.checkMeans(); err != nil {
		return err
	}
	return f.checkBasis()
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
	if !f.SigmaTarget && !(f.DegreesOfFreedom >= 0.5 && f.DegreesOfFreedom <= BasisMax) {
		return refuse("inForce.degreesOfFreedom", f.DegreesOfFreedom, "a sigma that is no target has effective degrees of freedom, 0.5 to %g", BasisMax)
	}
	return nil
}

// freedom of the old sigma, without end for a target.
func (f *InForce) freedom() float64 {
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

// Estimators lists the estimators of sigma by which limits of a kind are compared, the default first; nil for a kind that
// is not compared. Run means take those of sigma within runs.
func Estimators(kind chart.Kind) []limits.Estimator {
	switch kind {
	case chart.Individuals, chart.XbarR, chart.XbarS:
		return limits.EstimatorsOf(kind)
	case chart.RunMeans:
		return []limits.Estimator{limits.Pooled, limits.SBar, limits.RBar}
	}
	return nil
}

// estimating is the kind whose estimators give sigma, within subgroups for means.
func (f *InForce) estimating() chart.Kind {
	if f.Kind == chart.RunMeans {
		return chart.XbarS
	}
	return f.Kind
}
