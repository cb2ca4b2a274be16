package report

import (
	"fmt"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/resultfile"
)

// Verdicts collects one row a result. Take is fit for judged.Run's each.
type Verdicts struct {
	judge *judge.Judge
	file  *resultfile.Table
	first int
	table *Table
}

// NewVerdicts begins the table of verdicts; rows before first are context and left out.
func NewVerdicts(j *judge.Judge, t *resultfile.Table, first int) *Verdicts {
	return &Verdicts{j, t, first, NewTable(">line", "id", "time", ">location", ">dispersion", "standing", "because")}
}

// Take adds the next row.
func (v *Verdicts) Take(row int, verdict *judge.Verdict) {
	if row < v.first {
		return
	}
	r := v.file.Row(row)
	places := v.judge.Limits().Places
	var shown [chart.Roles]string
	for role, tv := range verdict.Traces {
		if tv.Point {
			shown[role] = boundText(r, chart.Role(role)) + Fixed(tv.Statistic, places)
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
	v.table.Row(fmt.Sprint(r.Line), Foreign(name(r)), Foreign(r.Time), shown[chart.Location], shown[chart.Dispersion],
		verdict.Standing.String(), strings.Join(because, ", "))
}
