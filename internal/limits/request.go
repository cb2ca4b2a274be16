package limits

import (
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

const (
	// GroupsMax bounds the groups of one basis: a century of daily results, and still a fraction of a second.
	GroupsMax = 100_000
	// ReadingsMax bounds the readings of all groups together.
	ReadingsMax = 1_000_000
	// MagnitudeMax bounds every figure given: squares of ReadingsMax of them still add up to a finite sum.
	MagnitudeMax = 1e100
	// ReasonBytesMax bounds the reason of an exclusion.
	ReasonBytesMax = 2000
)

// DecimalsUnknown, given as Group.Decimals, lets the readings' shortest form decide.
const DecimalsUnknown = -1

// Group is one result of the basis: a subgroup of readings, or a single reading for individuals. Groups come in the
// order of the track.
type Group struct {
	// Readings are finite, at most the subgroup size of them, and at least one unless the group is excluded.
	Readings []float64
	// Count takes the place of readings on a chart of counts, as chart.Kind.CheckCount allows it.
	Count *chart.Count
	// Material names the level of a standardised track.
	Material string
	// Decimals is the number of decimals as written, or DecimalsUnknown. It only bears on the default of published
	// decimals.
	Decimals int
	// BreakBefore says that no moving range reaches from the group before to this one: a break, a lot, a long gap.
	BreakBefore bool
	// Excluded leaves the group out of every estimate; it stays judged and plotted. ExclusionReason says why.
	Excluded        bool
	ExclusionReason string
}

// FixedLines are lines of one trace that a method, a target or a one-sided chart sets; nil where the line is computed.
// Each has basis MethodCriterion or Target with a value, or Absent. A fixed line moves only itself, never sigma.
type FixedLines struct {
	LowerAction, UpperAction, LowerWarning, UpperWarning *chart.Line
}

// Request is what limits are computed from.
type Request struct {
	Kind chart.Kind
	// SubgroupSize is the nominal number of readings a group: 1 (or 0) for individuals, else 2 to chart.SubgroupSizeMax.
	SubgroupSize int
	// Groups is the basis. It may be empty where every figure is given: Centre (but for duplicates) and Sigma, BetweenSigma
	// for run means.
	Groups []Group
	// Estimator of the process sigma; DefaultEstimator takes the first of EstimatorsOf(Kind).
	Estimator Estimator
	// Centre of the location trace and process Sigma (not that of the mean), where they are set rather than estimated.
	Centre, Sigma *float64
	// PublishedDecimals, 0 to decimal.PlacesMax. By default it is the larger of the results' decimals plus two and what
	// gives sigma four significant digits, and never fewer than a given centre, sigma or fixed line is written with. On
	// another scale, and for percentages, the results' decimals do not count.
	PublishedDecimals *int
	// Fixed lines by trace.
	Fixed [chart.Roles]FixedLines

	// Transform and Levels are taken over into the model of the limits. Kinds with readings take one of them, duplicates
	// none. On a transformed scale, decimals, a given centre and sigma and fixed lines are in units of that scale.
	Transform chart.Transform
	Levels    []chart.Level
	// BetweenSigma is the standard deviation between runs where it is set rather than estimated; run_means only. Sigma is
	// then the one within runs.
	BetweenSigma *float64
	// Counts says how limits of counts are made.
	Counts CountOptions
	// Duplicates says how the sigma of duplicates follows from their mean.
	Duplicates DuplicateOptions
}

// CountOptions are what a chart of counts can be asked for. Centre in the request is then the target of the plotted
// statistic: a fraction (p), a number of items (np), nonconformities a unit (c, u).
type CountOptions struct {
	// Method of the lines; the default is Exact where the smallest expected count is below ExactBelow, else Normal.
	Method chart.CountMethod
	// Extra is the model of variation beyond that of counting.
	Extra ExtraVariation
	// MeanUpperBound takes the place of the mean of an all-zero basis, in units of the centre.
	MeanUpperBound *float64
}

// ExtraVariation is how samples may differ more than counting explains. It needs the Normal method.
type ExtraVariation uint8

const (
	// NoExtra takes counting as all there is.
	NoExtra ExtraVariation = iota
	// LaneyFactor multiplies every sigma by one factor estimated from the moving ranges of the standardised counts (Laney
	// 2002).
	LaneyFactor
	// BetweenSamples adds one variance between samples to that of counting.
	BetweenSamples
)

// ExactBelow is the expected count under which the normal lines of counts are too wrong to be the default.
const ExactBelow = 9

// DuplicateOptions are what a chart of duplicates can be asked for; at most one of Bands and Function.
type DuplicateOptions struct {
	// Bands are the means from which each band of concentration holds, ascending; sigma is estimated in each. With
	// Sigmas given, one for each band, nothing is estimated.
	Bands, Sigmas []float64
	// Function estimates sigma as √(s0² + (b·mean)²); with S0 and B given nothing is estimated. Duplicate_range only.
	Function bool
	S0, B    *float64
	// AbsoluteBelow is the mean under which a relative_range chart plots the plain range; AbsoluteSigma, where it is
	// set rather than estimated.
	AbsoluteBelow float64
	AbsoluteSigma *float64
}

// estimator gives the estimator that the request asks for.
func (r *Request) estimator() Estimator {
	if r.Estimator == DefaultEstimator {
		return EstimatorsOf(r.Kind)[0]
	}
	return r.Estimator
}

// check refuses what is wrong in a request whatever its groups say.
func (r *Request) check() error {
	if EstimatorsOf(r.Kind) == nil && !r.Kind.Counts() {
		return refuse("kind", r.Kind, "want one of %s", chart.KindNames())
	}
	if err := r.Kind.CheckSize(r.SubgroupSize); err != nil {
		return &Error{"subgroupSize", "", err.Error()}
	}
	if len(r.Groups) > GroupsMax {
		return refuse("groups", len(r.Groups), "more than the limit of %d groups", GroupsMax)
	}
	for _, check := range []func() error{r.checkEstimator, r.checkFigures, r.checkScale, r.checkOptions, r.checkFixed} {
		if err := check(); err != nil {
			return err
		}
	}
	return nil
}

// checkFigures refuses figures that are given and cannot be.
func (r *Request) checkFigures() error {
	for _, f := range []struct {
		field string
		value *float64
		least float64
		of    bool
	}{
		{"centre", r.Centre, math.Inf(-1), !r.Kind.Duplicates()},
		{"sigma", r.Sigma, math.SmallestNonzeroFloat64, !r.Kind.Counts()},
		{"betweenSigma", r.BetweenSigma, 0, r.Kind == chart.RunMeans},
	} {
		if f.value == nil {
			continue
		}
		if !f.of {
			return refuse(f.field, *f.value, "a chart of kind %s takes none", r.Kind)
		}
		if err := checkMagnitude(f.field, *f.value); err != nil {
			return err
		}
		if *f.value < f.least {
			return refuse(f.field, *f.value, "must %s", map[bool]string{true: "not be negative", false: "be larger than zero"}[f.least == 0])
		}
	}
	if d := r.PublishedDecimals; d != nil && (*d < 0 || *d > decimal.PlacesMax) {
		return refuse("publishedDecimals", *d, "want 0 to %d", decimal.PlacesMax)
	}
	return nil
}

// checkOptions refuses options of other kinds.
func (r *Request) checkOptions() error {
	if !r.Kind.Counts() && r.Counts != (CountOptions{}) {
		return refuse(r.Counts.first(), "given", "a chart of kind %s takes readings", r.Kind)
	}
	if !r.Kind.Duplicates() && r.Duplicates.any() {
		return refuse(r.Duplicates.first(), "given", "a chart of kind %s has none", r.Kind)
	}
	return nil
}

func (r *Request) checkEstimator() error {
	of := EstimatorsOf(r.Kind)
	switch {
	case r.Estimator == DefaultEstimator:
		return nil
	case r.Sigma != nil:
		return refuse("estimator", r.Estimator, "sigma is given, so there is nothing to estimate; leave one of the two out")
	case r.Kind.Counts():
		return refuse("estimator", r.Estimator, "the sigma of counts follows from their mean; leave it out")
	case !slices.Contains(of, r.Estimator):
		return refuse("estimator", r.Estimator, "does not fit a chart of kind %s, want one of %v", r.Kind, of)
	case r.Kind == chart.RunMeans && r.Estimator == Overall:
		return refuse("estimator", r.Estimator, "holds what varies between runs as well and cannot be the sigma within; want one of %v", of[:3])
	}
	return nil
}

// checkGroup refuses what is wrong in group i.
func (r *Request) checkGroup(i int) error {
	g := &r.Groups[i]
	field := func(name string) string { return fmt.Sprintf("groups[%d].%s", i, name) }
	switch {
	case g.Count != nil:
		return refuse(field("count"), "given", "a chart of kind %s takes readings", r.Kind)
	case len(g.Readings) > r.SubgroupSize:
		return refuse(field("readings"), fmt.Sprintf("%d readings", len(g.Readings)), "more than the subgroup size, %d", r.SubgroupSize)
	case len(g.Readings) == 0 && !g.Excluded:
		return refuse(field("readings"), "none", "a group needs a reading, or an exclusion with its reason")
	case g.Decimals < DecimalsUnknown:
		return refuse(field("decimals"), g.Decimals, "want 0 or more, or %d where they are not known", DecimalsUnknown)
	}
	if err := g.checkExclusion(i); err != nil {
		return err
	}
	for j, x := range g.Readings {
		if finiteAndBounded(x) { // the field's name is only built where it is needed
			continue
		}
		return checkMagnitude(fmt.Sprintf("groups[%d].readings[%d]", i, j), x)
	}
	return nil
}

// checkExclusion refuses an exclusion of group i without a reason, or a reason without an exclusion.
func (g *Group) checkExclusion(i int) error {
	field := func(name string) string { return fmt.Sprintf("groups[%d].%s", i, name) }
	switch {
	case g.Excluded && g.ExclusionReason == "":
		return refuse(field("exclusionReason"), "empty", "an exclusion needs a reason")
	case !g.Excluded && g.ExclusionReason != "":
		return refuse(field("excluded"), false, "a reason for exclusion is given; mark the group as excluded or drop the reason")
	case len(g.ExclusionReason) > ReasonBytesMax:
		return refuse(field("exclusionReason"), fmt.Sprintf("%d bytes", len(g.ExclusionReason)), "longer than the limit of %d bytes", ReasonBytesMax)
	}
	return nil
}

func finiteAndBounded(x float64) bool { return math.Abs(x) <= MagnitudeMax } // false for NaN

func checkMagnitude(field string, x float64) error {
	switch {
	case math.IsNaN(x) || math.IsInf(x, 0):
		return refuse(field, x, "is not a finite number")
	case !finiteAndBounded(x):
		return refuse(field, x, "is larger in size than the limit of %g", MagnitudeMax)
	}
	return nil
}
