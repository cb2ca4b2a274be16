package report

import (
	"fmt"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/report/judged"
	"limitary/internal/resultfile"
)

// Verdicts collects one row a result. Take is fit for judged.Run's each.
type Verdicts struct {
	judge *judge.Judge
	rows  *judged.Rows
	first int
	table *Table
}

// NewVerdicts begins the table of verdicts; rows before first are context and left out.
func NewVerdicts(j *judge.Judge, rows *judged.Rows, first int) *Verdicts {
	return &Verdicts{j, rows, first, NewTable(">line", "id", "time", "material", ">count", ">inspected", ">location", ">in the unit", ">dispersion", "standing", "because")}
}

// Take adds the next row.
func (v *Verdicts) Take(row int, verdict *judge.Verdict) {
	if row < v.first {
		return
	}
	r := v.rows.Table.Row(row)
	var shown [chart.Roles]string
	original := ""
	for role, tv := range verdict.Traces {
		if !tv.Point {
			continue
		}
		shown[role] = statisticText(v.judge, boundText(r, chart.Role(role)), tv.Statistic)
		if chart.Role(role) == chart.Location {
			original = originalText(v.judge, r, tv.Statistic)
		}
	}
	var because []string
	for _, h := range verdict.Hits {
		because = append(because, v.judge.Plan(h.Role).Specs()[h.Rule].ID)
	}
	if verdict.Standing == judge.NotJudged {
		because = []string{verdict.Reason.String()}
	}
	if verdict.ByBound {
		because = append(because, "by bound")
	}
	count, inspected := v.counted(row)
	v.table.Row(fmt.Sprint(r.Line), Foreign(name(r)), Foreign(r.Time), Foreign(r.Material), count, inspected, shown[chart.Location], original, shown[chart.Dispersion],
		verdict.Standing.String(), strings.Join(because, ", "))
}

// statisticText writes a statistic as it was judged.
func statisticText(j *judge.Judge, sign string, x float64) string {
	l := j.Limits()
	if t := l.Model.Transform; t.Kind == chart.Log && x <= t.Floor() {
		return "below the scale"
	}
	return sign + Fixed(x, l.Places)
}

// originalText writes a location in the chart's unit where the trace is judged on another scale: a single reading as it
// was written.
func originalText(j *judge.Judge, row resultfile.Row, statistic float64) string {
	x, own, ok := j.Original(chart.Location, row.Material, statistic)
	switch {
	case !own:
		return ""
	case len(row.Readings) == 1:
		return readingText(row.Readings[0])
	case !ok:
		return ""
	}
	return boundText(row, chart.Location) + Significant(x, originalDigits)
}

// counted gives the count of a row and what was inspected, on charts of counts.
func (v *Verdicts) counted(row int) (count, inspected string) {
	if !v.rows.Kind.Counts() {
		return "", ""
	}
	c, ok := v.rows.Count(row)
	if !ok {
		return "", ""
	}
	return Shortest(c.Nonconforming), Shortest(c.Inspected)
}
