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
	rows   *Rows
	table  *resultfile.Table
	traces [chart.Roles]*plot.Trace
	lines  map[scaled]*plot.Lines
}

type scaled struct {
	role chart.Role
	at   rules.Scale
}

// NewPicture begins the picture of rows.
func NewPicture(j *judge.Judge, rows *Rows) *Picture {
	t := rows.Table
	p := &Picture{judge: j, rows: rows, table: t, lines: map[scaled]*plot.Lines{}}
	l := j.Limits()
	places := l.Places
	if places == decimal.Unrounded {
		places = unroundedPlaces(l, t)
	}
	for role := range p.traces {
		if j.Plan(chart.Role(role)) != nil {
			p.traces[role] = &plot.Trace{Name: StatisticOf(l.Kind, &l.Model, chart.Role(role)), Decimals: places, Points: make([]plot.Point, 0, t.Len())}
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
				p.keepInSight(&pt, at)
			}
		case role == chart.Location && v.Standing == judge.NotJudged && v.Reason == judge.BoundProvesNothing:
			pt.Statistic, pt.Missing = p.unproven(row)
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

// belowAllSigmas is where a reading is drawn of which only is known that it lies below the scale.
const belowAllSigmas = 4.5

// keepInSight moves a point that lies outside the domain of the logarithm to below the lines, as a bound.
func (p *Picture) keepInSight(pt *plot.Point, at rules.Scale) {
	if t := p.judge.Limits().Model.Transform; t.Kind == chart.Log && pt.Statistic <= t.Floor() {
		pt.Statistic, pt.Bound = at.Centre-belowAllSigmas*at.Sigma, decimal.Below
	}
}

// unproven gives the place of a bound that proves nothing, on the judged scale; missing where it has none there.
func (p *Picture) unproven(row int) (at float64, missing bool) {
	l := p.judge.Limits()
	at = decimal.Mean(p.table.Figures(row), l.Places)
	y, ok := l.Model.OnScale(at, p.table.Material(row))
	return y, !ok
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

// Chart gives the picture under a title; unit is that of the results.
func (p *Picture) Chart(title, subtitle, unit string, notes ...string) plot.Chart {
	l := p.judge.Limits()
	return plot.Chart{Title: title, Subtitle: subtitle, Unit: PlottedUnit(l.Kind, &l.Model, unit),
		Location: p.traces[chart.Location], Dispersion: p.traces[chart.Dispersion], Notes: notes}
}
