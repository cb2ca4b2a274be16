package main

import (
	"errors"
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
	"limitary/internal/report"
	"limitary/internal/report/judged"
)

// sizeFor gives the subgroup size, the one asked for or what the file shows, and refuses results that do not fit it.
func sizeFor(kind chart.Kind, asked *int, src *source) (int, error) {
	if src.inspected > 0 && !kind.Counts() || src.table.HasInspected() && !kind.Counts() {
		return 0, usageError{fmt.Errorf("--inspected: fits charts of kind %s", kindsThat(chart.Kind.Counts))}
	}
	size, err := shownSize(kind, asked, src)
	if err != nil {
		return 0, err
	}
	if asked != nil {
		size = *asked
		if err := kind.CheckSize(size); err != nil {
			return 0, usageError{fmt.Errorf("--size %d: %w", size, err)}
		}
	}
	var wrong *judged.SizeError
	switch err := src.rows(kind, size).Check(); {
	case errors.As(err, &wrong) && size == 1:
		return 0, fmt.Errorf("%s: line %d: the result has %d readings, and a chart of this kind takes one; "+
			"choose one column with --value, or one of the kinds %s", src.name, wrong.Line, wrong.Readings, kindsThat(takesSubgroups))
	case errors.As(err, &wrong):
		return 0, fmt.Errorf("%s: %w; is --size right?", src.name, err)
	case err != nil:
		return 0, fmt.Errorf("%s: %w", src.name, err)
	}
	if takesSubgroups(kind) && size < 2 {
		return 0, fmt.Errorf("%s: every result has one reading, and a chart of kind %s takes subgroups; "+
			"name several --value columns or a --subgroup column, or choose --kind individuals", src.name, kind)
	}
	return size, nil
}

// takesSubgroups reports whether results of a kind hold several readings.
func takesSubgroups(kind chart.Kind) bool {
	return kind != chart.Given && kind.CheckSize(2) == nil && !kind.Counts()
}

// shownSize gives the size that the file shows, for kinds that have one.
func shownSize(kind chart.Kind, asked *int, src *source) (int, error) {
	t := src.table
	switch {
	case kind == chart.Given || kind.SizeImplied():
		return 1, sampleSizesKnown(kind, src)
	case kind == chart.NP && asked == nil:
		return itemsEach(src)
	}
	most := 0
	for i := range t.Len() {
		most = max(most, len(t.Figures(i)))
	}
	return most, nil
}

// sampleSizesKnown refuses counts of which nothing says how much was inspected.
func sampleSizesKnown(kind chart.Kind, src *source) error {
	if (kind == chart.P || kind == chart.U) && src.inspected == 0 && !src.table.HasInspected() {
		return usageError{fmt.Errorf("--inspected: a chart of kind %s needs to know how much was inspected for each count; name the column, or give the number that holds for every row", kind)}
	}
	return nil
}

// itemsEach gives the one size of the samples of an np chart.
func itemsEach(src *source) (int, error) {
	size := src.inspected
	for i := 0; i < src.table.Len() && size == 0; i++ {
		size, _ = src.table.Inspected(i)
	}
	if size == 0 {
		return 0, usageError{errors.New("--size: a chart of kind np has samples of one size; give it, or name the column that says it with --inspected")}
	}
	if size != float64(int(size)) {
		return 0, fmt.Errorf("%s: %s items inspected: want a whole number", src.name, report.Shortest(size))
	}
	return int(size), nil
}

// basisOf is what a computation rests on.
type basisOf struct {
	groups []limits.Group
	// rowOf has the row of each group.
	rowOf []int
	times diagnostics.Times
}

// groupsOf makes the basis of a computation. A row without a result is no group, and no moving range reaches across it.
func groupsOf(src *source, kind chart.Kind, size int) (b basisOf, err error) {
	rows, gap := src.rows(kind, size), false
	for row := range src.table.Len() {
		g, err := groupOf(src, rows, row)
		if err != nil {
			return b, err
		}
		g.BreakBefore = g.BreakBefore || gap
		if gap = len(g.Readings) == 0 && g.Count == nil && !g.Excluded; gap {
			continue
		}
		b.groups, b.rowOf = append(b.groups, g), append(b.rowOf, row)
		at := src.table.Row(row)
		b.times.Days = append(b.times.Days, dayOf(at.Time))
		if kind == chart.RunMeans { // every result is a run
			b.times.Runs = append(b.times.Runs, fmt.Sprint(row))
		}
	}
	return b, nil
}

// groupOf makes one group.
func groupOf(src *source, rows *judged.Rows, row int) (limits.Group, error) {
	t := src.table
	reason, excluded := src.excluded[row]
	g := limits.Group{BreakBefore: t.Break(row), Excluded: excluded, ExclusionReason: reason, Material: t.Material(row)}
	if rows.Kind.Counts() {
		if c, ok := rows.Count(row); ok {
			g.Count = &c
		}
		return g, nil
	}
	for _, r := range t.AppendReadings(nil, row) {
		switch {
		case r.Bound == decimal.Measured:
			g.Readings, g.Decimals = append(g.Readings, r.Value), max(g.Decimals, r.Places)
		case !excluded:
			return g, fmt.Errorf("%s: line %d: %s is only a bound, which no estimate can take in; leave the result out with --exclude %d=REASON",
				src.name, t.Line(row), boundText(r), t.Line(row))
		}
	}
	return g, nil
}

// dayOf gives the calendar day of a time written as 2026-03-02, alone or with more behind it; empty where it is not.
func dayOf(text string) string {
	const form = "2026-03-02"
	if len(text) < len(form) {
		return ""
	}
	for i, c := range []byte(text[:len(form)]) {
		if digit := c >= '0' && c <= '9'; digit == (form[i] == '-') || !digit && c != '-' {
			return ""
		}
	}
	return text[:len(form)]
}

func boundText(r decimal.Reading) string {
	sign := map[decimal.Bound]string{decimal.Below: "<", decimal.Above: ">"}[r.Bound]
	return fmt.Sprintf("%q", sign+report.Fixed(r.Value, min(r.Places, decimal.PlacesMax)))
}

// used gives the readings that the limits rest on, in order.
func (b *basisOf) used() (readings []float64) {
	for _, g := range b.groups {
		if !g.Excluded {
			readings = append(readings, g.Readings...)
		}
	}
	return readings
}
