package diagnostics

import "limitary/internal/limits"

// Level is the level of each test: the probability with which it reports clean data, independent normal readings with
// one mean and one sigma.
const Level = 0.01

// Outcome of a test.
type Outcome string

const (
	// NothingFound is no proof of the opposite; see Test.CouldMiss.
	NothingFound Outcome = "NOTHING_FOUND"
	// Found has a finding of the same code.
	Found Outcome = "FOUND"
	// Void tests were not made, because something in the data makes their level meaningless.
	Void Outcome = "VOID"
	// NotEnoughData is a test that needs more, or something that was not given.
	NotEnoughData Outcome = "NOT_ENOUGH_DATA"
)

// Subjects of tests.
const (
	// IndividualValues are the readings of a chart of individuals. In charts of subgroups they are what is left of the
	// readings without the means of their subgroups; see the package comment.
	IndividualValues = "individual values"
	// SubgroupMeans are the plotted means.
	SubgroupMeans = "subgroup means"
	// Subgroups are compared with each other as a whole.
	Subgroups = "subgroups"
	// ReadingsInOrder are all readings one after another.
	ReadingsInOrder = "readings in order"
	// Counts are the counts of nonconforming items or nonconformities.
	Counts = "counts"
	// SetsOfDuplicates are compared with each other as a whole.
	SetsOfDuplicates = "sets of duplicates"
	// StandardisedRanges are the ranges of sets of duplicates in standard deviations of a difference, √2 times the sigma
	// that the limits give at the mean; those of larger sets are turned into what is as rarely exceeded.
	StandardisedRanges = "standardised ranges"
	// PlottedPoints are the points of the location trace.
	PlottedPoints = "plotted points"
)

// Test is one question asked of the basis. Statistic and its p-value or critical value are nil unless it was made.
type Test struct {
	// Code is that of the finding it may give.
	Code string
	// Name is the statistic's customary name, Subject what it was computed from, N how many of these.
	Name, Subject string
	N             int
	Statistic     *float64
	// PValue or Critical is set, never both. The test finds something where PValue is below Level, or the statistic is
	// beyond Critical on the side that the test watches.
	PValue, Critical *float64
	// Level is 0 for what is no test of chance, such as the number of days.
	Level   float64
	Outcome Outcome
	// Reason says why the test was not made, or adds how it was.
	Reason string
	// CouldMiss says what may be wrong though nothing was found.
	CouldMiss string

	text, advice string
}

// SetupRow sets the signals of one rule in the basis beside those of clean data.
type SetupRow struct {
	// Rule is an id of nelson-1984, Description the rule in words.
	Rule, Description string
	// Observed is the number of points at which it completes.
	Observed int
	// Expected is the mean of that number for independent normal points and known limits.
	Expected float64
}

// Times says when the groups of a request were measured. Keys are compared, nothing else; an empty one is not known.
// A list that ends early leaves the rest unknown.
type Times struct {
	Days, Runs []string
}

// Extent is how much the basis holds.
type Extent struct {
	// Groups and Readings are those used: not excluded, with readings or a count.
	Groups, Readings int
	// Days and Runs are the different keys, nil where any group's is not known.
	Days, Runs *int
}

// Report is what the data of a basis say against limits computed from them.
type Report struct {
	Extent Extent
	// Step is the rounding step of the readings in the chart's unit, 0 where none was found, and Tied the share of
	// readings that are equal to another one.
	Step, Tied float64
	// Tests in the order they were considered.
	Tests    []Test
	Findings []limits.Finding
	// Setup has a row for each rule of nelson-1984; nil where the location trace has no centre or sigma.
	Setup []SetupRow
	// Values and Means are for drawing; nil where there is nothing to draw. Values are StandardisedRanges on charts of
	// duplicates. Means is for charts of subgroups only.
	Values, Means *Picture
	// JointRate is the probability that clean data give at least one finding of a test at Level, as simulated for the
	// kind with all its tests, see JointRateIndividuals; 0 where none was made. JointBound is 1 - 0.99^k for the k tests made at Level, what it would be if they were
	// independent and exact.
	JointRate, JointBound float64
}

// add takes a test into the report, and its finding if it has one.
func (r *Report) add(t Test) {
	r.Tests = append(r.Tests, t)
	if t.Outcome != Found {
		return
	}
	f := limits.Finding{Code: t.Code, Text: t.text, Advice: t.advice, CouldMiss: t.CouldMiss}
	switch {
	case t.PValue != nil:
		f.Figure, f.Threshold = *t.PValue, t.Level
	default:
		f.Figure, f.Threshold = *t.Statistic, *t.Critical
	}
	r.Findings = append(r.Findings, f)
}

// notMade closes a test that was not made.
func (t Test) notMade(o Outcome, reason string) Test {
	t.Outcome, t.Reason = o, reason
	return t
}

// withP closes a test by its p-value.
func (t Test) withP(statistic, p float64) Test {
	t.Statistic, t.PValue = &statistic, &p
	t.Outcome = NothingFound
	if p < t.Level {
		t.Outcome = Found
	}
	return t
}

// withCritical closes a test by its critical value.
func (t Test) withCritical(statistic, critical float64, beyond bool) Test {
	t.Statistic, t.Critical = &statistic, &critical
	t.Outcome = NothingFound
	if beyond {
		t.Outcome = Found
	}
	return t
}
