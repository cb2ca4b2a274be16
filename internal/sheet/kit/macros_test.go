package kit_test

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/kit"
)

// day1900 and day1904 are 2 March 2026 by the two ways in which documents count days: 1,462 days lie between them.
const (
	day1900 = 46083
	day1904 = 44621
)

// macros walks what a user does with the Basic module, in a document of the one way to count days where the decimal is a
// point, and of the other where it is a comma.
func macros(t *testing.T, r *running, o *office, locale, decimal string) {
	day := float64(day1900)
	if decimal == "," {
		day = day1904
	}
	chart := "macro-" + strings.ToLower(locale)
	r.chart(&pb.Chart{Name: chart, Title: "=1+1", Unit: "mg/L"}, 10, 0.5, nil)
	file, _ := kit.Find("limitary-libreoffice.bas")
	source, err := file.Bytes(r.at)
	r.must(err)
	o.do(t, "module", args{"name": "Limitary", "source": string(source)}, nil)
	o.do(t, "open", args{"path": o.save(t, "macros.xlsx", macroBook(t, r.at, chart, day == day1904))}, nil)
	defer o.do(t, "close", nil, nil)
	set := func(at string, value any, format ...string) {
		t.Helper()
		with := args{"sheet": "Sheet1", "cell": at, "value": value}
		if len(format) > 0 {
			with["format"] = format[0]
		}
		o.do(t, "set", with, nil)
	}
	choose := func(area string) { o.do(t, "select", args{"sheet": "Sheet1", "range": area}, nil) }

	// A column is judged; nobody has given a key yet, and a dialogue that is not answered gives none.
	for i, v := range []any{"Nitrate, mg/L", 10.1, 12.2, "", 9.9} {
		set(fmt.Sprintf("A%d", i+1), v)
	}
	choose("A1:A1048576")
	if got := o.run(t, "LimitaryJudgeSelection"); got != "Nothing was sent: there is no key for "+r.at+"." {
		t.Errorf("without a key: %q", got)
	}
	keepKeys(t, r, o)
	o.run(t, "LimitaryJudge")
	same(t, "judged", o.texts(t, "Sheet1", "B1:E5"), []string{"limitary_standing|limitary_rules|limitary_version|limitary_note",
		"CLEAR||1|not recorded; after no stored result", "STOP|western-electric-1956/1 upper|1|not recorded; after no stored result",
		"NOT_JUDGED (NO_RESULT)||1|not recorded; after no stored result", "CLEAR||1|not recorded; after no stored result"})
	if v := o.one(t, "Sheet1", "D2"); v.Kind != "VALUE" || v.Number != 1 {
		t.Errorf("the version is %+v, want a number", v)
	}
	choose("A2:A3")
	if got := o.run(t, "LimitaryJudgeSelection"); !strings.Contains(got, "there is something in them") {
		t.Errorf("no room beside a column without a name: %q", got)
	}
	if got := r.stored(chart); got != nil {
		t.Errorf("judging stored %q", got)
	}
	alone := args{"sheet": "Plain", "cell": "B2", "value": 12.2}
	o.do(t, "set", alone, nil)
	o.do(t, "select", args{"sheet": "Plain", "range": "B2"}, nil)
	if trouble, got := o.run(t, "LimitaryJudgeSelection"), o.texts(t, "Plain", "A2:F2")[0]; trouble != "" || !strings.Contains(got, "|STOP|western-electric-1956/1 upper|1|") {
		t.Errorf("one cell alone on its sheet: %q, %q", trouble, got)
	}
	refusedMacros(t, r, o, chart, set, choose)
	postByMacro(t, r, o, chart, day, set, choose)
	fetchByMacro(t, o, chart, decimal)
	for _, sheet := range []string{"Sheet1", "Plain", "limitary_limits"} {
		for _, row := range o.whole(t, sheet) {
			for _, c := range row {
				if strings.Contains(c.Text, r.tokens["poster"]) {
					t.Errorf("the key stands in a cell of %s", sheet)
				}
			}
		}
	}
}

// macroBook is a document that says by named cells what the macros need.
func macroBook(t *testing.T, at, chart string, since1904 bool) []byte {
	t.Helper()
	f := excelize.NewFile()
	defer f.Close()
	if err := f.SetWorkbookProps(&excelize.WorkbookPropsOptions{Date1904: &since1904}); err != nil {
		t.Fatal(err)
	}
	var data bytes.Buffer
	for i, line := range [][2]string{{"chart", chart}, {"source", "bench"}, {"zone", "+01:00"}, {"base", at + "/"}} {
		if err := f.SetCellStr("Sheet1", fmt.Sprintf("Z%d", i+1), line[1]); err != nil {
			t.Fatal(err)
		}
		if err := f.SetDefinedName(&excelize.DefinedName{Name: "limitary_" + line[0], RefersTo: fmt.Sprintf("Sheet1!$Z$%d", i+1)}); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := f.NewSheet("Plain"); err != nil {
		t.Fatal(err)
	}
	if err := f.Write(&data); err != nil {
		t.Fatal(err)
	}
	return data.Bytes()
}

// keepKeys keeps keys as the macro does once one was given: in the profile, and each for its own address.
func keepKeys(t *testing.T, r *running, o *office) {
	t.Helper()
	o.run(t, "LimitaryKeepKey", "http://127.0.0.1:1", "other")
	o.run(t, "LimitaryKeepKey", r.at, "wrong")
	o.run(t, "LimitaryKeepKey", r.at, r.tokens["poster"])
	kept, err := os.ReadFile(filepath.Join(o.profile, "user", "limitary.keys"))
	if want := "http://127.0.0.1:1\tother\n" + r.at + "\t" + r.tokens["poster"] + "\n"; err != nil || string(kept) != want {
		t.Errorf("the kept keys: %v, %d bytes, want %d", err, len(kept), len(want))
	}
}

// refusedMacros asks with what the service does not take. No verdict may stand there after it.
func refusedMacros(t *testing.T, r *running, o *office, chart string, set func(string, any, ...string), choose func(string)) {
	refused := func(what, macro, want string) {
		t.Helper()
		choose("A1:A5")
		if got := o.run(t, macro); !strings.Contains(got, want) {
			t.Errorf("%s: got %q, want %q", what, got, want)
		}
		if left := strings.Trim(strings.Join(o.texts(t, "Sheet1", "B1:G5"), ""), "|"); left != "" {
			t.Errorf("%s: there still stands %q", what, left)
		}
	}
	set("Z1", "no-such-chart")
	refused("an unknown chart", "LimitaryJudgeSelection", `The service refused: there is no chart "no-such-chart"`)
	set("Z1", chart)
	set("A2", "ten")
	refused("no number", "LimitaryJudgeSelection", "The service refused: row 2, column Nitrate, mg/L: ")
	set("A2", 10.1)
	o.run(t, "LimitaryKeepKey", r.at, r.tokens["reader"]+"x")
	refused("a wrong key", "LimitaryJudgeSelection", "does not know the key; run LimitaryForgetKey and give another.")
	set("Z4", "http://127.0.0.1:2")
	refused("a document that names another service", "LimitaryJudgeSelection", "there is no key for http://127.0.0.1:2.")
	set("Z4", r.at)
	o.run(t, "LimitaryForgetKey")
	refused("a forgotten key", "LimitaryJudgeSelection", "there is no key for "+r.at)
	o.run(t, "LimitaryKeepKey", r.at, r.tokens["reader"])
	set("C8", "id")
	set("D8", "time")
	set("E8", "value")
	set("C9", "x1")
	set("D9", "2026-03-01T00:00:00Z")
	set("E9", 10)
	choose("C8:E9")
	if got := o.run(t, "LimitaryPostSelection"); !strings.Contains(got, "403 Forbidden. The key may not do this.") || r.stored(chart) != nil {
		t.Errorf("posting with a reader's key: %q, stored %q", got, r.stored(chart))
	}
	if got := o.run(t, "LimitaryCall", "GET", "http://127.0.0.1:1", "http://127.0.0.1:1/sheet/limits.tsv", "", ""); got != "No answer from http://127.0.0.1:1; nothing is judged." {
		t.Errorf("nobody at the address: %q", got)
	}
	o.run(t, "LimitaryKeepKey", r.at, r.tokens["poster"])
}

// postByMacro posts a block with dates in cells, numbers with decimals shown and hidden, a bound
// that may lie beyond the lower action limit, and a text that is meant to run.
func postByMacro(t *testing.T, r *running, o *office, chart string, day float64, set func(string, any, ...string), choose func(string)) {
	for i, name := range []string{"id", "time", "value", "analyst"} {
		set(string(rune('H'+i))+"1", name)
	}
	// 2 March 2026, 09:30 and on, in a zone one hour ahead of UTC.
	rows := []struct {
		id, analyst string
		value       any
		format      string
	}{{"n1", "Ann", 10.3, "0.00"}, {"007", "=1+1", 9.8, ""}, {"n3", "Bea \"B\"", 12.125, "0.0"}, {"n4", "Bea", "<11", ""}}
	for i, row := range rows {
		at := func(c string) string { return fmt.Sprintf("%s%d", c, i+2) }
		set(at("H"), row.id)
		set(at("I"), day+(9.5+float64(i))/24, "YYYY-MM-DD HH:MM")
		set(at("J"), row.value, row.format)
		set(at("K"), row.analyst)
	}
	choose("H1:K5")
	set("J3", "ten")
	if got := o.run(t, "LimitaryPostSelection"); got != "Nothing was stored. What is wrong stands beside the rows." || r.stored(chart) != nil {
		t.Errorf("a bad row: %q, stored %q", got, r.stored(chart))
	}
	if got := o.texts(t, "Sheet1", "L3:P3")[0]; !strings.HasPrefix(got, "REFUSED||||row 3, column value: ") {
		t.Errorf("the bad row is answered with %q", got)
	}
	set("J3", 9.8)
	o.run(t, "LimitaryPost")
	same(t, "posted", o.texts(t, "Sheet1", "L1:Q5"), []string{
		"limitary_outcome|limitary_standing|limitary_rules|limitary_version|limitary_track_state|limitary_note",
		"ACCEPTED|CLEAR||1|HOLD|", "ACCEPTED|CLEAR||1|HOLD|", "ACCEPTED|STOP|western-electric-1956/1 upper|1|HOLD|", "ACCEPTED|NOT_JUDGED (BOUND_PROVES_NOTHING)||1|HOLD|"})
	want := []string{"bench|n1|2026-03-02T09:30:00+01:00|10.30|CLEAR", "bench|007|2026-03-02T10:30:00+01:00|9.8|CLEAR",
		"bench|n3|2026-03-02T11:30:00+01:00|12.125|STOP", "bench|n4|2026-03-02T12:30:00+01:00|<11|NOT_JUDGED"}
	same(t, "stored", r.stored(chart), want)
	choose("H1:Q5") // with the answer's columns, as they stand
	if got := o.run(t, "LimitaryPostSelection"); got != "" {
		t.Errorf("posting again: %q", got)
	}
	for _, row := range o.read(t, "Sheet1", "L2:L5") {
		if row[0].Text != "DUPLICATE" {
			t.Errorf("posting again is answered with %q", row[0].Text)
		}
	}
	same(t, "stored after posting again", r.stored(chart), want)
	set("J2", 10.4)
	if got := o.run(t, "LimitaryPostSelection"); !strings.HasPrefix(got, "The service refused: nothing stored: row 2, column id: the id is stored with other content: ") {
		t.Errorf("other content: %q", got)
	}
	if left := o.texts(t, "Sheet1", "L2:Q2")[0]; strings.ContainsAny(left, "ADS") {
		t.Errorf("a verdict still stands beside a changed value: %q", left)
	}
	same(t, "stored after a refusal", r.stored(chart), want)
}

// fetchByMacro fetches the table, twice.
func fetchByMacro(t *testing.T, o *office, chart, decimal string) {
	for range 2 {
		o.run(t, "LimitaryFetchLimits")
	}
	rows := o.whole(t, "limitary_limits")
	shown := o.read(t, "limitary_limits", "A1:AB9")
	at := map[string]int{}
	for i, c := range rows[0] {
		at[c.Text] = i
	}
	found := 0
	for y, row := range rows {
		if row[at["chart"]].Text != chart {
			continue
		}
		found++
		if c := row[at["upper_action"]]; c.Kind != "VALUE" || c.Number != 11.5 || shown[y][at["upper_action"]].Text != "11"+decimal+"5" {
			t.Errorf("the upper action limit is %+v, shown as %q", c, shown[y][at["upper_action"]].Text)
		}
		if c := row[at["title"]]; c.Kind != "TEXT" || c.Text != "'=1+1" {
			t.Errorf("the title is %+v", c)
		}
		if c := row[at["limitary_fetched_at"]]; c.Kind != "TEXT" || len(c.Text) != len("2026-03-02T09:30:00") {
			t.Errorf("the moment of fetching is %+v", c)
		}
	}
	if found != 1 {
		t.Errorf("%d rows of %s", found, chart)
	}
}
