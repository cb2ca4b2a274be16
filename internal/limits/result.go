package limits

import (
	"fmt"

	"limitary/internal/chart"
)

// Origin says whether a figure was estimated from the basis or set as a target.
type Origin uint8

const (
	// Estimated from the readings of the basis.
	Estimated Origin = iota
	// Target is set by the laboratory or a programme.
	Target
	// Mixed is the origin of limits with one of centre and sigma estimated and the other a target.
	Mixed
)

// String names the origin in messages and files.
func (o Origin) String() string {
	switch o {
	case Estimated:
		return "estimated"
	case Target:
		return "target"
	case Mixed:
		return "mixed"
	}
	return fmt.Sprintf("origin(%d)", uint8(o))
}

// Result is a set of limits and what it rests on. Figures are in the chart's unit.
type Result struct {
	Kind         chart.Kind
	SubgroupSize int
	// PublishedDecimals is the number of decimals of ProcessSigma, both centres and all lines.
	PublishedDecimals int
	// ProcessSigma is the standard deviation of single readings, rounded once. Everything else that depends on sigma
	// follows from this rounded figure.
	ProcessSigma float64
	// Model is what scales follow from besides, rounded like ProcessSigma.
	Model chart.Model
	// Location and Dispersion hold, at the nominal subgroup size: the rounded centre; the sigma of the plotted
	// statistic as it follows from ProcessSigma by At, not rounded a second time; lines that are the rounded
	// centre ± z·sigma. So lines for another size follow from what is published in the same way.
	Location, Dispersion chart.Trace

	// N is the number of groups used, Readings that of their readings. MovingRanges counts the moving ranges of
	// individuals, Dispersions the subgroups of at least two readings.
	N, Readings, MovingRanges, Dispersions int
	Excluded                               []Exclusion

	// Origin of the limits as a whole and of each figure; that of BetweenSigma for run means only.
	Origin, CentreOrigin, SigmaOrigin, BetweenOrigin Origin
	// CentreUnrounded, SigmaUnrounded (process) and BetweenUnrounded (run means) are the figures before rounding.
	CentreUnrounded, SigmaUnrounded, BetweenUnrounded float64
	// Estimates by every estimator of the kind that the basis allows; one is chosen unless sigma is a target.
	Estimates []Estimate
	Intervals Intervals

	// Provisional marks limits with something estimated from fewer groups than AdvisedMinimum.
	Provisional    bool
	AdvisedMinimum int
	Findings       []Finding
	// Components are the parts of the variance, where the kind has several.
	Components []Component
	// Tails are the probabilities that a process as estimated leaves beyond the action and warning lines, where lines do
	// not follow from a normal statistic.
	Tails []Tail
	// Parts are the sigmas of duplicates by the size of their mean; nil for other kinds.
	Parts []Part
	// Bias is the mean of the results less a given centre. SigmaRatio and BetweenRatio are the sigmas that the results
	// show over given ones. All are nil where nothing is given or there is nothing to hold against it.
	Bias, SigmaRatio, BetweenRatio *Comparison
	// FalseAlarm is what limits of this basis may do to the rate of false alarms; nil where centre and sigma are given.
	FalseAlarm *FalseAlarm

	// runs is the analysis of runs while the result is made.
	runs *runAnalysis
	// dataMean is the mean of the readings used, where there are any.
	dataMean float64
}

// Component is one part of a variance.
type Component struct {
	// Name is WITHIN, BETWEEN or TOTAL (of a single reading).
	Name string
	// Sigma is the root of the component, unrounded; a negative estimate of the variance is 0, and Truncated says so.
	Sigma float64
	// DegreesOfFreedom are effective; 0 where the component is given.
	DegreesOfFreedom float64
	Interval         *Interval
	Truncated        bool
}

// Tail is a probability beyond one line.
type Tail struct {
	Role chart.Role
	// Line is lowerAction, upperAction, lowerWarning or upperWarning.
	Line string
	// Size is the inspected items or units, or the readings, that it holds for.
	Size float64
	// Probability beyond the line, and Nominal, what was asked for.
	Probability, Nominal float64
}
