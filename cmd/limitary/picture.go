package main

import (
	"fmt"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/plot"
	"limitary/internal/report"
	"limitary/internal/report/judged"
)

// judgeOf makes the judge of limits just computed.
func judgeOf(res limits.Result, chosen choice) (*judge.Judge, error) {
	l := judge.Limits{Kind: res.Kind, SubgroupSize: res.SubgroupSize, Places: res.PublishedDecimals, ProcessSigma: res.ProcessSigma, Model: res.Model}
	for role, trace := range [...]chart.Trace{res.Location, res.Dispersion} {
		if res.Kind.Has(chart.Role(role)) {
			l.Traces[role] = &judge.Trace{Trace: trace, Rules: chosen.specs[role]}
		}
	}
	j, err := judge.New(l)
	if err != nil {
		return nil, judgeFault(err)
	}
	return j, nil
}

// pictureOf begins a picture where one is asked for; each takes the verdicts into it.
func pictureOf(path string, j *judge.Judge, rows *judged.Rows) (p *judged.Picture, each func(int, *judge.Verdict)) {
	if path == "" {
		return nil, nil
	}
	p = judged.NewPicture(j, rows)
	return p, p.Take
}

// drawPicture writes the picture.
func drawPicture(path string, p *judged.Picture, about report.About, src *source, notes ...string) error {
	p.Exclude(src.excluded)
	title, subtitle := about.Title, src.name+", "
	if title == "" {
		title, subtitle = src.name, ""
	}
	if src.table.Len() > plot.PointsMax {
		return fmt.Errorf("--plot: %d results, the limit of a picture is %d", src.table.Len(), plot.PointsMax)
	}
	sets := make([]string, len(about.Sets))
	for i, s := range about.Sets {
		sets[i] = s.ID
	}
	subtitle += fmt.Sprintf("%s; rules %s", report.Count(src.table.Len(), "result"), strings.Join(sets, ", "))
	if r := src.table.Row(0); r.Time == "" && r.ID == "" && r.Group == "" {
		notes = append(notes, "Numbers below the axis are lines of the file.")
	}
	return writePlot(path, p.Chart(report.Foreign(title), report.ForeignLong(subtitle), report.Foreign(about.Unit), append(notes, report.Safety)...))
}

// aboutOf is what both reports say first.
func aboutOf(env *environment, src *source, chosen choice, title, unit string) report.About {
	return report.About{Title: title, Unit: unit, File: src.name, Table: src.table, At: env.Now(), Program: programNumber(),
		Sets: chosen.sets, Notes: chosen.cautions}
}

// tellNotes tells on standard error what a JSON answer has no place for.
func tellNotes(env *environment, about report.About) {
	for _, n := range about.AllNotes() {
		fmt.Fprintf(env.Stderr, "limitary: note: %s\n", n)
	}
}
