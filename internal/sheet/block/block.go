// Package block reads and writes the text that spreadsheet programs copy, paste and save: cells separated by tabs, commas or
// semicolons.
//
// # Dialects
//
// A block is UTF-8, with or without a byte order mark. Lines end in LF or CRLF. A cell may be quoted; a quote inside is
// doubled, and a quoted cell may hold separators and line ends. The decimal is a point or a comma, the same in the whole
// block. Separator and decimal are found from the block or said by the caller. Where a block can be read in two ways it
// is refused, and the error says both readings and what to say instead: delimiter=, decimal=, dates=.
//
// The separator is the one that occurs outside quotes in the first line; where several occur, the one under which all
// rows have as many cells. A column of numbers without a header and with commas ("1,5") could be one column or two and is
// refused unless decimal= or delimiter= settles it.
//
// Numbers stay the text that was written; only a decimal comma becomes a point. "1,234" alone may be 1.234 or 1234 and is
// refused; one value that can be read one way only ("0,98", "12,5") settles the block, and only a number does. A point
// before three digits ("1.234") is as doubtful, except where commas separate the cells, so that the decimal is a point.
// In a count, which has no decimal, either is refused unless decimal= is said. Thousands separators are never read.
//
// # Times
//
// See Clock: ISO 8601 with an offset, or without one where a zone is named; serial numbers where the date system is named;
// day and month by number where their order is named. Anything else is refused.
//
// # Formulas
//
// Text that a spreadsheet program could take for a formula is written with an apostrophe before it, see Guard; reading
// takes the apostrophe away again. Numbers, negative ones too, are not touched. What Write writes, Read reads back the same.
package block

import (
	"fmt"
	"strings"
)

// Limits of a block. A text that exceeds one names it.
const (
	// RowsMax bounds the rows under the header: as many as one post takes.
	RowsMax = 10_000
	// BytesMax bounds the whole text.
	BytesMax = 8 << 20
	// ColumnsMax bounds the cells of a row.
	ColumnsMax = 200
	// CellsMax bounds the cells of the block.
	CellsMax = 500_000
	// CellBytesMax bounds one cell; a spreadsheet's cell holds no more (32,767 characters, common practice).
	CellBytesMax = 32_768
)

// Delimiters. None is a block of one column, whose cells may hold any of the others.
const (
	Tab       byte = '\t'
	Comma     byte = ','
	Semicolon byte = ';'
	None      byte = '\n'
)

var delimiterNames = map[byte]string{Tab: "tab", Comma: "comma", Semicolon: "semicolon", None: "none"}

// Options say how to read a block. The zero value finds separator and decimal and takes the first line for a header.
type Options struct {
	// Delimiter is Tab, Comma, Semicolon, None, or 0 to find it. Decimal is '.', ',', or 0 to find it.
	Delimiter, Decimal byte
	// NoHeader says that the first line is data; columns are then named column_1, column_2 and so on.
	NoHeader bool
}

// Dialect is how a block is written.
type Dialect struct {
	Delimiter byte
	// Decimal is '.', ',', or 0 where nothing has settled it.
	Decimal byte
	CRLF    bool
	BOM     bool
}

// Row is one row. Cells are as written, without quotes and guards.
type Row struct {
	// Number counts rows from 1, header included: the row of a sheet into which the block is pasted at the top.
	Number int
	Cells  []string
}

// Blank reports a row with nothing in any cell.
func (r Row) Blank() bool {
	for _, c := range r.Cells {
		if strings.TrimSpace(c) != "" {
			return false
		}
	}
	return true
}

// Block is a block that was read.
type Block struct {
	Dialect Dialect
	// Names are the columns', from the header, without spaces around; HasHeader says whether there was one.
	Names     []string
	HasHeader bool
	// Rows all have as many cells as there are names.
	Rows []Row
}

// Error tells what is wrong with a block, where, and what to do about it.
type Error struct {
	// Row counts from 1 with the header; 0 where no single row is at fault. Column is its name, or empty.
	Row    int
	Column string
	// Problem and Advice are sentences without capital and stop. Advice may be empty.
	Problem, Advice string
}

// Error implements error.
func (e *Error) Error() string {
	var b strings.Builder
	if e.Row > 0 {
		fmt.Fprintf(&b, "row %d", e.Row)
	}
	if e.Column != "" {
		if b.Len() > 0 {
			b.WriteString(", ")
		}
		fmt.Fprintf(&b, "column %s", e.Column)
	}
	if b.Len() > 0 {
		b.WriteString(": ")
	}
	b.WriteString(e.Problem)
	if e.Advice != "" {
		b.WriteString("; " + e.Advice)
	}
	return b.String()
}

// clip shortens a text for an error and keeps it on one line.
func clip(s string) string {
	s = strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, s)
	if r := []rune(s); len(r) > 40 {
		return string(r[:40]) + "..."
	}
	return s
}

// Index finds a column by its name; letters' case and spaces around do not matter. It gives -1 where there is none.
func (b *Block) Index(name string) int {
	for i, n := range b.Names {
		if strings.EqualFold(n, strings.TrimSpace(name)) {
			return i
		}
	}
	return -1
}
