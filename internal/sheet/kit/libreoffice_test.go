package kit_test

import (
	"bytes"
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/kit"
)

// locales are the two that the test runs in. Numbers are written with a point in one and with a comma in the other, and
// the arguments of a formula are separated by commas in one and by semicolons in the other.
var locales = []struct {
	name, decimal string
	form, own     kit.Form
}{
	{"en-US", ".", kit.WithCommas, kit.PointLocale},
	{"de-DE", ",", kit.WithSemicolons, kit.CommaLocale},
}

// TestLibreOffice runs the kit in LibreOffice against a service: the formulas typed in and from a workbook, the macros, and
// what is exported from it with texts that are meant to run.
func TestLibreOffice(t *testing.T) {
	var offices []*office
	for _, l := range locales {
		offices = append(offices, startOffice(t, l.name))
	}
	r := serve(t)
	r.chart(&pb.Chart{Name: "nitrate", Title: "Nitrate check", Unit: "mg/L"}, 10.25, 0.5, nil)
	prepareHostile(t, r)
	for i, l := range locales {
		o := offices[i]
		t.Run(l.name, func(t *testing.T) {
			t.Parallel()
			o.ready(t)
			t.Run("formulas typed in", func(t *testing.T) { typedFormulas(t, r.on(t), o, l.form, l.own, l.decimal) })
			t.Run("formulas of the workbook", func(t *testing.T) { workbookFormulas(t, r.on(t), o) })
			t.Run("macros", func(t *testing.T) { macros(t, r.on(t), o, l.name, l.decimal) })
			t.Run("what VBA can be tried", func(t *testing.T) { vbaSyntax(t, o) })
			t.Run("hostile texts", func(t *testing.T) { hostileTexts(t, r.on(t), o, l.decimal) })
		})
	}
}

// answers are what the formulas of the page must give, by what stands above them, for the chart around 10.25 with one sigma of
// 0.5, on which nothing is stored: its action line is 10.25 + 3 * 0.5.
var answers = map[string]any{
	"The centre line":                            10.25,
	"The upper action limit":                     11.75,
	"The same of version 1, which never changes": 11.75,
	"The version in force":                       1.0,
	"The unit":                                   "mg/L",
	"What would be said of the result in B2, if it came next": "not recorded; STOP; rules western-electric-1956/1 upper; version 1; track CLEAR; after no stored result",
	"The same of B2 to B6, one after the other":               "not recorded; STOP; points STOP CLEAR CLEAR CLEAR CLEAR; rules western-electric-1956/1 upper; version 1; track CLEAR; after no stored result",
	"The worst standing alone, out of such a text in B8":      "STOP",
	"The state of the track":                                  "CLEAR",
	"How many signals are open":                               0.0,
}

// results stand in B2 to B6: one beyond the action line, and one that would be taken for 10375 if its decimal were lost.
var results = []float64{12.125, 10.25, 10.5, 10.375, 10.3}

func check(t *testing.T, what string, got cell) {
	t.Helper()
	switch want := answers[what].(type) {
	case nil:
		t.Errorf("%s: there is nothing to hold the formula against", what)
	case string:
		if got.Kind != "FORMULA" || got.Of != "TEXT" || got.Error != 0 || got.Text != want {
			t.Errorf("%s: got %+v, want the text %q", what, got, want)
		}
	case float64:
		if got.Kind != "FORMULA" || got.Of != "VALUE" || got.Error != 0 || math.Abs(got.Number-want) > 1e-12 {
			t.Errorf("%s: got %+v, want the number %v", what, got, want)
		}
	}
}

// typedFormulas types every formula of the page as a user does, in the form that the locale takes.
func typedFormulas(t *testing.T, r *running, o *office, form, own kit.Form, decimal string) {
	f := excelize.NewFile()
	defer f.Close()
	for i, value := range []string{r.at, "nitrate", r.tokens["reader"]} {
		name := []string{"base", "chart", "key"}[i]
		r.must(f.SetCellStr("Sheet1", fmt.Sprintf("H%d", i+1), value))
		r.must(f.SetDefinedName(&excelize.DefinedName{Name: "limitary_" + name, RefersTo: fmt.Sprintf("Sheet1!$H$%d", i+1)}))
	}
	for i, x := range results {
		r.must(f.SetCellFloat("Sheet1", fmt.Sprintf("B%d", i+2), x, -1, 64))
	}
	var data bytes.Buffer
	r.must(f.Write(&data))
	o.do(t, "open", args{"path": o.save(t, "typed.xlsx", data.Bytes())}, nil)
	defer o.do(t, "close", nil, nil)
	o.do(t, "type", args{"sheet": "Sheet1", "cell": "B8", "text": formulaFor(t, form, "What would be said of the result in B2, if it came next")}, nil)
	all := append(kit.Formulas(form), kit.Formulas(own)...)
	for i, each := range all {
		o.do(t, "type", args{"sheet": "Sheet1", "cell": fmt.Sprintf("D%d", i+1), "text": each.Text}, nil)
	}
	o.do(t, "again", nil, nil)
	for i, row := range o.read(t, "Sheet1", fmt.Sprintf("D1:D%d", len(all))) {
		check(t, all[i].Gives, row[0])
		if text := row[0].Text; row[0].Number == 10.25 && text != "10"+decimal+"25" {
			t.Errorf("the locale shows 10.25 as %q", text)
		}
	}
}

func formulaFor(t *testing.T, form kit.Form, gives string) string {
	t.Helper()
	for _, f := range kit.Formulas(form) {
		if f.Gives == gives {
			return f.Text
		}
	}
	t.Fatalf("the page has no formula for %q", gives)
	return ""
}

// workbookFormulas fills in the workbook of the kit and opens it.
func workbookFormulas(t *testing.T, r *running, o *office) {
	file, _ := kit.Find("formulas.xlsx")
	data, err := file.Bytes(r.at)
	r.must(err)
	f, err := excelize.OpenReader(bytes.NewReader(data))
	r.must(err)
	defer f.Close()
	if at, err := f.GetCellValue(kit.SettingsSheet, "B1"); err != nil || at != r.at {
		t.Errorf("the workbook names the service %q, %v", at, err)
	}
	r.must(f.SetCellStr(kit.SettingsSheet, "B2", "nitrate"))
	r.must(f.SetCellStr(kit.SettingsSheet, "B3", r.tokens["reader"]))
	for i, x := range results {
		r.must(f.SetCellFloat(kit.ResultsSheet, fmt.Sprintf("B%d", i+2), x, -1, 64))
	}
	var filled bytes.Buffer
	r.must(f.Write(&filled))
	o.do(t, "open", args{"path": o.save(t, "formulas.xlsx", filled.Bytes())}, nil)
	defer o.do(t, "close", nil, nil)
	o.do(t, "again", nil, nil)
	all := kit.Formulas(kit.WithCommas)
	last := kit.FormulaRow + len(all) - 1
	for i, row := range o.read(t, kit.FormulaSheet, fmt.Sprintf("A%d:B%d", kit.FormulaRow, last)) {
		if row[0].Text != all[i].Gives {
			t.Errorf("row %d is of %q, want %q", i, row[0].Text, all[i].Gives)
		}
		check(t, all[i].Gives, row[1])
	}
	// What is refused is a text, and no number.
	o.do(t, "set", args{"sheet": kit.SettingsSheet, "cell": "B2", "value": "nowhere"}, nil)
	o.do(t, "again", nil, nil)
	rows := o.read(t, kit.FormulaSheet, fmt.Sprintf("B%d:B%d", kit.FormulaRow, last))
	if centre := rows[0][0]; centre.Error == 0 {
		t.Errorf("the centre line of no chart is %+v", centre)
	}
	if unit := rows[4][0]; unit.Text != `refused: there is no chart "nowhere"` {
		t.Errorf("the unit of no chart is %+v", unit)
	}
}

// vbaSyntax lets LibreOffice's Basic read the module for VBA in its mode for that language, and calls what touches no cell
// and no network: a line that is not understood would give no answer at all. It is no run of the module.
func vbaSyntax(t *testing.T, o *office) {
	file, _ := kit.Find("limitary-vba.bas")
	data, err := file.Bytes(kit.Service)
	if err != nil {
		t.Fatal(err)
	}
	_, source, ok := strings.Cut(strings.ReplaceAll(string(data), "\r\n", "\n"), "\n")
	if !ok {
		t.Fatal("the module has one line")
	}
	o.do(t, "module", args{"name": "LimitaryVBA", "source": "Option VBASupport 1\n" + source}, nil)
	for _, c := range []struct {
		function, with string
		want           any
	}{
		{"Encode", "a b/\u00e9+\u20ac~", "a%20b%2F%C3%A9%2B%E2%82%AC~"}, {"IsPlain", "-12.50", true}, {"IsPlain", "1.2.5", false}, {"IsPlain", "1e5", false},
		{"IsPlain", "-", false}, {"IsNumberColumn", "title", false}, {"IsNumberColumn", "centre", true},
	} {
		var got any
		if o.do(t, "call", args{"name": "LimitaryVBA." + c.function, "args": []string{c.with}}, &got); got != c.want {
			t.Errorf("%s(%q) is %v, want %v", c.function, c.with, got, c.want)
		}
	}
}

// texts gives the texts of an area, one line a row.
func (o *office) texts(t *testing.T, sheet, area string) (lines []string) {
	t.Helper()
	for _, row := range o.read(t, sheet, area) {
		cells := make([]string, len(row))
		for i, c := range row {
			if cells[i] = c.Text; c.Kind == "FORMULA" {
				cells[i] = "FORMULA " + c.Formula
			}
		}
		lines = append(lines, strings.Join(cells, "|"))
	}
	return lines
}

func same(t *testing.T, what string, got, want []string) {
	t.Helper()
	if !reflect.DeepEqual(got, want) {
		t.Errorf("%s:\ngot  %q\nwant %q", what, got, want)
	}
}
