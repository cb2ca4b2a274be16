// Package grid holds tables of typed cells on their way out, and writes them as delimited text. Package book writes the
// same tables as a workbook.
//
// Numbers are decimal text, so that "0.30" keeps its digits in delimited text; they are written with the decimal asked
// for and never guarded, negative ones too. Texts are guarded against being taken for formulas, see block.Guard. Times
// are UTC; delimited text has them as RFC 3339. A blank is nothing at all, not an empty text.
package grid

import (
	"strconv"
	"strings"
	"time"

	"limitary/internal/sheet/block"
)

// Kind is what a cell holds.
type Kind uint8

// The kinds of cells.
const (
	Blank Kind = iota
	Text
	Number
	Time
)

// Value is one cell. Text holds the text of a Text, and the decimal text with a point of a Number.
type Value struct {
	Kind Kind
	Text string
	Time time.Time
}

// Table has a name, for the tab of a workbook, and rows as long as its columns.
type Table struct {
	Name    string
	Columns []string
	Rows    [][]Value
}

// Of makes a text; an empty one is blank.
func Of(s string) Value {
	if s == "" {
		return Value{}
	}
	return Value{Kind: Text, Text: s}
}

// Float makes a number in its shortest form.
func Float(x float64) Value { return Value{Kind: Number, Text: Shortest(x)} }

// Optional makes a number, or a blank where there is none.
func Optional(x *float64) Value {
	if x == nil {
		return Value{}
	}
	return Float(*x)
}

// Int makes a whole number.
func Int[T ~int | ~int32 | ~int64](n T) Value {
	return Value{Kind: Number, Text: strconv.FormatInt(int64(n), 10)}
}

// Yes makes "yes" or "no".
func Yes(b bool) Value {
	if b {
		return Of("yes")
	}
	return Of("no")
}

// Moment makes a time; the zero time is blank.
func Moment(t time.Time) Value {
	if t.IsZero() {
		return Value{}
	}
	return Value{Kind: Time, Time: t.UTC()}
}

// plainBytesMax is the longest number written without a power of ten.
const plainBytesMax = 24

// Shortest gives the shortest decimal text that reads back as x, with a power of ten only where it would be very long.
func Shortest(x float64) string {
	if s := strconv.FormatFloat(x, 'f', -1, 64); len(s) <= plainBytesMax {
		return s
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// WithDecimal puts a decimal comma into a decimal text where asked for.
func WithDecimal(number string, decimal byte) string {
	if decimal == ',' {
		return strings.Replace(number, ".", ",", 1)
	}
	return number
}

// Delimited writes a table as text with a header.
func (t *Table) Delimited(d block.Dialect) []byte {
	w := block.NewWriter(d)
	line := make([]string, len(t.Columns))
	for i, name := range t.Columns {
		line[i] = block.Guard(name)
	}
	w.Row(line...)
	for _, row := range t.Rows {
		for i, v := range row {
			line[i] = v.delimited(d.Decimal)
		}
		w.Row(line...)
	}
	return w.Bytes()
}

func (v Value) delimited(decimal byte) string {
	switch v.Kind {
	case Number:
		return WithDecimal(v.Text, decimal)
	case Time:
		return v.Time.Format("2006-01-02T15:04:05.999999Z07:00")
	case Text:
		return block.Guard(v.Text)
	}
	return ""
}
