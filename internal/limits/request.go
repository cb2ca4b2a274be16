package limits

import (
	"fmt"
	"math"

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
	// Groups is the basis. It may be empty where both Centre and Sigma are given.
	Groups []Group
	// Estimator of the process sigma; DefaultEstimator takes the first of EstimatorsOf(Kind).
	Estimator Estimator
	// Centre of the location trace and process Sigma (not that of the mean), where they are set rather than estimated.
	Centre, Sigma *float64
	// PublishedDecimals, 0 to decimal.PlacesMax. By default it is the larger of the results' decimals plus two and what
	// gives sigma four significant digits, and never fewer than a given centre, sigma or fixed line is written with.
	PublishedDecimals *int
	// Fixed lines by trace.
	Fixed [chart.Roles]FixedLines
}

// check refuses what is wrong in a request whatever its readings say.
func (r *Request) check() error {
	if EstimatorsOf(r.Kind) == nil {
		return refuse("kind", r.Kind, "limits are computed for individuals, xbar_r and xbar_s")
	}
	if err := r.Kind.CheckSize(r.SubgroupSize); err != nil {
		return &Error{"subgroupSize", "", err.Error()}
	}
	if len(r.Groups) > GroupsMax {
		return refuse("groups", len(r.Groups), "more than the limit of %d groups", GroupsMax)
	}
	if r.Estimator != DefaultEstimator {
		if err := r.checkEstimator(); err != nil {
			return err
		}
	}
	if r.Centre != nil {
		if err := checkMagnitude("centre", *r.Centre); err != nil {
			return err
		}
	}
	if r.Sigma != nil {
		if err := checkMagnitude("sigma", *r.Sigma); err != nil {
			return err
		}
		if *r.Sigma <= 0 {
			return refuse("sigma", *r.Sigma, "must be larger than zero")
		}
	}
	if d := r.PublishedDecimals; d != nil && (*d < 0 || *d > decimal.PlacesMax) {
		return refuse("publishedDecimals", *d, "want 0 to %d", decimal.PlacesMax)
	}
	return r.checkFixed()
}

func (r *Request) checkEstimator() error {
	if r.Sigma != nil {
		return refuse("estimator", r.Estimator, "sigma is given, so there is nothing to estimate; leave one of the two out")
	}
	for _, e := range EstimatorsOf(r.Kind) {
		if e == r.Estimator {
			return nil
		}
	}
	return refuse("estimator", r.Estimator, "does not fit a chart of kind %s, want one of %v", r.Kind, EstimatorsOf(r.Kind))
}

// checkGroup refuses what is wrong in group i.
func (r *Request) checkGroup(i int) error {
	g := &r.Groups[i]
	field := func(name string) string { return fmt.Sprintf("groups[%d].%s", i, name) }
	switch {
	case len(g.Readings) > r.SubgroupSize:
		return refuse(field("readings"), fmt.Sprintf("%d readings", len(g.Readings)), "more than the subgroup size, %d", r.SubgroupSize)
	case len(g.Readings) == 0 && !g.Excluded:
		return refuse(field("readings"), "none", "a group needs a reading, or an exclusion with its reason")
	case g.Decimals < DecimalsUnknown:
		return refuse(field("decimals"), g.Decimals, "want 0 or more, or %d where they are not known", DecimalsUnknown)
	case g.Excluded && g.ExclusionReason == "":
		return refuse(field("exclusionReason"), "empty", "an exclusion needs a reason")
	case !g.Excluded && g.ExclusionReason != "":
		return refuse(field("excluded"), false, "a reason for exclusion is given; mark the group as excluded or drop the reason")
	case len(g.ExclusionReason) > ReasonBytesMax:
		return refuse(field("exclusionReason"), fmt.Sprintf("%d bytes", len(g.ExclusionReason)), "longer than the limit of %d bytes", ReasonBytesMax)
	}
	for j, x := range g.Readings {
		if finiteAndBounded(x) { // the field's name is only built where it is needed
			continue
		}
		return checkMagnitude(fmt.Sprintf("groups[%d].readings[%d]", i, j), x)
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
