package report

import (
	"fmt"
	"slices"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// takesIn says which variation an estimator sees: choosing the wrong one is the commonest mistake in the field.
var takesIn = map[limits.Estimator]string{
	limits.MeanMovingRange:   "neighbouring results; drift and shifts hardly enter",
	limits.MedianMovingRange: "neighbouring results; a few large jumps hardly enter either",
	limits.RBar:              "scatter within subgroups, by their ranges",
	limits.SBar:              "scatter within subgroups, by their standard deviations",
	limits.Pooled:            "scatter within subgroups, pooled; a few wild subgroups count most",
	limits.Overall:           "everything, drift, shifts and differences between subgroups included",
}

// restsOnNouns say what an estimator counts.
var restsOnNouns = map[limits.Estimator]string{
	limits.MeanMovingRange: "moving range", limits.MedianMovingRange: "moving range",
	limits.RBar: "range", limits.SBar: "standard deviation", limits.Pooled: "subgroup", limits.Overall: "reading",
}

// estimators writes the estimates of process sigma side by side.
func (t *Text) estimators(res *limits.Result) {
	if res.Kind.Counts() {
		return
	}
	title := "Process sigma, the standard deviation of a single reading"
	switch res.Kind {
	case chart.RunMeans:
		title += " within its run"
	case chart.RelativeRange:
		title += " in percent of the mean"
	}
	t.Section(title)
	t.Pairs(Pair{"published", Fixed(res.ProcessSigma, res.PublishedDecimals) + sigmaOrigin(res)})
	if len(res.Estimates) == 0 {
		return
	}
	t.line("")
	table := NewTable("", "estimator", ">sigma", ">df", ">from", "", "takes in")
	for _, e := range res.Estimates {
		chosen := ""
		if e.Chosen {
			chosen = "*"
		}
		noun := restsOnNouns[e.Name]
		if e.N != 1 {
			noun += "s"
		}
		table.Row(chosen, e.Name.String(), Significant(e.Sigma, 6), fmt.Sprintf("%.1f", e.DegreesOfFreedom), fmt.Sprint(e.N), noun, takesIn[e.Name])
	}
	t.Table(table)
	t.line("")
	mark := "* used for the limits."
	if res.SigmaOrigin == limits.Target {
		mark = "None is used: sigma is a target."
	}
	t.Paragraph(mark + " df: effective degrees of freedom. Each estimate is divided by its chart factor, OVERALL and POOLED by c4, so that it is unbiased.")
}

func sigmaOrigin(res *limits.Result) string {
	if spread := res.Model.Spread; spread != nil && len(res.Estimates) == 0 {
		if len(spread.Bands) > 0 {
			return ", that of the first band"
		}
		return ", as the function of the mean has it at the median of the means"
	}
	if res.SigmaOrigin == limits.Target {
		return ", target"
	}
	for _, e := range res.Estimates {
		if e.Chosen {
			return ", estimated by " + e.Name.String() + sigmaInterval(res)
		}
	}
	return ""
}

func sigmaInterval(res *limits.Result) (text string) {
	if in := res.Intervals.Sigma; in != nil {
		text = fmt.Sprintf("; 95 %% interval %s", intervalText(in, res.PublishedDecimals))
	}
	if res.Provisional {
		text += "; provisional"
	}
	return text
}

// exclusions writes what was left out of the estimates, and why.
func (t *Text) exclusions(c *Computed) {
	if len(c.Result.Excluded) == 0 {
		return
	}
	t.Section("Excluded from the estimates, judged all the same")
	table := NewTable(">line", "id", "time", "readings", "reason")
	for _, e := range c.Result.Excluded {
		row := c.Table.Row(c.RowOf[e.Group])
		texts := make([]string, len(row.Readings))
		for i, r := range row.Readings {
			texts[i] = readingText(r)
		}
		id := row.ID
		if id == "" {
			id = row.Group
		}
		table.Row(fmt.Sprint(row.Line), Foreign(id), Foreign(row.Time), foreign(strings.Join(texts, " "), 60), ForeignLong(e.Reason))
	}
	t.Table(table)
}

// findings writes what is to know about the limits before they are used.
func (t *Text) findings(c *Computed) {
	t.Section("Findings")
	found := slices.Clone(c.Result.Findings)
	if c.Diagnostics != nil {
		found = append(found, c.Diagnostics.Findings...)
	}
	if len(found) == 0 {
		t.Paragraph("None of the checks made found anything. That is no proof that the results are independent, normal and from one process.")
	}
	for _, f := range found {
		t.Item(fmt.Sprintf("%s (%.4g, threshold %.4g): %s %s What it could miss: %s", f.Code, f.Figure, f.Threshold, f.Text, f.Advice, f.CouldMiss))
	}
}
