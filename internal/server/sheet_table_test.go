package server_test

import (
	"bytes"
	"encoding/csv"
	"net/http"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
	"limitary/internal/sheet/book"
)

func TestTheTableOfLimits(t *testing.T) {
	b := newBench(t, server.Options{})
	b.chart(&pb.Chart{Name: "lead", Title: "Lead", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "ug/L", Labels: map[string]string{"site": "ostley"}})
	b.post("results/nitrate?source=s", "id,time,value\nn1,2026-03-02T09:30:00Z,12\n")
	for target, want := range map[string][]string{
		"limits.csv":                    {"lead,Lead,,ug/L,INDIVIDUALS", "nitrate,Nitrate check,,mg/L,INDIVIDUALS,HOLD,1,1,2020-01-01T00:00:00Z,0,no,", ",10,0.5,8.5,9,11,11.5,western-electric-1956,"},
		"limits.csv?decimal=comma":      {"nitrate;Nitrate check;;mg/L;", ";10;0,5;8,5;9;11;11,5;"},
		"limits.tsv?label=site:harwick": {"nitrate\tNitrate check\t", "\t8.5\t9\t11\t11.5\t"},
		"limits.csv?label=site=ostley":  {"lead,"},
	} {
		got := b.get(target)
		lines := strings.Split(strings.TrimSuffix(got, "\r\n"), "\r\n")
		if wantLines := 2 + strings.Count(target, "limits.csv") - strings.Count(target, "label"); target != "limits.tsv?label=site:harwick" && len(lines) != wantLines {
			t.Errorf("%s has %d lines, want %d", target, len(lines), wantLines)
		}
		for _, each := range want {
			if !strings.Contains(got, each) {
				t.Errorf("%s has no %q:\n%s", target, each, got)
			}
		}
	}
	if got := b.get("limits.csv?label=site:nowhere"); strings.Count(got, "\n") != 1 {
		t.Errorf("no chart: %q", got)
	}
}

func TestABatchAnswersInOrderAndMarksWhatIsNotKnown(t *testing.T) {
	b := newBench(t, server.Options{})
	want := "key,value,version,note\r\nnitrate/centre,10,1,\r\nnowhere/centre,,,\"refused: there is no chart \"\"nowhere\"\"\"\r\n" +
		"nitrate/upper_action,11.5,1,\r\nnitrate/state,CLEAR,,\r\nnitrate/signals,0,,\r\nnitrate,,,refused: want CHART/NAME\r\nnitrate/centre,10,1,\r\n"
	keys := "nitrate/centre,nowhere/centre,nitrate/upper_action,nitrate/state,nitrate/signals,nitrate,nitrate/centre"
	if got := b.get("batch?keys=" + keys); got != want {
		t.Errorf("GET: got\n%s\nwant\n%s", got, want)
	}
	if r := b.ask("reader", http.MethodPost, "batch", strings.ReplaceAll(keys, ",", "\r\n")); r.status != 200 || r.body != want {
		t.Errorf("POST: got %d\n%s", r.status, r.body)
	}
	if got := b.get("batch?decimal=comma&keys=nitrate/sigma"); !strings.Contains(got, "nitrate/sigma;0,5;1;\r\n") {
		t.Errorf("decimal=comma: %s", got)
	}
}

// hostile begins texts that a spreadsheet program might run.
var hostile = []string{"=cmd|' /C calc'!A0", "+1+1", "-1+1", "@SUM(A1)", "=HYPERLINK(\"http://x\")", "'=1+1", "＝1+1"}

// postHostile stores results and charts with hostile text wherever the service takes text, and negative readings.
func postHostile(t *testing.T, b *bench) {
	t.Helper()
	for i, text := range hostile {
		r := &pb.Result{Chart: "blank", Source: text, SourceId: text, MeasuredAt: stamp("2026-03-02T09:30:00Z").AsTime().Format("2006-01-02T15:04:05Z07:00"), RunId: text, Lot: text,
			Material: text, Analyst: text, Instrument: text, Readings: []string{[]string{"-0.012", "-5", "<-0.5", "-1.50", "0.30", "-1e-3", "-1234567890123456.5"}[i]}}
		got, err := pb.NewEvaluationServiceClient(b.conn).PostResults(b.as("poster"), &pb.PostResultsRequest{Results: []*pb.Result{r}, AllOrNothing: true})
		b.must(err)
		if got.Results[0].Outcome != pb.PostOutcome_POST_OUTCOME_ACCEPTED {
			t.Fatal(got.Results[0])
		}
	}
}

func hostileBench(t *testing.T) *bench {
	b := newBench(t, server.Options{})
	b.chart(&pb.Chart{Name: "blank", Title: "=1+1", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "+mg", Labels: map[string]string{"site": "harwick"}})
	b.version("blank", "", "2020-01-01T00:00:00Z", -0.01, 0.002, "western-electric-1956")
	postHostile(t, b)
	return b
}

// TestNoFormulaLeavesAsText reads every table back as a strict reader of CSV does: no text may begin like a formula, and
// every number, negative ones too, must stand as it is.
func TestNoFormulaLeavesAsText(t *testing.T) {
	b := hostileBench(t)
	for _, target := range []string{"limits.csv", "results/blank.csv", "verdicts/blank.csv", "signals.csv?chart=blank", "results/blank.tsv", "batch?keys=blank/unit,=x/y,blank/centre"} {
		body := b.get(target)
		r := csv.NewReader(strings.NewReader(body))
		if strings.Contains(target, ".tsv") {
			r.Comma = '\t'
		}
		rows, err := r.ReadAll()
		if err != nil || len(rows) < 2 {
			t.Fatalf("%s: %v in %s", target, err, body)
		}
		for _, row := range rows {
			for i, cell := range row {
				if cell != "" && strings.ContainsAny(cell[:1], "=+-@\t\r") && !number(cell) || strings.HasPrefix(cell, "＝") {
					t.Errorf("%s: column %s holds %q", target, rows[0][i], cell)
				}
			}
		}
	}
	for _, want := range []string{",-0.012,", ",-5,", ",<-0.5,", ",-1.50,", ",0.30,", ",'+1+1,", ",''=1+1,", ",'＝1+1,"} {
		if got := b.get("results/blank.csv"); !strings.Contains(got, want) {
			t.Errorf("results have no %q:\n%s", want, got)
		}
	}
}

// TestNoFormulaLeavesInAWorkbook opens the whole workbook of a chart with the library: no cell has a formula, texts are
// string cells, readings and limits are numbers.
func TestNoFormulaLeavesInAWorkbook(t *testing.T) {
	b := hostileBench(t)
	f, err := excelize.OpenReader(strings.NewReader(b.get("workbook/blank.xlsx")))
	b.must(err)
	defer f.Close()
	if got := strings.Join(f.GetSheetList(), " "); got != "About Limits Results Verdicts Signals" {
		t.Fatalf("sheets: %s", got)
	}
	numbers := map[string]int{}
	for _, name := range f.GetSheetList() {
		rows, err := f.GetRows(name, excelize.Options{RawCellValue: true})
		b.must(err)
		for y, row := range rows {
			for x, text := range row {
				cell, err := excelize.CoordinatesToCellName(x+1, y+1)
				b.must(err)
				if formula, err := f.GetCellFormula(name, cell); err != nil || formula != "" {
					t.Errorf("%s!%s has the formula %q, %v", name, cell, formula, err)
				}
				kind, err := f.GetCellType(name, cell)
				b.must(err)
				if text != "" && (kind == excelize.CellTypeUnset || kind == excelize.CellTypeNumber) {
					if numbers[rows[0][x]]++; !number(text) {
						t.Errorf("%s!%s is a number cell with %q", name, cell, text)
					}
				} else if text != "" && strings.ContainsAny(text[:1], "=+-@") && text != "-1234567890123456.5" {
					t.Errorf("%s!%s holds the text %q", name, cell, text)
				}
			}
		}
	}
	for column, least := range map[string]int{"reading_1": 5, "centre": 7, "lower_action": 7, "measured_at_utc": 14, "statistic": 5, "first_hit_at": 1} {
		if numbers[column] < least {
			t.Errorf("column %s has %d number cells, want %d: %v", column, numbers[column], least, numbers)
		}
	}
	if text, err := f.GetCellValue("Results", "G2"); err != nil || !strings.HasPrefix(text, "-") && !strings.HasPrefix(text, "<") && text != "0.30" {
		t.Errorf("the first reading is shown as %q, %v", text, err)
	}
}

// number is a plain decimal number with a point.
func number(s string) bool {
	_, ok := strings.CutPrefix(strings.Trim(s, "+-0123456789.eE"), "")
	return ok && strings.Trim(s, "+-0123456789.eE") == "" && strings.ContainsAny(s, "0123456789") && strings.Count(strings.TrimLeft(s, "+-"), "+")+strings.Count(strings.TrimLeft(s, "+-"), "-") <= strings.Count(strings.ToLower(s), "e")
}

// TestAWorkbookComesIn previews and posts a sheet of a workbook, then posts what came back.
func TestAWorkbookComesIn(t *testing.T) {
	b := newBench(t, server.Options{})
	f := excelize.NewFile()
	_, err := f.NewSheet("Bench")
	b.must(err)
	format := "0.00"
	two, err := f.NewStyle(&excelize.Style{CustomNumFmt: &format})
	b.must(err)
	for cell, value := range map[string]any{
		"A1": "a title over it all", "A3": "id", "B3": "time", "C3": "value", "D3": "note",
		"A4": "n1", "B4": stamp("2026-03-02T09:30:00Z").AsTime(), "C4": 10.3, "D4": "=not a formula",
		"A5": "007", "B5": "2026-03-02T10:30:00Z", "C5": -0.012, "A6": "n3", "B6": stamp("2026-03-02T11:30:00Z").AsTime(), "C6": "<0.05", "G6": "beside",
	} {
		b.must(f.SetCellValue("Bench", cell, value))
	}
	b.must(f.SetCellStyle("Bench", "C4", "C4", two))
	b.must(f.SetCellFormula("Bench", "D5", "=1+1"))
	var buf bytes.Buffer
	b.must(f.Write(&buf))
	for params, want := range map[string]string{
		"&header_row=3":                "say sheet=, one of Sheet1, Bench",
		"&sheet=Nowhere":               `no sheet "Nowhere"`,
		"&sheet=Bench&header_row=99":   "has no row 99",
		"&sheet=Bench&header_row=3":    "say zone=",
		"&sheet=Bench&header_row=zero": "header_row=zero",
	} {
		if r := b.post("results/nitrate?source=s"+params, buf.String()); r.status/100 != 4 || !strings.Contains(r.body, want) {
			t.Errorf("%s: got %d %.200s, want %s", params, r.status, r.body, want)
		}
	}
	const at = "results/nitrate?source=s&sheet=Bench&header_row=3&zone=Z"
	preview := b.post(at+"&preview=1", buf.String())
	if got := cells(t, preview); got != "n1|2026-03-02T09:30:00|10.30|'=not a formula|PREVIEW|s/n1|2026-03-02T09:30:00Z|10.30|not stored; would be stored, if nothing else is stored under this id; columns not read: note" || b.stored("nitrate") != nil {
		t.Errorf("preview: %s, stored %q", got, b.stored("nitrate"))
	}
	if r := b.post(at, buf.String()); r.status != 200 || !strings.HasPrefix(cells(t, r), "n1|2026-03-02T09:30:00|10.30|'=not a formula|ACCEPTED|CLEAR||1|") {
		t.Errorf("posting: %d %s", r.status, cells(t, r))
	}
	want := []string{"n1 2026-03-02T09:30:00Z 10.30", "007 2026-03-02T10:30:00Z -0.012", "n3 2026-03-02T11:30:00Z <0.05"}
	if got := b.stored("nitrate"); strings.Join(got, ",") != strings.Join(want, ",") {
		t.Errorf("stored %q, want %q", got, want)
	}
	again := b.post(at, buf.String())
	if again.status != 200 || !strings.Contains(cells(t, again), "DUPLICATE") {
		t.Errorf("again: %d %s", again.status, again.body)
	}
	back := b.post("results/nitrate?source=s&sheet=Results&zone=Z", again.body)
	if back.status != 200 || !strings.Contains(cells(t, back), "DUPLICATE") || len(b.stored("nitrate")) != 3 {
		t.Errorf("what came back, posted: %d %s", back.status, back.body)
	}
	if r := b.post("results/nitrate?source=s", "PK\x03\x04 no workbook at all"); r.status != 400 || !strings.Contains(r.body, "cannot be read") {
		t.Errorf("a broken workbook: %d %s", r.status, r.body)
	}
}

// cells gives the first row under the header of a workbook, as shown.
func cells(t *testing.T, r reply) string {
	t.Helper()
	if r.header.Get("Content-Type") != book.ContentType {
		return r.body
	}
	f, err := excelize.OpenReader(strings.NewReader(r.body))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := f.GetRows("Results")
	if err != nil || len(rows) < 2 {
		t.Fatal(rows, err)
	}
	return strings.Join(rows[1], "|")
}
