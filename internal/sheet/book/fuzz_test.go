package book_test

import (
	"archive/zip"
	"bytes"
	"io"
	"strings"
	"testing"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
	"limitary/internal/sheet/grid"
)

// parts takes a workbook apart.
func parts(tb testing.TB, data []byte) map[string][]byte {
	tb.Helper()
	z, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		tb.Fatal(err)
	}
	all := map[string][]byte{}
	for _, f := range z.File {
		r, err := f.Open()
		if err != nil {
			tb.Fatal(err)
		}
		if all[f.Name], err = io.ReadAll(r); err != nil {
			tb.Fatal(err)
		}
	}
	return all
}

const sheetPart = "xl/worksheets/sheet1.xml"

// assembled puts a workbook together with another sheet in it.
func assembled(tb testing.TB, all map[string][]byte, sheet []byte) []byte {
	tb.Helper()
	var buf bytes.Buffer
	z := zip.NewWriter(&buf)
	for name, data := range all {
		if name == sheetPart {
			data = sheet
		}
		w, err := z.Create(name)
		if err != nil {
			tb.Fatal(err)
		}
		if _, err := w.Write(data); err != nil {
			tb.Fatal(err)
		}
	}
	if err := z.Close(); err != nil {
		tb.Fatal(err)
	}
	return buf.Bytes()
}

func sheetOf(rows string) []byte {
	return []byte(`<?xml version="1.0" encoding="UTF-8"?><worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><sheetData>` + rows + `</sheetData></worksheet>`)
}

// FuzzSheet reads any bytes as the sheet of a workbook: an error or a block with rows as long as its header, never a panic.
func FuzzSheet(f *testing.F) {
	data, err := book.Write([]*grid.Table{{Name: "One", Columns: []string{"a"}, Rows: [][]grid.Value{{number("1.5")}, {grid.Of("=x")}}}})
	if err != nil {
		f.Fatal(err)
	}
	all := parts(f, data)
	f.Add(all[sheetPart])
	f.Add([]byte(""))
	for _, rows := range []string{
		`<row r="1"><c r="A1" t="inlineStr"><is><t>a</t></is></c></row><row r="3"><c r="A3" s="1"><v>46083.5</v></c></row>`,
		`<row r="1"><c r="XFD1"><v>1</v></c></row>`, `<row r="1048576"><c r="A1048576" t="s"><v>9</v></c></row>`, `<row r="2"/><row r="1"/>`,
		`<row r="1"><c t="str"><f>1+1</f><v>2</v></c><c t="e"><v>#N/A</v></c><c t="b"><v>1</v></c></row>`,
	} {
		f.Add(sheetOf(rows))
	}
	f.Fuzz(func(t *testing.T, sheet []byte) {
		b, err := book.Read(assembled(t, all, sheet), book.Options{HeaderRow: 1})
		if err != nil {
			return
		}
		for _, r := range b.Rows {
			if len(r.Cells) != len(b.Names) || len(b.Names) == 0 {
				t.Fatalf("row %d has %d cells under %d names", r.Number, len(r.Cells), len(b.Names))
			}
		}
	})
}

// TestASheetThatClaimsToBeLongIsRefused reads sheets whose few bytes stand for many rows and columns.
func TestASheetThatClaimsToBeLongIsRefused(t *testing.T) {
	data, err := book.Write([]*grid.Table{{Name: "One", Columns: []string{"a"}}})
	if err != nil {
		t.Fatal(err)
	}
	all := parts(t, data)
	header := `<row r="1"><c r="A1" t="inlineStr"><is><t>a</t></is></c></row>`
	for want, rows := range map[string]string{
		"more than 10000 rows":         header + `<row r="1048576"><c r="A1048576"><v>1</v></c></row>`,
		"more than 200 columns":        `<row r="1"><c r="XFD1" t="inlineStr"><is><t>a</t></is></c></row>`,
		"row 2: more than 200 columns": header + `<row r="2"><c r="GS2"><v>1</v></c></row>`,
		"no row 1":                     ``,
	} {
		if b, err := book.Read(assembled(t, all, sheetOf(rows)), book.Options{HeaderRow: 1}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, %v, want an error that says %q", b, err, want)
		}
	}
	beside := header + `<row r="2"><c r="A2"><v>1</v></c><c r="GR2"><v>2</v></c></row>`
	if b, err := book.Read(assembled(t, all, sheetOf(beside)), book.Options{HeaderRow: 1}); err != nil || len(b.Rows) != 1 || b.Rows[0].Cells[0] != "1" {
		t.Errorf("a cell beside the table: %v, %v", b, err)
	}
	if _, err := book.Read(data, book.Options{HeaderRow: block.RowsMax}); err == nil {
		t.Error("a header row that is not there was read")
	}
}
