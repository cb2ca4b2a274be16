package report

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// lineLabels are the lines of a trace by the names of package limits.
var lineLabels = map[string]string{
	"lowerAction": "lower action", "upperAction": "upper action", "lowerWarning": "lower warning", "upperWarning": "upper warning",
}

// Tails writes the probabilities that a process as estimated leaves beyond the lines.
func (t *Text) Tails(tails []limits.Tail) {
	if len(tails) == 0 {
		return
	}
	t.Section("What lies beyond the lines while nothing is wrong")
	table := NewTable("trace", "line", ">for a size of", ">probability", ">asked for", ">times")
	for _, each := range tails {
		table.Row(each.Role.String(), lineLabels[each.Line], Shortest(each.Size), Significant(each.Probability, 3), Significant(each.Nominal, 4),
			fmt.Sprintf("%.2f", each.Probability/each.Nominal))
	}
	t.Table(table)
	t.line("")
	note := "Counts are whole, so the probability asked for is seldom met; 0 stands where there is no such line for the size."
	if tails[0].Role == chart.Dispersion {
		note = "A range is skewed, so more of it lies above three sigmas than of a normal statistic."
	}
	t.Paragraph("Of one point, on one side, if the process is as estimated. " + note)
}

// Components writes the parts of the variance. A part that was not estimated follows from the centre on charts of counts,
// and is a target on others.
func (t *Text) Components(kind chart.Kind, components []limits.Component, places int) {
	if len(components) == 0 {
		return
	}
	t.Section("Components of variance")
	table := NewTable("component", ">sigma", ">df", "95 % interval", "")
	truncated := false
	for _, c := range components {
		df, note := "", ""
		switch {
		case c.Truncated:
			note, truncated = "estimate below zero, taken as 0", true
		case c.DegreesOfFreedom == 0 && kind.Counts() && c.Name == "WITHIN":
			note = "from the centre, by counting"
		case c.DegreesOfFreedom == 0 && !kind.Counts():
			note = "target"
		}
		if c.DegreesOfFreedom > 0 {
			df = fmt.Sprintf("%.1f", c.DegreesOfFreedom)
		}
		table.Row(c.Name, Significant(c.Sigma, 6), df, finiteInterval(c.Interval, places), note)
	}
	t.Table(table)
	if truncated {
		t.line("")
		t.Paragraph("A component that was estimated below zero is no proof that there is none: the interval tells how large it may be.")
	}
}

// finiteInterval writes an interval whose upper end may be open.
func finiteInterval(in *limits.Interval, places int) string {
	if in != nil && math.IsInf(in.Upper, 1) {
		return Fixed(in.Lower, places) + " upwards"
	}
	return intervalText(in, places)
}

// Parts writes the sigmas of duplicates by the size of their mean.
func (t *Text) Parts(kind chart.Kind, parts []limits.Part) {
	if len(parts) == 0 {
		return
	}
	t.Section("Sigma of a single reading by the mean of its set")
	table := NewTable("part", ">from a mean of", ">sets", ">sigma", ">df", "95 % interval", "origin", ">shown over given")
	for _, p := range parts {
		from, df, ratio := "", "", ""
		if p.Name == limits.PartBand || p.Name == limits.PartAbsolute {
			from = Shortest(p.From)
		}
		if p.Name == limits.PartAbsolute {
			from = "below " + from
		}
		if p.DegreesOfFreedom > 0 {
			df = fmt.Sprintf("%.1f", p.DegreesOfFreedom)
		}
		if p.Ratio != nil {
			ratio = fmt.Sprintf("%.3f (%.3f to %.3f)", p.Ratio.Estimate, p.Ratio.Interval.Lower, p.Ratio.Interval.Upper)
		}
		table.Row(p.Name, from, fmt.Sprint(p.Groups), Significant(p.Sigma, 6), df, significantInterval(p.Interval), p.Origin.String(), ratio)
	}
	t.Table(table)
	t.line("")
	note := "In the chart's unit."
	if kind == chart.RelativeRange {
		note = "In percent of the mean, ABSOLUTE in the chart's unit."
	}
	t.Paragraph(note + " The first band holds below its mean as well.")
}

func significantInterval(in *limits.Interval) string {
	if in == nil {
		return ""
	}
	return Significant(in.Lower, 4) + " to " + Significant(in.Upper, 4)
}

// Compared writes given figures beside what the results show; nil is nothing to set beside.
func (t *Text) Compared(bias, sigma, between *limits.Comparison, places int) {
	var pairs []Pair
	add := func(label string, c *limits.Comparison, write func(float64) string) {
		if c != nil {
			pairs = append(pairs, Pair{label, fmt.Sprintf("%s, 95 %% interval %s to %s", write(c.Estimate), write(c.Interval.Lower), write(c.Interval.Upper))})
		}
	}
	ratio := func(x float64) string { return fmt.Sprintf("%.3f", x) }
	add("bias: mean less the given centre", bias, func(x float64) string { return Fixed(x, places) })
	add("sigma shown over sigma given", sigma, ratio)
	add("sigma between runs shown over given", between, ratio)
	if len(pairs) == 0 {
		return
	}
	t.Section("Given figures beside these results")
	t.Pairs(pairs...)
}

// FalseAlarm writes what limits from few results may do to the rate of false alarms.
func (t *Text) FalseAlarm(f *limits.FalseAlarm) {
	if f == nil {
		return
	}
	t.Section("False alarms to be expected of single points beyond the action lines")
	rate := func(x float64) string { return fmt.Sprintf("%.3g %% of points, one in %.0f", 100*x, 1/x) }
	t.Pairs(
		Pair{"lines from known figures", rate(f.Nominal)},
		Pair{"lines from so many results", rate(f.Median) + ", as often less as more (median)"},
		Pair{"one basis in ten has less than", rate(f.P10)},
		Pair{"one basis in ten has more than", rate(f.P90)},
	)
	t.line("")
	t.Paragraph("For independent normal results of an unchanged process. Centre and sigma are estimates, so the lines lie too near or too far; which of the two is not known.")
}
