package report

import (
	"fmt"
	"strings"

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
	t.Section("Process sigma, the standard deviation of a single reading")
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
	if res.SigmaOrigin == limits.Target {
		return ", target"
	}
	for _, e := range res.Estimates {
		if !e.Chosen {
			continue
		}
		text := ", estimated by " + e.Name.String()
		if in := res.Intervals.Sigma; in != nil {
			text += fmt.Sprintf("; 95 %% interval %s", intervalText(in, res.PublishedDecimals))
		}
		if res.Provisional {
			text += "; provisional"
		}
		return text
	}
	return ""
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
func (t *Text) findings(res *limits.Result) {
	t.Section("Findings")
	if len(res.Findings) == 0 {
		t.Paragraph("None of the checks made found anything. That is no proof that the results are independent, normal and from one process.")
	}
	for _, f := range res.Findings {
		t.Item(fmt.Sprintf("%s (%.4g, threshold %.4g): %s %s What it could miss: %s", f.Code, f.Figure, f.Threshold, f.Text, f.Advice, f.CouldMiss))
	}
}
