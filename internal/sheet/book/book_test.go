package book_test

import (
	"bytes"
	"reflect"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
	"limitary/internal/sheet/grid"
)

func number(s string) grid.Value { return grid.Value{Kind: grid.Number, Text: s} }

// TestWhatGoesOutComesBack writes every kind of cell and reads it again.
func TestWhatGoesOutComesBack(t *testing.T) {
	at := time.Date(2026, 3, 2, 9, 30, 0, 0, time.UTC)
	table := &grid.Table{Name: "Results", Columns: []string{"id", "value", "time", "=name"}, Rows: [][]grid.Value{
		{grid.Of("n1"), number("0.30"), grid.Moment(at), grid.Of("=1+1")},
		{grid.Of("007"), number("-0.012"), grid.Moment(at.Add(1500 * time.Millisecond)), grid.Of("'quoted'")},
		{grid.Of("a\nb\tc"), number("-12"), {}, grid.Of("''=x")},
		{grid.Of("1E5"), number("1234567890.12345"), {}, grid.Of(" spaced ")},
		{{}, number("-1234567890123456.5"), {}, grid.Of("\x01bell")},
		{grid.Of("<b>&amp;</b>"), number("1.2e-30"), {}, grid.Of("_x0041_")},
	}}
	data, err := book.Write([]*grid.Table{{Name: "About", Columns: []string{"x"}}, table})
	if err != nil {
		t.Fatal(err)
	}
	if !book.Looks(data) {
		t.Error("a workbook that does not look like one")
	}
	b, err := book.Read(data, book.Options{Sheet: "Results", HeaderRow: 1})
	if err != nil {
		t.Fatal(err)
	}
	want := [][]string{
		{"n1", "0.30", "2026-03-02T09:30:00", "=1+1"},
		{"007", "-0.012", "2026-03-02T09:30:01.5", "'quoted'"},
		{"a\nb\tc", "-12", "", "''=x"},
		{"1E5", "1234567890.12345", "", " spaced "},
		{"", "-1234567890123456.5", "", "bell"},
		{"<b>&amp;</b>", "1.2e-30", "", "_x0041_"},
	}
	for i, r := range b.Rows {
		if r.Number != i+2 || !reflect.DeepEqual(r.Cells, want[i]) {
			t.Errorf("row %d: got %q, want %q", r.Number, r.Cells, want[i])
		}
	}
	if !reflect.DeepEqual(b.Names, []string{"id", "value", "time", "=name"}) || len(b.Rows) != len(want) {
		t.Errorf("names %q, %d rows", b.Names, len(b.Rows))
	}
}

// TestNumbersOfOtherPrograms reads numbers as spreadsheet programs store them: with 17 digits, and dates in both systems.
func TestNumbersOfOtherPrograms(t *testing.T) {
	for _, from1904 := range []bool{false, true} {
		f := excelize.NewFile()
		date, two := "dd/mm/yyyy hh:mm", "0.00"
		dates, err1 := f.NewStyle(&excelize.Style{CustomNumFmt: &date})
		places, err2 := f.NewStyle(&excelize.Style{CustomNumFmt: &two})
		builtin, err3 := f.NewStyle(&excelize.Style{NumFmt: 2})
		day, err4 := f.NewStyle(&excelize.Style{NumFmt: 14})
		err5 := f.SetWorkbookProps(&excelize.WorkbookPropsOptions{Date1904: &from1904})
		for cell, v := range map[string]any{"A1": "a", "B1": "b", "C1": "c", "D1": "d", "E1": "e", "F1": "f", "A2": 9.95, "B2": 46083.3958333333, "C2": 10.0, "D2": 3.0, "E2": 46083.0, "F2": true} {
			if err := f.SetCellValue("Sheet1", cell, v); err != nil {
				t.Fatal(err)
			}
		}
		for _, err := range []error{err1, err2, err3, err4, err5, f.SetCellStyle("Sheet1", "B2", "B2", dates), f.SetCellStyle("Sheet1", "C2", "C2", places),
			f.SetCellStyle("Sheet1", "D2", "D2", builtin), f.SetCellStyle("Sheet1", "E2", "E2", day), f.SetCellFormula("Sheet1", "G2", "=1/0")} {
			if err != nil {
				t.Fatal(err)
			}
		}
		var buf bytes.Buffer
		if err := f.Write(&buf); err != nil {
			t.Fatal(err)
		}
		want := []string{"9.95", "2026-03-02T09:30:00", "10.00", "3.00", "2026-03-02T00:00:00", "TRUE"}
		if from1904 { // 1,462 days later
			want[1], want[4] = "2030-03-03T09:30:00", "2030-03-03T00:00:00"
		}
		b, err := book.Read(buf.Bytes(), book.Options{HeaderRow: 1})
		if err != nil {
			t.Fatal(err)
		}
		if got := b.Rows[0].Cells; !reflect.DeepEqual(got, want) {
			t.Errorf("1904 %t: got %q, want %q", from1904, got, want)
		}
		raw, err := book.Read(buf.Bytes(), book.Options{HeaderRow: 1, RawDates: true})
		if err != nil || raw.Rows[0].Cells[1] != "46083.3958333333" {
			t.Errorf("raw dates: %q, %v", raw.Rows[0].Cells, err)
		}
	}
}

func TestWorkbooksThatAreRefused(t *testing.T) {
	small, err := book.Write([]*grid.Table{{Name: "One", Columns: []string{"a", "a"}}, {Name: "Two", Columns: []string{"3.5"}}})
	if err != nil {
		t.Fatal(err)
	}
	for want, c := range map[string]struct {
		data []byte
		o    book.Options
	}{
		"cannot be read":       {[]byte("PK\x03\x04 nothing"), book.Options{HeaderRow: 1}},
		"several sheets":       {small, book.Options{HeaderRow: 1}},
		`no sheet "Three"`:     {small, book.Options{Sheet: "Three", HeaderRow: 1}},
		"twice":                {small, book.Options{Sheet: "One", HeaderRow: 1}},
		`number "3.5"`:         {small, book.Options{Sheet: "Two", HeaderRow: 1}},
		"has no row 7":         {small, book.Options{Sheet: "One", HeaderRow: 7}},
		"the limit is 8388608": {make([]byte, block.BytesMax+1), book.Options{HeaderRow: 1}},
	} {
		if b, err := book.Read(c.data, c.o); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, %v, want an error that says %q", b, err, want)
		}
	}
}
