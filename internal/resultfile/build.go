package resultfile

import (
	"bytes"
	"fmt"
	"time"
)

// builder turns records into the rows of a table.
type builder struct {
	scan     *scanner
	cols     *columns
	decimal  evidence
	progress func(rows, bytes int64)
	table    *Table
	kept     []keptText

	records int // rows of the file so far
	pending int // blank lines of a one-column file not yet known to be rows
	instant time.Time

	// The long form's subgroup under way.
	groupLine  int
	groupSize  int
	groupsSeen map[string]int // name to the line where it began
}

func (b *builder) run() (*Table, error) {
	b.kept = b.keptTexts()
	for {
		ok, err := b.scan.next()
		if err != nil {
			return nil, err
		}
		if !ok {
			break
		}
		if err := b.record(); err != nil {
			return nil, err
		}
	}
	if b.groupLine > 0 {
		b.table.endRow(b.groupLine)
	}
	if b.table.rows == 0 {
		return nil, &Error{Problem: "the file has a header and no results", Advice: "give at least one row below the header"}
	}
	if err := b.decimal.settle(); err != nil {
		return nil, err
	}
	b.table.Decimal = b.decimal.decimal
	b.table.Bytes, b.table.Lines, b.table.Skipped = b.scan.taken, b.scan.line-1, b.table.Skipped+b.pending
	b.report()
	return b.table, nil
}

func (b *builder) report() {
	if b.progress != nil {
		b.progress(int64(b.records), b.scan.taken)
	}
}

// record takes in the record just cut.
func (b *builder) record() error {
	if len(b.scan.fields) == 1 && b.scan.blank() {
		if len(b.cols.names) > 1 {
			b.table.Skipped++
		} else {
			b.pending++
		}
		return nil
	}
	for ; b.pending > 0; b.pending-- {
		if err := b.count(b.scan.recordLine - b.pending); err != nil {
			return err
		}
		b.table.EmptyFields++ // a file of one column has no column of what was inspected
		b.table.endRow(b.scan.recordLine - b.pending)
	}
	if len(b.scan.fields) != len(b.cols.names) {
		return b.ragged()
	}
	if err := b.count(b.scan.recordLine); err != nil {
		return err
	}
	if b.cols.subgroup >= 0 {
		return b.longRow()
	}
	if err := b.texts(); err != nil {
		return err
	}
	before := len(b.table.values)
	for _, i := range b.cols.values {
		if err := b.reading(i); err != nil {
			return err
		}
	}
	if b.cols.inspected >= 0 {
		if err := b.inspected(len(b.table.values) > before); err != nil {
			return err
		}
	}
	b.table.endRow(b.scan.recordLine)
	return nil
}

// count holds the rows against their limit.
func (b *builder) count(line int) error {
	if b.records == b.scan.bounds.rows {
		return &Error{Line: line, Problem: fmt.Sprintf("the file has more than %d rows, the limit", b.scan.bounds.rows), Advice: "split the file"}
	}
	b.records++
	if b.records%progressRows == 0 {
		b.report()
	}
	return nil
}

func (b *builder) ragged() error {
	bad := &Error{Line: b.scan.recordLine, Problem: fmt.Sprintf("has %d fields, the header has %d", len(b.scan.fields), len(b.cols.names))}
	switch {
	case b.table.Delimiter == ',' && len(b.scan.fields) > len(b.cols.names):
		bad.Advice = "where the comma is the decimal, separate the columns with semicolons or put quotes around the values"
	case b.table.Delimiter != 0:
		bad.Advice = fmt.Sprintf("the columns are taken to be separated by %ss; give every row as many fields as the header", delimiterNames[b.table.Delimiter])
	}
	return bad
}

// reading takes in the value field at i.
func (b *builder) reading(i int) error {
	field := b.scan.fields[i]
	r, p, ok := quick(field)
	if !ok {
		field = bytes.TrimSpace(field)
		if len(field) == 0 {
			b.table.EmptyFields++
			return nil
		}
		var err error
		if r, p, err = slow(field); err != nil {
			return b.notReading(i, field, err)
		}
	}
	if p.mark != 0 && (p.mark != b.decimal.decimal || !b.decimal.sure) {
		if bad := b.decimal.note(p, b.scan.recordLine, b.cols.label(i), field); bad != nil {
			return bad
		}
	}
	if len(b.table.values) == b.scan.bounds.readings {
		return &Error{Line: b.scan.recordLine, Column: b.cols.label(i), Problem: fmt.Sprintf("the file has more than %d readings, the limit", b.scan.bounds.readings), Advice: "split the file"}
	}
	b.table.addReading(r)
	return nil
}

func (b *builder) notReading(i int, field []byte, cause error) error {
	bad := &Error{Line: b.scan.recordLine, Column: b.cols.label(i), Value: clip(field), Problem: cause.Error()}
	switch {
	case bad.Problem == "has a thousands separator":
		bad.Advice = "write the number without it"
	case !bytes.ContainsAny(field, "0123456789"):
		bad.Problem, bad.Advice = "is not a number", "leave the field empty where there is no result"
	case bad.Problem == "is not a number":
		bad.Advice = "write digits with one decimal, and < or > before a bound"
	}
	return bad
}
