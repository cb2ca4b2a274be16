package book_test

import (
	"fmt"
	"testing"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
	"limitary/internal/sheet/grid"
)

// BenchmarkWorkbook writes and reads the largest block of ten columns, and the same rows as text for comparison.
func BenchmarkWorkbook(b *testing.B) {
	t := &grid.Table{Name: "Results", Columns: []string{"a", "b", "c", "d", "e", "f", "g", "h", "i", "j"}}
	for i := range block.RowsMax {
		row := make([]grid.Value, len(t.Columns))
		for c := range row {
			row[c] = grid.Value{Kind: grid.Number, Text: fmt.Sprintf("%d.%02d", i, c)}
		}
		row[0] = grid.Of(fmt.Sprint("n", i))
		t.Rows = append(t.Rows, row)
	}
	data, err := book.Write([]*grid.Table{t})
	if err != nil {
		b.Fatal(err)
	}
	text := t.Delimited(block.Dialect{Delimiter: block.Comma, Decimal: '.'})
	for name, f := range map[string]func() error{
		"write":      func() error { _, err := book.Write([]*grid.Table{t}); return err },
		"read":       func() error { _, err := book.Read(data, book.Options{HeaderRow: 1}); return err },
		"write text": func() error { _ = t.Delimited(block.Dialect{Delimiter: block.Comma, Decimal: '.'}); return nil },
		"read text":  func() error { _, err := block.Read(text, block.Options{}); return err },
	} {
		b.Run(name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if err := f(); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
