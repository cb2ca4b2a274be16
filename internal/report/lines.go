package report

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/report/judged"
)

// originalDigits are the significant digits of a place in the chart's unit where the trace is judged on another scale.
const originalDigits = 5

// traceTable writes the lines of a trace and what each rests on.
func (t *Text) traceTable(c *Computed, role chart.Role, trace *chart.Trace) {
	res := &c.Result
	name := judged.StatisticOf(res.Kind, &res.Model, role)
	if res.Provisional {
		name += ", provisional"
	}
	t.Section(fmt.Sprintf("%s trace: %s", capital(role.String()), name))
	places, at := res.PublishedDecimals, lineWords{res.Kind, &res.Model, role, trace}
	table := NewTable("line", ">value", ">in the unit", "rests on", "95 % interval")
	row := func(label string, l chart.Line, multiple float64, in *limits.Interval) {
		value := Fixed(l.Value, places)
		if l.Basis == chart.Absent {
			value = "none"
		}
		table.Row(label, value, at.original(&l.Value, l.Basis), at.restsOn(l, multiple), intervalText(in, places))
	}
	row("upper action", trace.UpperAction, chart.ActionMultiple, res.Intervals.UpperAction[role])
	row("upper warning", trace.UpperWarning, chart.WarningMultiple, res.Intervals.UpperWarning[role])
	table.Row(at.centreName(), FixedOr(trace.Centre, places, "none"), at.original(trace.Centre, chart.SigmaMultiple), c.centreRestsOn(role), intervalText(centreInterval(res, role), places))
	row("lower warning", trace.LowerWarning, -chart.WarningMultiple, res.Intervals.LowerWarning[role])
	row("lower action", trace.LowerAction, -chart.ActionMultiple, res.Intervals.LowerAction[role])
	if trace.Sigma != nil {
		table.Row("sigma", Significant(*trace.Sigma, 6), "", sigmaRestsOn(res, role), "")
	}
	t.Table(table)
}

func centreInterval(res *limits.Result, role chart.Role) *limits.Interval {
	if role == chart.Location {
		return res.Intervals.Centre
	}
	return res.Intervals.DispersionCentre
}

// lineWords says what the lines of a trace rest on.
type lineWords struct {
	kind  chart.Kind
	model *chart.Model
	role  chart.Role
	trace *chart.Trace
}

// centreName is what the middle line is called: on a transformed scale it is no mean in the chart's unit.
func (w lineWords) centreName() string {
	if w.transformed() {
		return "centre (median in the unit)"
	}
	return "centre"
}

func (w lineWords) transformed() bool {
	return w.role == chart.Location && w.model.Transform.Kind != chart.Identity
}

// original writes a place of a transformed trace in the chart's unit.
func (w lineWords) original(at *float64, basis chart.Basis) string {
	if !w.transformed() || at == nil || basis == chart.Absent {
		return ""
	}
	x, ok := w.model.Transform.Invert(*at)
	if !ok {
		return "none"
	}
	return Significant(x, originalDigits)
}

// restsOn says what a line at a multiple of the trace's sigma, or in its place, rests on.
func (w lineWords) restsOn(l chart.Line, multiple float64) string {
	switch l.Basis {
	case chart.MethodCriterion:
		return "method criterion"
	case chart.Target:
		return "target"
	case chart.TailProbability:
		return fmt.Sprintf("exact: %.3g beyond it, at most %.5g", l.Tail, chart.TailOf(multiple))
	case chart.Absent:
		return "no such line: " + w.whyAbsent(multiple)
	}
	return place(multiple)
}

func place(multiple float64) string {
	sign := "+"
	if multiple < 0 {
		sign = "-"
	}
	return fmt.Sprintf("centre %s %v sigma", sign, math.Abs(multiple))
}

// whyAbsent tells why a line that the kind could have does not exist.
func (w lineWords) whyAbsent(multiple float64) string {
	if w.kind.Duplicates() && multiple < 0 {
		return "replicates are watched for differing too much only"
	}
	if w.trace.Centre == nil || w.trace.Sigma == nil {
		return "it needs centre and sigma"
	}
	centre, at := *w.trace.Centre, *w.trace.Centre+multiple**w.trace.Sigma
	switch {
	case w.role == chart.Dispersion && at <= 0:
		return place(multiple) + " is not above zero"
	case w.transformed() && at < w.model.Transform.Floor():
		return fmt.Sprintf("%s lies below %g, the end of the scale", place(multiple), w.model.Transform.Floor())
	case w.kind.Counts() && w.model.CountMethod == chart.Exact && math.IsInf(limits.ExactCountLine(w.kind, centre, w.model.Inspected, multiple), 0):
		return fmt.Sprintf("no count leaves as little as %.5g beyond it", chart.TailOf(multiple))
	case w.kind.Counts() && w.model.CountMethod == chart.Normal && math.IsInf(limits.NormalCountLine(w.kind, centre, *w.trace.Sigma, w.model.Inspected, multiple), 0):
		if multiple < 0 {
			return place(multiple) + " is not above zero"
		}
		return place(multiple) + " is not below all items"
	}
	return "left out"
}

func (c *Computed) centreRestsOn(role chart.Role) string {
	res := &c.Result
	switch {
	case role == chart.Location && res.CentreOrigin == limits.Target:
		return "target"
	case role == chart.Location && res.Kind.Counts():
		return c.countedMean()
	case role == chart.Location && res.Kind == chart.RunMeans:
		return fmt.Sprintf("weighted mean of %s", countOf(res.Kind, res.N))
	case role == chart.Location && len(res.Model.Levels) > 0:
		return fmt.Sprintf("mean of %s, standardised", Count(res.Readings, "reading"))
	case role == chart.Location && res.Model.Transform.Kind != chart.Identity:
		return fmt.Sprintf("mean of %s on the scale", Count(res.Readings, "reading"))
	case role == chart.Location:
		return fmt.Sprintf("mean of %s", Count(res.Readings, "reading"))
	case res.Kind == chart.XbarS || res.Kind == chart.RunMeans:
		return "c4 times process sigma"
	}
	return "d2 times process sigma"
}

// countedMean says what the mean of counts is of.
func (c *Computed) countedMean() string {
	s := c.counted()
	switch c.Result.Kind {
	case chart.P:
		return fmt.Sprintf("%s of %s items", Shortest(s.total), Shortest(s.inspected))
	case chart.U:
		return fmt.Sprintf("%s in %s inspection units", Shortest(s.total), Significant(s.inspected, certifiedDigits))
	}
	return fmt.Sprintf("%s in %s", Shortest(s.total), Count(s.samples, "sample"))
}

func sigmaRestsOn(res *limits.Result, role chart.Role) string {
	switch {
	case role == chart.Location && res.Kind.Counts():
		return countSigmaText(res.Kind, &res.Model, Shortest(res.Model.Inspected))
	case role == chart.Location && res.Kind == chart.RunMeans:
		return fmt.Sprintf("root of (sigma between runs squared + process sigma squared over %d)", res.SubgroupSize)
	case role == chart.Location && res.SubgroupSize == 1:
		return "process sigma"
	case role == chart.Location:
		return fmt.Sprintf("process sigma over the root of %d", res.SubgroupSize)
	case res.Kind == chart.XbarS || res.Kind == chart.RunMeans:
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
