package judged

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/resultfile"
)

// Rows reads the rows of a table as results of a chart. It belongs to one goroutine.
type Rows struct {
	Table *resultfile.Table
	// Kind and Size are those of the chart.
	Kind chart.Kind
	Size int
	// Inspected is how much was looked at for every count, where the table does not say; 0 takes 1 for c and the size for
	// np.
	Inspected float64

	readings []decimal.Reading
	bounds   []decimal.Bound
	count    chart.Count
}

// RowsOf gives the rows of a table as those of a judge's chart.
func RowsOf(j *judge.Judge, t *resultfile.Table) *Rows {
	l := j.Limits()
	return &Rows{Table: t, Kind: l.Kind, Size: l.SubgroupSize}
}

// SizeError tells that a row has more readings than the limits are for.
type SizeError struct{ Line, Readings, Size int }

func (e *SizeError) Error() string {
	return fmt.Sprintf("line %d: the result has %d readings, and the subgroup size is %d", e.Line, e.Readings, e.Size)
}

// Check refuses a row that the chart cannot have: more readings than the size, with a *SizeError, or no possible count.
func (r *Rows) Check() error {
	if r.Kind.Counts() {
		return r.checkCounts()
	}
	if _, single := r.Table.Series(); single {
		return nil
	}
	for i := range r.Table.Len() {
		if n := len(r.Table.Figures(i)); n > r.Size {
			return &SizeError{r.Table.Line(i), n, r.Size}
		}
	}
	return nil
}

func (r *Rows) checkCounts() error {
	for i := range r.Table.Len() {
		line := r.Table.Line(i)
		if n := len(r.Table.Figures(i)); n > 1 {
			return fmt.Errorf("line %d: the result has %d values, and a chart of kind %s takes one count", line, n, r.Kind)
		}
		c, ok := r.Count(i)
		if !ok {
			continue
		}
		if r.bounded(i) {
			return fmt.Errorf("line %d: the count is only a bound, and a count is known", line)
		}
		if c.Inspected == 0 {
			return fmt.Errorf("line %d: nothing says how much was inspected", line)
		}
		if err := r.Kind.CheckCount(c, r.Size); err != nil {
			return fmt.Errorf("line %d: %w", line, err)
		}
	}
	return nil
}

func (r *Rows) bounded(i int) bool {
	if r.Table.Bounded == 0 {
		return false
	}
	r.readings = r.Table.AppendReadings(r.readings[:0], i)
	return r.readings[0].Bound != decimal.Measured
}

// Count gives the count of row i; ok is false where there is none.
func (r *Rows) Count(i int) (c chart.Count, ok bool) {
	figures := r.Table.Figures(i)
	if len(figures) == 0 {
		return c, false
	}
	c = chart.Count{Nonconforming: figures[0], Inspected: r.Inspected}
	if own, ok := r.Table.Inspected(i); ok {
		c.Inspected = own
	}
	switch {
	case c.Inspected > 0:
	case r.Kind == chart.C:
		c.Inspected = 1
	case r.Kind == chart.NP:
		c.Inspected = float64(r.Size)
	}
	return c, true
}

// Point gives row i to the judge. What it points to holds until the next call.
func (r *Rows) Point(i int) judge.Point {
	pt := judge.Point{Break: r.Table.Break(i), Material: r.Table.Material(i)}
	if r.Kind.Counts() {
		var ok bool
		if r.count, ok = r.Count(i); ok {
			pt.Count = &r.count
		}
		return pt
	}
	pt.Readings = r.Table.Figures(i)
	if r.Table.Bounded == 0 {
		return pt
	}
	r.readings = r.Table.AppendReadings(r.readings[:0], i)
	r.bounds = r.bounds[:0]
	for _, each := range r.readings {
		r.bounds = append(r.bounds, each.Bound)
	}
	pt.Bounds = r.bounds
	return pt
}
