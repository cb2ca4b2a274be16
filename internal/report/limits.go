package report

import (
	"fmt"
	"io"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/report/judged"
)

// Computed is a computation of limits with the results it rests on.
type Computed struct {
	About
	Result limits.Result
	// Readings are those that the limits rest on, in order.
	Readings []float64
	// RowOf gives the row of a group of the computation.
	RowOf []int
	// Outcome judges the results by the limits computed from them.
	Outcome *judged.Outcome
}

// Limits writes the report of a computation.
func Limits(w io.Writer, c Computed) error {
	t := NewText(w)
	res := &c.Result
	if c.Title != "" {
		t.Title(Foreign(c.Title))
	}
	t.Title("Control limits, " + kindNames[res.Kind])
	t.line("")
	t.Pairs(append(c.filePairs(), c.basisPairs()...)...)
	t.moments(&c)
	for role, trace := range [...]*chart.Trace{&res.Location, &res.Dispersion} {
		t.traceTable(res, chart.Role(role), trace)
	}
	t.estimators(res)
	t.exclusions(&c)
	t.findings(res)
	t.Section("Signals of these results against these limits")
	t.signalTable(c.Outcome, &c.About)
	t.Section("Rules")
	t.Pairs(setPairs(c.Sets)...)
	t.noteItems(&c.About)
	t.closing()
	return t.Flush()
}

func (c *Computed) basisPairs() []Pair {
	res := &c.Result
	noun := "result"
	if res.Kind != chart.Individuals {
		noun = "subgroup"
	}
	used := fmt.Sprintf("%s used, %s, %d excluded", Count(res.N, noun), Count(res.Readings, "reading"), len(res.Excluded))
	size := ""
	if res.Kind != chart.Individuals {
		size = fmt.Sprintf("%d readings", res.SubgroupSize)
	}
	standing := fmt.Sprintf("%s; %s used, at least %d advised", originText(res), Count(res.N, noun), res.AdvisedMinimum)
	if res.Provisional {
		standing = "PROVISIONAL: " + standing
	}
	if res.Origin == limits.Target {
		standing = originText(res)
	}
	return []Pair{
		{"basis", used}, {"subgroup size", size}, {"limits are", standing},
		{"published", Count(res.PublishedDecimals, "decimal")}, {"computed", c.done()},
	}
}

func originText(res *limits.Result) string {
	switch res.Origin {
	case limits.Estimated:
		return "estimated from these results"
	case limits.Target:
		return "targets: centre and sigma are given"
	}
	if res.CentreOrigin == limits.Target {
		return "mixed: the centre is a target, sigma is estimated from these results"
	}
	return "mixed: the centre is estimated from these results, sigma is a target"
}

// certifiedDigits are the significant digits in which moments are shown, so that they can be held against certified ones.
const certifiedDigits = 12

// moments writes what the readings used say by themselves.
func (t *Text) moments(c *Computed) {
	xs := c.Readings
	if len(xs) < 2 {
		return
	}
	least, greatest := xs[0], xs[0]
	for _, x := range xs {
		least, greatest = min(least, x), max(greatest, x)
	}
	t.Section(fmt.Sprintf("The %d readings used", len(xs)))
	pairs := []Pair{
		{"mean", Significant(decimal.Mean(xs, decimal.Unrounded), certifiedDigits)},
		{"standard deviation", Significant(limits.StandardDeviation(xs), certifiedDigits) + " (divisor n-1, of all readings together)"},
		{"least, greatest", Shortest(least) + ", " + Shortest(greatest)},
	}
	if lag1, err := limits.Lag1Autocorrelation(xs); err == nil && c.Result.Kind == chart.Individuals {
		// 1.96/√n bounds 95 % of the lag-1 autocorrelations of independent values (common practice, no source).
		pairs = append(pairs, Pair{"lag-1 correlation", fmt.Sprintf("%.3f; of independent results 95 %% lie within %.3f of zero", lag1, 1.96/math.Sqrt(float64(len(xs))))})
	}
	t.Pairs(pairs...)
}

// traceTable writes the lines of a trace and what each rests on.
func (t *Text) traceTable(res *limits.Result, role chart.Role, trace *chart.Trace) {
	name := judged.StatisticName(res.Kind, role)
	if res.Provisional {
		name += ", provisional"
	}
	t.Section(fmt.Sprintf("%s trace: %s", capital(role.String()), name))
	places := res.PublishedDecimals
	table := NewTable("line", ">value", "rests on", "95 % interval")
	row := func(label string, l chart.Line, multiple float64, in *limits.Interval) {
		value := Fixed(l.Value, places)
		if l.Basis == chart.Absent {
			value = "none"
		}
		table.Row(label, value, restsOn(l, role, trace, multiple), intervalText(in, places))
	}
	row("upper action", trace.UpperAction, chart.ActionMultiple, res.Intervals.UpperAction[role])
	row("upper warning", trace.UpperWarning, chart.WarningMultiple, nil)
	table.Row("centre", FixedOr(trace.Centre, places, "none"), centreRestsOn(res, role), intervalText(centreInterval(res, role), places))
	row("lower warning", trace.LowerWarning, -chart.WarningMultiple, nil)
	row("lower action", trace.LowerAction, -chart.ActionMultiple, res.Intervals.LowerAction[role])
	table.Row("sigma", Significant(*trace.Sigma, 6), sigmaRestsOn(res, role), "")
	t.Table(table)
}

func centreInterval(res *limits.Result, role chart.Role) *limits.Interval {
	if role == chart.Location {
		return res.Intervals.Centre
	}
	return nil
}

// restsOn says what a line at a multiple of the trace's sigma, or in its place, rests on.
func restsOn(l chart.Line, role chart.Role, trace *chart.Trace, multiple float64) string {
	sign, size := "+", multiple
	if multiple < 0 {
		sign, size = "-", -multiple
	}
	place := fmt.Sprintf("centre %s %v sigma", sign, size)
	switch l.Basis {
	case chart.MethodCriterion:
		return "method criterion"
	case chart.Target:
		return "target"
	case chart.TailProbability:
		return fmt.Sprintf("at most %.5g beyond it", l.Tail)
	case chart.Absent:
		if trace.Centre == nil || trace.Sigma == nil {
			return "no such line: it needs centre and sigma"
		}
		if role == chart.Dispersion && *trace.Centre+multiple**trace.Sigma <= 0 {
			return "no such line: " + place + " is not above zero"
		}
		return "no such line: left out"
	}
	return place
}

func centreRestsOn(res *limits.Result, role chart.Role) string {
	switch {
	case role == chart.Location && res.CentreOrigin == limits.Target:
		return "target"
	case role == chart.Location:
		return fmt.Sprintf("mean of %s", Count(res.Readings, "reading"))
	case res.Kind == chart.XbarS:
		return "c4 times process sigma"
	}
	return "d2 times process sigma"
}

func sigmaRestsOn(res *limits.Result, role chart.Role) string {
	switch {
	case role == chart.Location && res.SubgroupSize == 1:
		return "process sigma"
	case role == chart.Location:
		return fmt.Sprintf("process sigma over the root of %d", res.SubgroupSize)
	case res.Kind == chart.XbarS:
		return "root of (1 - c4 squared) times process sigma"
	}
	return "d3 times process sigma"
}

func intervalText(in *limits.Interval, places int) string {
	if in == nil {
		return ""
	}
	return fmt.Sprintf("%s to %s", Fixed(in.Lower, places), Fixed(in.Upper, places))
}

func capital(s string) string { return string(s[0]-'a'+'A') + s[1:] }
