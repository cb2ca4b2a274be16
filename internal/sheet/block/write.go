package block

import (
	"bytes"
	"slices"
	"strings"
)

// Writer writes rows in a dialect.
type Writer struct {
	dialect Dialect
	buf     bytes.Buffer
}

// NewWriter begins a text, with a byte order mark where the dialect has one.
func NewWriter(d Dialect) *Writer {
	w := &Writer{dialect: d}
	if d.BOM {
		w.buf.WriteString(byteOrderMark)
	}
	return w
}

// Row writes a row. Cells are written as they are given: see Guard. A cell is quoted where it must be.
func (w *Writer) Row(cells ...string) {
	special := "\"\r\n" + string([]byte{w.dialect.Delimiter})
	for i, c := range cells {
		if i > 0 {
			w.buf.WriteByte(w.dialect.Delimiter)
		}
		if strings.ContainsAny(c, special) || len(cells) == 1 && strings.TrimSpace(c) == "" || i == 0 && strings.HasPrefix(c, byteOrderMark) {
			c = `"` + strings.ReplaceAll(c, `"`, `""`) + `"`
		}
		w.buf.WriteString(c)
	}
	if w.dialect.CRLF {
		w.buf.WriteByte('\r')
	}
	w.buf.WriteByte('\n')
}

// Bytes gives what was written.
func (w *Writer) Bytes() []byte { return w.buf.Bytes() }

// Extend writes the block back in its own dialect with more columns to the right. The cells of the block come back as
// they were, guarded; more[i] are those of row i. A block of one column gets tabs between its columns.
func (b *Block) Extend(names []string, more [][]string) []byte {
	d := b.Dialect
	if d.Delimiter == None {
		d.Delimiter = Tab
	}
	w := NewWriter(d)
	line := make([]string, 0, len(b.Names)+len(names))
	add := func(cells []string, guard func(string) string) {
		for _, c := range cells {
			line = append(line, guard(c))
		}
	}
	if b.HasHeader {
		add(b.Names, Guard)
		add(names, Guard)
		w.Row(line...)
	}
	for i, r := range b.Rows {
		line = line[:0]
		add(r.Cells, GuardUnlessNumber)
		add(more[i], GuardUnlessNumber)
		w.Row(line...)
	}
	return w.Bytes()
}

// Drop takes columns out of the block whose names begin with a prefix: a block that comes back with verdicts may be sent
// again. The first column stays.
func (b *Block) Drop(prefix string) {
	for at := len(b.Names) - 1; at > 0; at-- {
		if !strings.HasPrefix(b.Names[at], prefix) {
			continue
		}
		b.Names = slices.Delete(slices.Clone(b.Names), at, at+1)
		for i := range b.Rows {
			b.Rows[i].Cells = slices.Delete(slices.Clone(b.Rows[i].Cells), at, at+1)
		}
	}
}
