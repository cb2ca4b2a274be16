package report

import (
	"bufio"
	"fmt"
	"io"
	"strings"
	"unicode"
	"unicode/utf8"
)

// lineRunesMax is the width that paragraphs are wrapped to: a portrait page in a small fixed-width font. Tables may be
// wider, because a wrapped table cannot be read.
const lineRunesMax = 100

// Text writes a report. The first error of the writer is kept and given by Flush; nothing is written after it.
type Text struct{ w *bufio.Writer }

// NewText begins a report.
func NewText(w io.Writer) *Text { return &Text{bufio.NewWriterSize(w, 1<<16)} }

// Flush writes what is still held back and gives the first error.
func (t *Text) Flush() error { return t.w.Flush() }

func (t *Text) line(s string) {
	t.w.WriteString(strings.TrimRight(s, " "))
	t.w.WriteByte('\n')
}

// Title writes the first line of a report.
func (t *Text) Title(s string) { t.line(s) }

// Section begins a section.
func (t *Text) Section(name string) {
	t.line("")
	t.line(name)
	t.line(strings.Repeat("-", utf8.RuneCountInString(name)))
}

// Pair is a label and what is said of it.
type Pair struct{ Label, Value string }

// Pairs writes pairs with their values aligned and wrapped. Pairs with no value are left out.
func (t *Text) Pairs(pairs ...Pair) {
	width := 0
	for _, p := range pairs {
		if p.Value != "" {
			width = max(width, utf8.RuneCountInString(p.Label))
		}
	}
	for _, p := range pairs {
		if p.Value != "" {
			t.hanging(pad(p.Label, width)+"  ", strings.Repeat(" ", width+2), p.Value)
		}
	}
}

// Paragraph writes wrapped text.
func (t *Text) Paragraph(s string) { t.hanging("", "", s) }

// Item writes wrapped text under a mark.
func (t *Text) Item(s string) { t.hanging("- ", "  ", s) }

// hanging writes wrapped text, the first line behind first and the others behind rest.
func (t *Text) hanging(first, rest, s string) {
	room := lineRunesMax - utf8.RuneCountInString(rest)
	prefix, line := first, ""
	for _, word := range strings.Fields(s) {
		if line != "" && utf8.RuneCountInString(line)+1+utf8.RuneCountInString(word) > room {
			t.line(prefix + line)
			prefix, line = rest, ""
		}
		if line != "" {
			line += " "
		}
		line += word
	}
	t.line(prefix + line)
}

// Table is a table under way.
type Table struct {
	columns []column
	rows    [][]string
}

type column struct {
	name  string
	right bool
}

// NewTable begins a table; a name that begins with ">" aligns its column to the right, as figures are.
func NewTable(names ...string) *Table {
	t := &Table{}
	for _, n := range names {
		name, right := strings.CutPrefix(n, ">")
		t.columns = append(t.columns, column{name, right})
	}
	return t
}

// Row adds a row with one cell a column.
func (t *Table) Row(cells ...string) {
	if len(cells) != len(t.columns) {
		panic(fmt.Sprintf("report: a row of %d cells in a table of %d columns", len(cells), len(t.columns)))
	}
	t.rows = append(t.rows, cells)
}

// Table writes the rows under their column names. A column in which no row says anything is left out.
func (t *Text) Table(table *Table) {
	widths := make([]int, len(table.columns))
	names := make([]string, len(table.columns))
	for i, c := range table.columns {
		names[i] = c.name
	}
	for _, row := range table.rows {
		for i, cell := range row {
			if cell != "" {
				widths[i] = max(widths[i], utf8.RuneCountInString(cell), utf8.RuneCountInString(names[i]))
			}
		}
	}
	t.row(table.columns, widths, names)
	for _, row := range table.rows {
		t.row(table.columns, widths, row)
	}
}

// row writes the cells of a row, each as wide as its column. A report may have a hundred thousand of them.
func (t *Text) row(columns []column, widths []int, cells []string) {
	pending, first := 0, true // spaces that are only written if a text follows
	for i, cell := range cells {
		if widths[i] == 0 {
			continue
		}
		if !first {
			pending += 2
		}
		first = false
		gap := widths[i] - utf8.RuneCountInString(cell)
		if columns[i].right {
			pending, gap = pending+gap, 0
		}
		if cell != "" {
			for ; pending > 0; pending-- {
				t.w.WriteByte(' ')
			}
			t.w.WriteString(cell)
		}
		pending += gap
	}
	t.w.WriteByte('\n')
}

// foreignRunesMax bounds a text from a file in a cell.
const foreignRunesMax = 40

// Foreign makes a text from a file fit for a cell: control characters, which could steer a terminal, are replaced, and
// what is too long is cut.
func Foreign(s string) string { return foreign(s, foreignRunesMax) }

// ForeignLong is Foreign for texts that stand in a paragraph.
func ForeignLong(s string) string { return foreign(s, 500) }

func foreign(s string, runesMax int) string {
	if s == "" {
		return ""
	}
	var b strings.Builder
	n := 0
	for _, r := range s {
		if n == runesMax {
			b.WriteString("...")
			break
		}
		switch {
		case r == '\n' || r == '\t':
			r = ' '
		case !unicode.IsPrint(r):
			r = unicode.ReplacementChar
		}
		b.WriteRune(r)
		n++
	}
	return b.String()
}

func pad(s string, width int) string {
	return s + strings.Repeat(" ", max(0, width-utf8.RuneCountInString(s)))
}
