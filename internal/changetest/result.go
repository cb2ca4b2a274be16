package changetest

import "limitary/internal/limits"

// Decision on one figure of the limits.
type Decision uint8

const (
	// NotEnoughData: the interval reaches over a relevance limit, or there is none.
	NotEnoughData Decision = iota
	// Keep: the whole interval lies within the relevance limits.
	Keep
	// Change: the whole interval lies beyond one relevance limit.
	Change
)

// String names the decision in messages and files.
func (d Decision) String() string {
	switch d {
	case Keep:
		return "KEEP"
	case Change:
		return "CHANGE"
	}
	return "NOT_ENOUGH_DATA"
}

// Reason says why a decision is NotEnoughData.
type Reason uint8

const (
	// Settled is the reason of the other decisions.
	Settled Reason = iota
	// TooFew new groups, fewer than GroupsMin, or none that give the estimate.
	TooFew
	// NoSpread: the new results are equal, or so coarse that their estimate of sigma is zero.
	NoSpread
	// TooCorrelated: the new results, or the old ones if they are like them, repeat each other too much.
	TooCorrelated
	// Straddles: the interval holds a relevance limit.
	Straddles
)

var reasonNames = [...]string{"SETTLED", "TOO_FEW", "NO_SPREAD", "TOO_CORRELATED", "STRADDLES"}

// String names the reason in messages and files.
func (r Reason) String() string {
	if int(r) < len(reasonNames) {
		return reasonNames[r]
	}
	return "unknown"
}

const (
	// GroupsMin is the number of new groups from which on intervals are given: under it neither correlation nor tails can
	// be looked at. Our choice, no source.
	GroupsMin = 8
	// effectiveMin independent results must be left on either side for an interval of the centre. Our choice, no source.
	effectiveMin = 2
	// Confidence is the level of every interval.
	Confidence = limits.Confidence
)

// Test is a significance test: t with one, F with two degrees of freedom. A target has infinite ones, and so has the
// plain test of counts.
type Test struct {
	Statistic, Freedom, FreedomBelow float64
	P                                float64
}

// Comparison is the answer on one figure. Estimate and all that follows from it are nil where nothing could be estimated.
type Comparison struct {
	// New and Old are the figures compared, in the chart's unit.
	New *float64
	Old float64
	// Estimate is the difference new less old in sigmas of the plotted statistic in force, or the ratio new to old.
	Estimate *float64
	// Interval holds the true difference or ratio with probability Confidence.
	Interval *limits.Interval
	// Relevance holds the differences that do not matter.
	Relevance limits.Interval
	Decision  Decision
	Reason    Reason
	// Differs says that the interval leaves out "no difference", whether or not the difference matters.
	Differs bool
	// Published is the answer against the figure in force as it stands. It is nil for NoSpread and TooCorrelated, and
	// for TooFew where Needed is reachable.
	Published *Published
	// Test is that of no difference, from the same figures as the interval. PValid is false where its p-value must not be
	// quoted as one, for PReason.
	Test    *Test
	PValid  bool
	PReason string
	// Plain is the textbook's two-sample t or F test, of normal independent readings, beside ours for comparison.
	Plain *Test
	// Needed says how many new groups would settle it, where the decision is NotEnoughData and nothing stands against it.
	Needed *Needed
	// Sentence says it in plain words.
	Sentence string
}

// Published sets the new results against the figure in force as it stands, as if it were a target. The lines are used as
// they are published, whatever error their basis left in them; whether they fit the process as it is now can always be
// settled by new results, where a small old basis leaves open whether the process has changed.
type Published struct {
	Interval *limits.Interval // nil where there are too few results
	Decision Decision
	// Needed is there where the decision is NotEnoughData and no number of results settles the comparison itself.
	Needed *Needed
}

// Result of a comparison.
type Result struct {
	// Groups and Readings of the new side, or for counts what was Inspected in all, in items or units; ExcludedLeftOut and BasisLeftOut count groups that were given and not used. A
	// group that is excluded and of the old basis counts as the latter.
	Groups, Readings              int
	Inspected                     float64
	ExcludedLeftOut, BasisLeftOut int
	Relevance                     Relevance
	Correlation                   Correlation
	// Tails is the factor φ by which the new sigma varies more than that of normal readings, at least 1.
	Tails float64
	// Dispersion is the factor φ, at least 1, by which a mean of the new counts varies more than counting explains, as a
	// variance; 1 for other kinds.
	Dispersion float64
	// Estimator of both sigmas of the spread; none for counts.
	Estimator limits.Estimator
	// Centre, nil for duplicates, and Spread of single readings (within subgroups for means), nil for counts. Means is the
	// spread of the subgroup means, nil but for charts of means.
	Centre, Spread, Means *Comparison
	// Decision is Change where any comparison says so, Keep where all do, else NotEnoughData.
	Decision Decision
	Looks    Looks
	Sentence string
}

// Figures are the comparisons that there are.
func (res *Result) Figures() (all []*Comparison) {
	for _, c := range []*Comparison{res.Centre, res.Spread, res.Means} {
		if c != nil {
			all = append(all, c)
		}
	}
	return all
}
