package book_test

import (
	"bytes"
	"fmt"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"limitary/internal/decimal"
	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
)

// cellBook is a workbook whose second row has x in a format under the name; a custom code, or the number of a built-in one.
func cellBook(t *testing.T, name string, x, formatted any) []byte {
	t.Helper()
	f := excelize.NewFile()
	defer f.Close()
	style := &excelize.Style{}
	switch v := formatted.(type) {
	case string:
		style.CustomNumFmt = &v
	case int:
		style.NumFmt = v
	}
	id, err := f.NewStyle(style)
	for _, err := range []error{err, f.SetCellValue("Sheet1", "A1", "note"), f.SetCellValue("Sheet1", "B1", name), f.SetCellValue("Sheet1", "A2", "n"),
		f.SetCellValue("Sheet1", "B2", x), f.SetCellStyle("Sheet1", "B2", "B2", id)} {
		if err != nil {
			t.Fatal(err)
		}
	}
	var buf bytes.Buffer
	if err := f.Write(&buf); err != nil {
		t.Fatal(err)
	}
	return buf.Bytes()
}

// second reads what stands under the name.
func second(t *testing.T, data []byte, o book.Options) (string, error) {
	t.Helper()
	o.HeaderRow = 1
	b, err := book.Read(data, o)
	if err != nil {
		return "", err
	}
	return b.Rows[0].Cells[1], nil
}

// TestFormatsThatShowTheValue are those whose numbers pass, with as many decimals as they show.
func TestFormatsThatShowTheValue(t *testing.T) {
	for format, want := range map[any]string{
		0: "0.5", 1: "0.5", 2: "0.50", 3: "0.5", 4: "0.50", 11: "0.5", 37: "0.5", 40: "0.50", 48: "0.5",
		"General": "0.5", "0": "0.5", "0.000": "0.500", "#,##0.000": "0.500", `#,##0.00_);\(#,##0.00\)`: "0.50", `#,##0.00_);[Red]\(#,##0.00\)`: "0.50",
		`0.000\ _D_M`: "0.500", `_-* 0.00_-`: "0.50", "0.00;[Red]0.00": "0.50", "0.00;-0.00;0": "0.5", "0.00;-0.00;0.00;@": "0.50",
		"0.0E+00": "0.5", "0.##": "0.5", "[$-409]0.00": "0.50", "+0.00;-0.00": "0.50", `# ##0.00`: "0.50", "0.00_h": "0.50", "[Color 3]0.00": "0.50",
	} {
		for _, name := range []string{"value", "nitrate"} {
			if got, err := second(t, cellBook(t, name, 0.5, format), book.Options{}); err != nil || got != want {
				t.Errorf("%v under %s: got %q, %v, want %q", format, name, got, err, want)
			}
		}
	}
}

// TestFormatsThatShowAnotherValue are refused with the cell and the format, unless the column is not used.
func TestFormatsThatShowAnotherValue(t *testing.T) {
	for _, format := range []any{9, 10, 12, 13, 46, `"<"0.00`, "0.00%", `"n.d."`, ";;;", "[h]:mm", "[mm]:ss", "[s]", `0.0"x10^3"`, "0.00,", "#,##0,,", "0.00,;-0.00,", "# ?/?",
		`0.00" mg"`, "[>1]0.00;0.0", "0.00;0.00", "0.00;;", "-0.00", "(0.00)", "0.00;-0.00;", "0.00;+0.00", "[Red]", "[$€-407]0.00", `\<0.00`, "0-00", `[$-409]General" mg"`, "0.00;(0.00"} {
		data := cellBook(t, "nitrate", 0.5, format)
		shown, isCode := format.(string)
		if got, err := second(t, data, book.Options{}); err == nil || !strings.Contains(err.Error(), "row 2: cell B2 is shown by the format") ||
			!strings.Contains(err.Error(), "which changes its value; format it as a number") || isCode && !strings.Contains(err.Error(), fmt.Sprintf("%q", shown)) {
			t.Errorf("%v: got %q, %v", format, got, err)
		}
		if got, err := second(t, data, book.Options{Use: func(string) book.Use { return book.Other }}); err != nil || got != "0.5" {
			t.Errorf("%v in a column that is not used: got %q, %v", format, got, err)
		}
	}
}

// TestDatesByTheirFormat reads 2 March 2026, 09:30, under formats for dates and times of day.
func TestDatesByTheirFormat(t *testing.T) {
	const serial = 46083.3958333333
	for _, format := range []any{14, 15, 17, 18, 20, 22, 45, "yyyy-mm-dd hh:mm", "mmm", "[$-409]d-mmm-yy;@", "[$-F800]dddd, mmmm dd, yyyy", `dd"."mm\.yyyy`, "h:mm AM/PM", "mm:ss.0"} {
		data := cellBook(t, "measured", serial, format)
		if got, err := second(t, data, book.Options{}); err != nil || got != "2026-03-02T09:30:00" {
			t.Errorf("%v: got %q, %v", format, got, err)
		}
		if got, err := second(t, data, book.Options{RawDates: true}); err != nil || got != "46083.3958333333" {
			t.Errorf("%v raw: got %q, %v", format, got, err)
		}
		if got, err := second(t, cellBook(t, "Value", serial, format), book.Options{RawDates: true}); err == nil || !strings.Contains(err.Error(), "changes its value") {
			t.Errorf("%v as a reading: got %q, %v", format, got, err)
		}
	}
}

// asWanted compares a text that was read, or a part of the error, which has a space in it.
func asWanted(got string, err error, want string) bool {
	if strings.Contains(want, " ") {
		return err != nil && strings.Contains(err.Error(), want)
	}
	return err == nil && got == want
}

// TestNumbersThatStandForTexts reads ids that a spreadsheet program keeps as numbers.
func TestNumbersThatStandForTexts(t *testing.T) {
	for _, c := range []struct {
		x, format any
		want      string
	}{
		{7.0, 0, "7"}, {7.5, 0, "7.5"}, {7.0, 1, "7"}, {7.0, "0", "7"}, {-123456789012345.0, 0, "-123456789012345"},
		{7.0, "000", `cell B2, which should hold a text, is the number 7 shown by the format "000"; format the column as text`},
		{7.0, 2, `shown by the format "0.00"`}, {7.5, "0", `the number 7.5 shown by the format "0"`}, {46083.0, 14, "shown by the format"}, {7.0, 9, `format "0%"`},
		{1234567890123456.0, 0, "cell B2, which should hold a text, is a number of more than 15 digits; format the column as text"},
		{1e300, 0, "more than 15 digits"}, {1e15, 1, "more than 15 digits"},
	} {
		for _, name := range []string{"id", "Lot"} {
			got, err := second(t, cellBook(t, name, c.x, c.format), book.Options{})
			if !asWanted(got, err, c.want) {
				t.Errorf("%v in %v: got %q, %v, want %q", c.x, c.format, got, err, c.want)
			}
		}
	}
	sample := func(name string) book.Use {
		if name == "Sample" {
			return book.Text
		}
		return book.Other
	}
	if got, err := second(t, cellBook(t, "Sample", 7.0, "000"), book.Options{Use: sample}); err == nil {
		t.Errorf("a column said to hold texts: got %q", got)
	}
}

// TestCellsThatAreNoNumbers reads truths, errors and what is no number though its cell says so.
func TestCellsThatAreNoNumbers(t *testing.T) {
	all := base(t)
	read := func(cell string, use book.Use) (string, error) {
		b, err := book.Read(assembled(t, all, sheetOf(threeNames+`<row r="2">`+cell+`</row>`)), book.Options{HeaderRow: 1, Use: func(string) book.Use { return use }})
		if err != nil {
			return "", err
		}
		return b.Rows[0].Cells[2], nil
	}
	for cell, want := range map[string]string{
		`<c r="C2" t="b"><v>1</v></c>`: "TRUE", `<c r="C2" t="b"><v>0</v></c>`: "FALSE", `<c r="C2" t="b"><f>TRUE()</f><v>1</v></c>`: "TRUE",
		`<c r="C2" t="b"><v>2</v></c>`:    "cell C2 is TRUE or FALSE",
		`<c r="C2" t="e"><v>#N/A</v></c>`: "cell C2 holds the error #N/A", `<c r="C2" t="e"><f>1/0</f><v>#DIV/0!</v></c>`: "cell C2 holds the error #DIV/0!",
		`<c r="C2"><v>1_0</v></c>`: `cell C2 is a number and holds "1_0"`, `<c r="C2"><v>0x10</v></c>`: `and holds "0x10"`, `<c r="C2"><v>NaN</v></c>`: `and holds "NaN"`,
		`<c r="C2" t="n"><v>Inf</v></c>`: `and holds "Inf"`, `<c r="C2"><v>1e999</v></c>`: `and holds "1e999"`, `<c r="C2"><v>abc</v></c>`: `and holds "abc"`,
		`<c r="C2" s="999"><v>5</v></c>`: "cell C2 has a format that the workbook does not hold", `<c r="C2"><f>1+1</f><v>2</v></c>`: "2", `<c r="C2"><v>-1.5E-3</v></c>`: "-0.0015",
		`<c r="C2" t="str"><f>T(1)</f><v>1_0</v></c>`: "1_0", `<c r="C2" t="d"><v>2026-03-04T10:00:00</v></c>`: "2026-03-04T10:00:00",
	} {
		for _, use := range []book.Use{book.Any, book.Reading} {
			got, err := read(cell, use)
			if !asWanted(got, err, want) {
				t.Errorf("%s: got %q, %v, want %q", cell, got, err, want)
			}
		}
	}
	if got, err := read(`<c r="C2"><v>0.1234567890123456</v></c>`, book.Text); err == nil || !strings.Contains(err.Error(), "cell C2, which should hold a text, is a number of more than 15 digits") {
		t.Errorf("a text of 16 digits: got %q, %v", got, err)
	}
	if got, err := read(`<c r="C2" t="e"><v>#N/A</v></c>`, book.Other); err != nil || got != "#N/A" {
		t.Errorf("an error in a column that is not used: got %q, %v", got, err)
	}
	for _, truth := range []string{"TRUE", "FALSE"} {
		if got, err := decimal.ParseReading(truth); err == nil {
			t.Errorf("%s was read as the number %v", truth, got)
		}
	}
}

// TestSerialNumbersOfTheOtherSystem contradicts the workbook.
func TestSerialNumbersOfTheOtherSystem(t *testing.T) {
	data := cellBook(t, "value", 1.5, 0)
	for dates, good := range map[block.Dates]bool{"": true, block.ISO: true, block.Serial1900: true, block.Serial1904: false} {
		if got, err := second(t, data, book.Options{Dates: dates}); (err == nil) != good || err != nil && !strings.Contains(err.Error(), "dates=serial-1904: the workbook's own dates are serial-1900") {
			t.Errorf("dates %q: got %q, %v", dates, got, err)
		}
	}
}
