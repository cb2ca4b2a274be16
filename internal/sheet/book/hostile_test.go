package book_test

import (
	"archive/zip"
	"bytes"
	"fmt"
	"runtime"
	"strings"
	"testing"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
	"limitary/internal/sheet/grid"
)

// base takes apart a small workbook of which tests change the sheet.
func base(tb testing.TB) map[string][]byte {
	tb.Helper()
	data, err := book.Write([]*grid.Table{{Name: "One", Columns: []string{"a"}}})
	if err != nil {
		tb.Fatal(err)
	}
	return parts(tb, data)
}

// with gives the parts with one more.
func with(all map[string][]byte, name string, data []byte) map[string][]byte {
	out := map[string][]byte{name: data}
	for n, d := range all {
		if n != name {
			out[n] = d
		}
	}
	return out
}

func in(ref, text string) string {
	return fmt.Sprintf(`<c r="%s" t="inlineStr"><is><t>%s</t></is></c>`, ref, text)
}

var threeNames = `<row r="1">` + in("A1", "id") + in("B1", "time") + in("C1", "value") + `</row>`

// expectRefusal reads a workbook that has to be refused.
func expectRefusal(t *testing.T, data []byte, o book.Options, want string) {
	t.Helper()
	if o.HeaderRow == 0 {
		o.HeaderRow = 1
	}
	if b, err := book.Read(data, o); err == nil || !strings.Contains(err.Error(), want) {
		t.Errorf("got %v, %v, want an error that says %q", b, err, want)
	}
}

// allocated tells how many bytes f allocates in all, which bounds what it holds at any time.
func allocated(f func()) uint64 {
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	f()
	runtime.ReadMemStats(&after)
	return after.TotalAlloc - before.TotalAlloc
}

// TestWideRowsTakeLittleMemory reads rows whose one far cell stands for 16,384 columns,
// and rows that are each within the limit of columns but not together.
func TestWideRowsTakeLittleMemory(t *testing.T) {
	all := base(t)
	var far, many strings.Builder
	for i := 2; i <= 101; i++ {
		fmt.Fprintf(&far, `<row r="%d"><c r="C%d"><v>5</v></c><c r="XFD%d" s="0"/></row>`, i, i, i)
	}
	for i := 2; i <= 3000; i++ {
		fmt.Fprintf(&many, `<row r="%d"><c r="GR%d"/></row>`, i, i)
	}
	for want, rows := range map[string]string{
		"row 2: more than 200 columns": far.String(),
		// The header has 3 cells, and 2,499 rows of 200 are 499,800; the row after them goes over 500,000.
		"row 2501: more than 500000 cells": many.String(),
	} {
		data := assembled(t, all, sheetOf(threeNames+rows))
		if got := allocated(func() { expectRefusal(t, data, book.Options{}, want) }); got > 32<<20 {
			t.Errorf("%s: %d bytes were allocated, want at most 32 MiB", want, got)
		}
	}
}

// TestPartsThatAreTooLarge reads small files that unpack to much.
func TestPartsThatAreTooLarge(t *testing.T) {
	all := base(t)
	good := sheetOf(threeNames)
	many := map[string][]byte{}
	for n, d := range all {
		many[n] = d
	}
	for i := range 2001 {
		many[fmt.Sprintf("xl/media/%d.png", i)] = nil
	}
	texts := []byte(`<sst xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main">` + strings.Repeat("<si><t>a</t></si>", 200_001) + `</sst>`)
	for want, data := range map[string][]byte{
		"the limit is 2000":        assembled(t, many, good),
		"share more than 200000":   assembled(t, with(all, "xl/sharedStrings.xml", texts), good),
		"xl/styles.xml":            assembled(t, with(all, "xl/styles.xml", bytes.Repeat([]byte(" "), 4<<20+1)), good),
		"more than 67108864 bytes": assembled(t, with(all, "xl/media/x.png", make([]byte, 64<<20)), good),
		"200000 outside its rows":  assembled(t, all, append(bytes.Repeat([]byte("<mergeCell/>"), 200_001), good...)),
	} {
		expectRefusal(t, data, book.Options{}, want)
	}
	expectRefusal(t, assembled(t, all, good), book.Options{HeaderRow: 100_001}, "header_row=100001: the limit is 100000")
}

// TestDamagedPartsAreRefused reads a part that is longer than it says, and a sheet of which one digit has changed on the way.
func TestDamagedPartsAreRefused(t *testing.T) {
	var buf bytes.Buffer
	z := zip.NewWriter(&buf)
	for name, data := range base(t) {
		if name == sheetPart {
			data = sheetOf(threeNames + `<row r="2"><c r="C2"><v>12345</v></c></row>`)
		}
		w, err := z.CreateHeader(&zip.FileHeader{Name: name, Method: zip.Store})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := w.Write(data); err != nil {
			t.Fatal(err)
		}
	}
	if err := z.Flush(); err != nil {
		t.Fatal(err)
	}
	w, err := z.CreateRaw(&zip.FileHeader{Name: "xl/media/a.bin", Method: zip.Store, UncompressedSize64: 3, CompressedSize64: 1 << 10})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := w.Write(make([]byte, 1<<10)); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	expectRefusal(t, buf.Bytes(), book.Options{}, `"xl/media/a.bin" is damaged`)
	expectRefusal(t, bytes.Replace(buf.Bytes(), []byte("<v>12345</v>"), []byte("<v>12945</v>"), 1), book.Options{}, `"xl/worksheets/sheet1.xml" is damaged`)
}

// TestSheetsThatContradictThemselves reads rows and cells that are not where they say, in which programs differ.
func TestSheetsThatContradictThemselves(t *testing.T) {
	all := base(t)
	shared := with(all, "xl/sharedStrings.xml", []byte(`<sst xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><si><t>5</t></si></sst>`))
	for want, rows := range map[string]string{
		"row 3: row 2 comes after it":                   `<row r="3"><c r="A3"><v>3</v></c></row><row r="2"><c r="A2"><v>2</v></c></row>`,
		"row 2: row 2 comes after it":                   `<row r="2"><c r="A2"><v>3</v></c></row><row r="2"><c r="A2" t="b"><v>1</v></c></row>`,
		`the number "x"`:                                `<row r="x"/>`,
		`the number "-1"`:                               `<row r="-1"/>`,
		"row 5: cell A2 stands in it":                   `<row r="5"><c r="A2"><v>3</v></c></row>`,
		"cell A2 is repeated or out of order":           `<row r="2"><c r="C2"><v>3</v></c><c r="A2"><v>3</v></c></row>`,
		"cell C2 is repeated":                           `<row r="2"><c r="C2"><v>3</v></c><c r="C2"><v>4</v></c></row>`,
		"after column 3 does not say where":             `<row r="2"><c r="C2"><v>3</v></c><c><v>4</v></c></row>`,
		`"2C" is no cell`:                               `<row r="2"><c r="2C"><v>3</v></c></row>`,
		"place, kind or style twice":                    `<row r="2"><c r="A2" r="XFD2"><v>3</v></c></row>`,
		`unknown kind "z"`:                              `<row r="2"><c r="A2" t="z"><v>3</v></c></row>`,
		`the style "x"`:                                 `<row r="2"><c r="A2" s="x"><v>3</v></c></row>`,
		"outside the rows":                              `<c r="A2"><v>3</v></c>`,
		"XML is broken":                                 `<row r="2"><c r="A2"`,
		`cell C2: there is no text "7" among the work`:  `<row r="2"><c r="C2" t="s"><v>7</v></c></row>`,
		`cell C2: there is no text "-1" among the work`: `<row r="2"><c r="C2" t="s"><v>-1</v></c></row>`,
		`cell C3: there is no text "x" among the workb`: `<row r="2"><c r="C2" t="s"><v>0</v></c></row><row r="3"><c r="C3" t="s"><v>x</v></c></row>`,
	} {
		expectRefusal(t, assembled(t, shared, sheetOf(threeNames+rows)), book.Options{}, want)
	}
	rows := `<row r="2"><c r="C2" t="s"><v>0</v></c></row><row><c t="inlineStr"><is><t>x</t></is></c><c/><c><v>7</v></c></row>`
	b, err := book.Read(assembled(t, shared, sheetOf(threeNames+rows)), book.Options{HeaderRow: 1})
	if err != nil || len(b.Rows) != 2 || b.Rows[0].Cells[2] != "5" || b.Rows[1].Number != 3 || b.Rows[1].Cells[0] != "x" || b.Rows[1].Cells[2] != "7" {
		t.Errorf("cells without references: %v, %v", b, err)
	}
}

// TestOnlyTheSheetThatIsReadIsBound reads the small sheet of a workbook with a long one.
func TestOnlyTheSheetThatIsReadIsBound(t *testing.T) {
	data, err := book.Write([]*grid.Table{{Name: "Long", Columns: []string{"a"}}, {Name: "Short", Columns: []string{"b"}, Rows: [][]grid.Value{{number("1.5")}}}})
	if err != nil {
		t.Fatal(err)
	}
	var long strings.Builder
	for i := 1; i <= block.RowsMax+2; i++ {
		fmt.Fprintf(&long, `<row r="%d"><c r="A%d" t="str"><v>a</v></c></row>`, i, i)
	}
	data = assembled(t, parts(t, data), sheetOf(long.String()))
	b, err := book.Read(data, book.Options{Sheet: "Short", HeaderRow: 1})
	if err != nil || len(b.Rows) != 1 || b.Rows[0].Cells[0] != "1.5" {
		t.Errorf("the short sheet: %v, %v", b, err)
	}
	expectRefusal(t, data, book.Options{Sheet: "Long"}, "row 10002: more than 10000 rows")
}

// TestMergedRangesDoNotChangeCells reads a sheet whose merged ranges and columns' formats could take the place of the cells' own.
func TestMergedRangesDoNotChangeCells(t *testing.T) {
	sheet := string(sheetOf(threeNames + `<row r="2"><c r="B2" t="str"><v>x</v></c><c r="C2" t="b"><v>1</v></c></row>`))
	sheet = strings.Replace(sheet, "<sheetData>", `<sheetPr/><cols><col min="1" max="3" style="999"/></cols><sheetData>`, 1)
	sheet = strings.Replace(sheet, "</sheetData>", `</sheetData><mergeCells count="1"><mergeCell ref="B2:C2"/></mergeCells><pageMargins left="1"/>`, 1)
	b, err := book.Read(assembled(t, base(t), []byte(sheet)), book.Options{HeaderRow: 1})
	if err != nil || len(b.Rows) != 1 || strings.Join(b.Rows[0].Cells, "|") != "|x|TRUE" {
		t.Errorf("got %v, %v", b, err)
	}
}

// TestIdsComeBackAsTheyWere writes ids that look like numbers, among numbers.
func TestIdsComeBackAsTheyWere(t *testing.T) {
	data, err := book.Write([]*grid.Table{{Name: "One", Columns: []string{"id", "Lot", "value"}, Rows: [][]grid.Value{{number("10.50"), number("12"), number("10.50")}}}})
	if err != nil {
		t.Fatal(err)
	}
	if b, err := book.Read(data, book.Options{HeaderRow: 1}); err != nil || strings.Join(b.Rows[0].Cells, "|") != "10.50|12|10.50" {
		t.Errorf("got %v, %v", b, err)
	}
}
