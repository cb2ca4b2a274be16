// Package chart holds the vocabulary that limits and judge share: chart kinds, traces and the lines drawn on them.
//
// A chart of variables data has two traces. The location trace plots where the results lie (a single value, a subgroup
// mean); the dispersion trace plots how far they scatter (a moving range, a range, a standard deviation). Each trace has
// a centre line, the standard deviation of the plotted statistic, and up to four lines. Statistics and lines are in the
// chart's unit.
package chart

import "fmt"

// Role names one of the two traces of a chart.
type Role uint8

const (
	// Location is the trace of values or means.
	Location Role = iota
	// Dispersion is the trace of moving ranges, ranges or standard deviations.
	Dispersion
	// Roles is the number of roles, for arrays with one entry a trace.
	Roles
)

// String names the role in messages and files.
func (r Role) String() string {
	if r == Dispersion {
		return "dispersion"
	}
	return "location"
}

// Basis says what a line rests on.
type Basis uint8

const (
	// SigmaMultiple lies ActionMultiple or WarningMultiple sigmas of the plotted statistic from the centre.
	SigmaMultiple Basis = iota
	// TailProbability leaves at most Line.Tail outside it.
	TailProbability
	// MethodCriterion is a figure of the accredited method; it moves this line only, never sigma.
	MethodCriterion
	// Target is a figure set by the laboratory or a programme.
	Target
	// Absent is a line that does not exist, such as the lower line of a range whose three sigmas reach below zero.
	Absent
)

var basisNames = [...]string{"sigma_multiple", "tail_probability", "method_criterion", "target", "absent"}

// String names the basis in messages and canonical bytes.
func (b Basis) String() string {
	if int(b) < len(basisNames) {
		return basisNames[b]
	}
	return fmt.Sprintf("basis(%d)", uint8(b))
}

const (
	// ActionMultiple and WarningMultiple are Shewhart's three sigmas and the customary two (common practice).
	ActionMultiple  = 3.0
	WarningMultiple = 2.0
)

// Line is one action or warning line. The JSON forms here are part of a version's canonical bytes and never change.
type Line struct {
	// Value is where the line lies at the nominal subgroup size, in the unit of the plotted statistic. It has no
	// meaning where Basis is Absent.
	Value float64 `json:"value"`
	Basis Basis   `json:"basis"`
	// Tail is the probability left beyond the line, where Basis is TailProbability.
	Tail float64 `json:"tail,omitempty"`
}

// Fixed reports whether the line stays at Value whatever the size of the subgroup.
func (l Line) Fixed() bool {
	return l.Basis == MethodCriterion || l.Basis == Target || l.Basis == TailProbability
}

// Trace is the published description of one trace: centre line, sigma of the plotted statistic and lines, all at the
// nominal subgroup size. Centre and lines are rounded to the published decimals where those are set. Sigma follows from
// the published process sigma and is not rounded again, so that the lines can be drawn anew from centre and sigma.
// Centre and Sigma are nil where a trace has only fixed lines.
type Trace struct {
	Centre       *float64 `json:"centre"`
	Sigma        *float64 `json:"sigma"`
	LowerAction  Line     `json:"lower_action"`
	UpperAction  Line     `json:"upper_action"`
	LowerWarning Line     `json:"lower_warning"`
	UpperWarning Line     `json:"upper_warning"`
}
