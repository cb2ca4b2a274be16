package judged

import (
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/plot"
	"limitary/internal/resultfile"
	"limitary/internal/rules"
)

// Picture collects verdicts for a plot. Take is fit for Run's each.
type Picture struct {
	judge  *judge.Judge
	table  *resultfile.Table
	traces [chart.Roles]*plot.Trace
	lines  map[scaled]*plot.Lines
}

type scaled struct {
	role chart.Role
	at   rules.Scale
}

// NewPicture begins the picture of a table.
func NewPicture(j *judge.Judge, t *resultfile.Table) *Picture {
	p := &Picture{judge: j, table: t, lines: map[scaled]*plot.Lines{}}
	l := j.Limits()
	places := l.Places
	if places == decimal.Unrounded {
		places = unroundedPlaces(l, t)
	}
	for role := range p.traces {
		if j.Plan(chart.Role(role)) != nil {
			p.traces[role] = &plot.Trace{Name: StatisticName(l.Kind, chart.Role(role)), Decimals: places, Points: make([]plot.Point, 0, t.Len())}
		}
	}
	return p
}

// unroundedPlaces gives decimals for the values of lines that are not rounded: what results, centre and sigma are
// written with, and one more.
func unroundedPlaces(l judge.Limits, t *resultfile.Table) int {
	places := t.Places
	if trace := l.Traces[chart.Location]; trace != nil {
		for _, x := range []*float64{trace.Centre, trace.Sigma} {
			if x != nil {
				places = max(places, min(decimal.Places(*x), t.Places+3))
			}
		}
	}
	return min(places+1, decimal.PlacesMax)
}

// StatisticName says what a trace plots.
func StatisticName(kind chart.Kind, role chart.Role) string {
	names := map[chart.Kind][chart.Roles]string{
		chart.Given:       {"Statistic as given", ""},
		chart.Individuals: {"Single value", "Moving range"},
		chart.XbarR:       {"Subgroup mean", "Subgroup range"},
		chart.XbarS:       {"Subgroup mean", "Subgroup standard deviation"},
	}
	return names[kind][role]
}

// Take adds the next row.
func (p *Picture) Take(row int, v *judge.Verdict) {
	label := p.label(row)
	for role, trace := range p.traces {
		if trace == nil {
			continue
		}
		role := chart.Role(role)
		pt := plot.Point{Label: label, BreakBefore: p.table.Break(row), Excluded: p.table.Excluded(row)}
		at := p.judge.Plan(role).Nominal()
		switch tv := v.Traces[role]; {
		case tv.Point:
			pt.Statistic, at = tv.Statistic, tv.Scale
			if role == chart.Location {
				pt.Bound = p.bound(row)
			}
		case role == chart.Location && v.Standing == judge.NotJudged && v.Reason == judge.BoundProvesNothing:
			pt.Statistic = decimal.Mean(p.table.Figures(row), p.judge.Limits().Places)
			pt.NotJudged, pt.Bound = true, p.bound(row)
		default:
			pt.Missing = true
		}
		pt.Lines = p.linesAt(role, at)
		for _, h := range v.Hits {
			if h.Role == role {
				spec := p.judge.Plan(role).Specs()[h.Rule]
				pt.Hits = append(pt.Hits, plot.Hit{Rule: spec.ID, Consequence: plot.Consequence(spec.Consequence), Side: plot.Side(h.Side)})
			}
		}
		trace.Points = append(trace.Points, pt)
	}
}

// Exclude marks rows that were left out of the estimate, beside those the table marks.
func (p *Picture) Exclude(rows map[int]string) {
	for _, trace := range p.traces {
		if trace == nil {
			continue
		}
		for row := range rows {
			trace.Points[row].Excluded = true
		}
	}
}

// label is what the table knows the row by.
func (p *Picture) label(row int) string {
	r := p.table.Row(row)
	for _, s := range []string{r.Time, r.ID, r.Group} {
		if s != "" {
			return s
		}
	}
	return strconv.Itoa(r.Line)
}

// bound gives the bound of a row, Measured where all its readings are measured.
func (p *Picture) bound(row int) decimal.Bound {
	if p.table.Bounded == 0 {
		return decimal.Measured
	}
	for _, r := range p.table.AppendReadings(nil, row) {
		if r.Bound != decimal.Measured {
			return r.Bound
		}
	}
	return decimal.Measured
}

func (p *Picture) linesAt(role chart.Role, at rules.Scale) *plot.Lines {
	key := scaled{role, at}
	if l, ok := p.lines[key]; ok {
		return l
	}
	t, where := p.judge.Limits().Traces[role], p.judge.Lines(role, at)
	line := func(x *float64, basis chart.Basis) *plot.Line {
		if x == nil {
			return nil
		}
		return &plot.Line{Value: *x, Basis: basis}
	}
	l := &plot.Lines{
		Centre:      line(where.Centre, chart.SigmaMultiple),
		LowerAction: line(where.LowerAction, t.LowerAction.Basis), UpperAction: line(where.UpperAction, t.UpperAction.Basis),
		LowerWarning: line(where.LowerWarning, t.LowerWarning.Basis), UpperWarning: line(where.UpperWarning, t.UpperWarning.Basis),
	}
	p.lines[key] = l
	return l
}

// Chart gives the picture under a title.
func (p *Picture) Chart(title, subtitle, unit string, notes ...string) plot.Chart {
	return plot.Chart{Title: title, Subtitle: subtitle, Unit: unit,
		Location: p.traces[chart.Location], Dispersion: p.traces[chart.Dispersion], Notes: notes}
}
