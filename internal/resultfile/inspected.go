package resultfile

import (
	"bytes"
	"math"

	"limitary/internal/decimal"
)

// inspected takes in how much was looked at for the count of the row, if it has one.
func (b *builder) inspected(counted bool) error {
	i := b.cols.inspected
	field := bytes.TrimSpace(b.scan.fields[i])
	bad := &Error{Line: b.scan.recordLine, Column: b.cols.label(i), Value: clip(field)}
	if len(field) == 0 {
		if counted {
			bad.Problem, bad.Advice = "is empty, so it is not known how much was inspected for the count", "fill it in, or leave out the count as well"
			return bad
		}
		b.table.inspected = append(b.table.inspected, math.NaN())
		return nil
	}
	r, p, err := slow(field)
	switch {
	case err != nil:
		return b.notReading(i, field, err)
	case r.Bound != decimal.Measured:
		bad.Problem, bad.Advice = "is only a bound, and what was inspected is known", "write how much was inspected"
		return bad
	case !(r.Value > 0):
		bad.Problem, bad.Advice = "is not more than zero, so nothing was inspected", "leave both fields empty where there is no result"
		return bad
	}
	if p.mark != 0 {
		if bad := b.decimal.note(p, b.scan.recordLine, b.cols.label(i), field); bad != nil {
			return bad
		}
	}
	if !counted {
		r.Value = math.NaN() // a sample whose count is missing is no result
	}
	b.table.inspected = append(b.table.inspected, r.Value)
	return nil
}

// HasInspected says whether the file has a column of what was inspected.
func (t *Table) HasInspected() bool { return t.inspected != nil }
