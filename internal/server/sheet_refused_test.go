package server_test

import (
	"bytes"
	"fmt"
	"net/http"
	"strings"
	"testing"
	"time"

	"github.com/xuri/excelize/v2"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
)

// TestColumnsThatMayBothBeIt posts blocks whose columns of readings are not clear, and those that are.
func TestColumnsThatMayBothBeIt(t *testing.T) {
	b := newBench(t, server.Options{})
	b.chart(&pb.Chart{Name: "pairs", Kind: pb.ChartKind_CHART_KIND_XBAR_R, SubgroupSize: 2, Unit: "mg/L"})
	for header, want := range map[string]string{
		"value\tresult":          "columns value and result may both be it; say values=",
		"result\tvalue":          "columns result and value may both be it; say values=",
		"reading_1\tvalue_1":     "columns reading_1 and value_1 may both be it; say values=",
		"reading_1\tvalue_2":     "columns reading_1 and value_2 may both be it; say values=",
		"value 1\tvalue_01":      "columns value 1 and value_01 may both be it; say values=",
		"value\tvalue_1":         "columns value and value_1 may both be it; say values=",
		"value\tvalues":          "columns value and values may both be it; say values=",
		"value\tnonconforming":   "columns value and nonconforming may both be it; say values=",
		"value\tvalue 2":         "10.1 99.5",
		"Reading_2\treading_1":   "99.5 10.1",
		"results 1\tresult 2":    "10.1 99.5",
		"value_1\tvalue_2\tnote": "10.1 99.5",
	} {
		block := "id\ttime\t" + header + "\nn1\t2026-03-02T09:00:00Z\t10.1\t99.5" + strings.Repeat("\t", strings.Count(header, "\t")-1) + "\n"
		for _, target := range []string{"results/pairs?source=s&preview=1", "judge/nitrate?alone=1"} {
			r := b.post(target, block)
			refused := strings.HasPrefix(want, "columns")
			if refused && (r.status != 400 || r.body != want) || !refused && strings.HasPrefix(target, "results") && !strings.Contains(r.body, "\t"+want+"\t") {
				t.Errorf("%s, %s: got %d %s, want %s", target, header, r.status, r.body, want)
			}
		}
		if r := b.post("judge/nitrate?alone=1&values="+strings.Split(strings.ReplaceAll(header, " ", "%20"), "\t")[0], block); r.status != 200 {
			t.Errorf("%s, said: got %d %s", header, r.status, r.body)
		}
	}
}

// TestRowsThatContradictTheAddress judges and posts rows that say another chart, lot, material or unit.
func TestRowsThatContradictTheAddress(t *testing.T) {
	b := newBench(t, server.Options{})
	b.kinds()
	b.chart(&pb.Chart{Name: "lots", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "mg/L", LotsAreTracks: true})
	for _, lot := range []string{"A", "B"} {
		_, err := pb.NewChartServiceClient(b.conn).StartLot(b.as("author"), &pb.StartLotRequest{Chart: "lots", Lot: lot, RequestId: "lot-" + lot})
		b.must(err)
	}
	b.version("lots", "A", "2020-01-01T00:00:00Z", 10, 0.5, "western-electric-1956")
	for _, c := range []struct{ chart, params, column, bad, good, want string }{
		{"nitrate", "", "chart", "lots", "nitrate", `"lots": the address says chart "nitrate"`},
		{"lots", "&lot=A", "lot", "B", "A", `"B": the address says lot=A`},
		{"lots", "&lot=A", "Lot", "B", "", `"B": the address says lot=A`},
		{"lead", "&material=low", "material", "high", "low", `"high": the address says material=low`},
		{"nitrate", "", "unit", "ug/L", "mg/L", `"ug/L": chart "nitrate" is in "mg/L"`},
	} {
		block := func(second string) string {
			return fmt.Sprintf("id\ttime\tvalue\t%s\nn1\t2026-03-02T09:00:00Z\t10.1\t%s\nn2\t2026-03-02T10:00:00Z\t10.2\t%s\n", c.column, c.good, second)
		}
		want := "row 3, column " + strings.ToLower(c.column) + ": " + c.want
		for target, status := range map[string]int{"judge/" + c.chart + "?alone=1" + c.params: 400, "results/" + c.chart + "?source=s" + c.params: 422} {
			if r := b.post(target, block(c.bad)); r.status != status || !strings.Contains(r.body, want) {
				t.Errorf("%s: got %d %s, want %d %s", target, r.status, r.body, status, want)
			}
			if r := b.post(target, block(c.good)); r.status != 200 {
				t.Errorf("%s, %q: got %d %s", target, c.good, r.status, r.body)
			}
		}
	}
	got, err := pb.NewEvaluationServiceClient(b.conn).ListResults(b.as("reader"), &pb.ListResultsRequest{Chart: "lots", Lot: "A"})
	if b.must(err); len(got.Results) != 2 {
		t.Errorf("a blank lot beside lot=A: stored %v", got.Results)
	}
}

// TestRolesInAJudgedBlock judges rows that are no points between points, which no rule may count.
func TestRolesInAJudgedBlock(t *testing.T) {
	b := newBench(t, server.Options{})
	block := "role\tvoided\tvalue\n\tno\t12\nREPEAT\tno\t12.5\nROUTINE\tyes\t12.5\nsetup\t\t10\nOVERLAP\t\t10.1\n"
	r := b.ask("reader", http.MethodPost, "judge/nitrate?alone=1", block)
	want := []string{
		"\tno\t12\tSTOP\twestern-electric-1956/1 upper\t1\tnot recorded; judged alone",
		"REPEAT\tno\t12.5\tNOT_JUDGED\t\t\tnot recorded; a REPEAT is no point",
		"ROUTINE\tyes\t12.5\tNOT_JUDGED\t\t\tnot recorded; the row is voided and no point",
		"setup\t\t10\tCLEAR\t\t1\tnot recorded; judged alone; role SETUP, judged as any point",
		"OVERLAP\t\t10.1\tCLEAR\t\t1\tnot recorded; judged alone; role OVERLAP, judged as any point",
	}
	if lines := strings.Split(strings.TrimSpace(r.body), "\n"); r.status != 200 || strings.Join(lines[1:], "\n") != strings.Join(want, "\n") {
		t.Errorf("got %d\n%s", r.status, r.body)
	}
	// Two of three beyond two sigma, were the repeat a point.
	r = b.ask("reader", http.MethodPost, "judge/nitrate?alone=1", "role\tvalue\n\t11.2\nREPEAT\t11.2\n\t10\n")
	if r.status != 200 || strings.Contains(r.body, "western-electric-1956/2") {
		t.Errorf("a repeat that counts: %d %s", r.status, r.body)
	}
	if r = b.ask("reader", http.MethodPost, "judge/nitrate", "role\tvalue\nREPEAT\t11.2\n\tten\n"); r.status != 400 || !strings.HasPrefix(r.body, "row 3, column value: ") {
		t.Errorf("a bad row after a repeat: %d %s", r.status, r.body)
	}
	if r = b.ask("reader", http.MethodPost, "judge/nitrate", "role\tinspected\tvalue\nREPEAT\t\t11.2\n\t3\t1\n"); r.status != 400 || !strings.HasPrefix(r.body, "row 3, column value: count is given") {
		t.Errorf("a row that the service refuses after a repeat: %d %s", r.status, r.body)
	}
}

// TestVoidedRowsAreNotPostedAgain posts an export in which one result is voided.
func TestVoidedRowsAreNotPostedAgain(t *testing.T) {
	b := newBench(t, server.Options{})
	b.chart(dialectChart("other"))
	if r := b.post("results/nitrate?source=s", "id,time,value\nn1,2026-03-02T09:00:00Z,10.1\nn2,2026-03-02T10:00:00Z,10.2\n"); r.status != 200 {
		t.Fatal(r.body)
	}
	results := pb.NewEvaluationServiceClient(b.conn)
	asked, err := results.VoidResult(b.as("poster"), &pb.VoidResultRequest{Chart: "nitrate", Source: "s", SourceId: "n2", ExpectedRevision: 1, RequestId: "v", ReasonCode: "MIX_UP", Reason: "mixed up"})
	b.must(err)
	_, err = results.ConfirmRequest(b.as("approver"), &pb.ConfirmRequestRequest{Change: asked.Request.Id, RequestId: "c", Decision: pb.Decision_DECISION_CONFIRM, Reason: "mixed up"})
	b.must(err)
	exported := strings.ReplaceAll(b.get("results/nitrate.csv"), "\nnitrate,", "\nother,")
	if r := b.post("results/other", exported); r.status != 422 || !strings.Contains(r.body, "nothing stored: row 3, column voided: says that the result is voided") {
		t.Errorf("got %d %s", r.status, r.body)
	}
	r := b.post("results/other?all_or_nothing=0", exported)
	if got := b.stored("other"); r.status != 200 || len(got) != 1 || !strings.HasPrefix(got[0], "n1 ") {
		t.Errorf("the good rows: %d %s, stored %q", r.status, r.body, got)
	}
	if r := b.post("results/other?source=s", "id,time,value,voided\nx,2026-03-02T09:00:00Z,1,perhaps\n"); r.status != 422 || !strings.Contains(r.body, `row 2, column voided: "perhaps": want yes or no`) {
		t.Errorf("got %d %s", r.status, r.body)
	}
}

// TestCountsThatMayBeThousands gives counts with three digits after their mark, in every dialect and in addresses.
func TestCountsThatMayBeThousands(t *testing.T) {
	b := newBench(t, server.Options{})
	b.kinds()
	const doubt = `"1.000" may be 1.000 or 1000; a count has no decimal; write it without its mark, or say decimal=point or decimal=comma`
	for _, d := range []string{"\t", ",", ";"} {
		block := strings.ReplaceAll("id|time|nonconforming|inspected\nn1|2026-03-02T09:00:00Z|0|1.000\n", "|", d)
		for _, target := range []string{"results/plates?source=s", "results/plates?source=s&preview=1", "judge/plates?alone=1"} {
			if r := b.post(target, block); r.status != 400 || r.body != "row 2, column inspected: "+doubt {
				t.Errorf("%s %q: got %d %s", target, d, r.status, r.body)
			}
			if r := b.post(target+"&inspected=1.000", strings.Replace(block, d+"inspected", "", 1)); r.status != 400 {
				t.Errorf("%s %q in the address: got %d %s", target, d, r.status, r.body)
			}
		}
		block = strings.ReplaceAll("nonconforming|inspected\n1.000|2000\n", "|", d)
		if r := b.post("judge/plates?alone=1", block); r.status != 400 || r.body != "row 2, column nonconforming: "+doubt {
			t.Errorf("%q: got %d %s", d, r.status, r.body)
		}
		if r := b.post("judge/plates?alone=1&decimal=point", block); r.status != 200 || !strings.Contains(r.body, d+"2000"+d+"CLEAR"+d) {
			t.Errorf("%q, said: got %d %s", d, r.status, r.body)
		}
	}
	if r := b.post("results/plates?source=s&preview=1&inspected=1.000", "id\ttime\tvalue\nn1\t2026-03-02T09:00:00Z\t0\n"); r.status != 400 || r.body != doubt {
		t.Errorf("inspected= of a block: got %d %s", r.status, r.body)
	}
	for target, want := range map[string]string{
		"verdict/plates?value=0&inspected=1.000":               "refused: " + doubt,
		"verdict/plates?value=1.000&inspected=2000":            "refused: " + doubt,
		"verdict/plates?value=4&inspected=1.000&decimal=point": "refused: nonconforming 4: more than the 1 items inspected",
		"verdict/nitrate?value=9.875":                          "not recorded; CLEAR; version 1; track CLEAR; after no stored result",
	} {
		if got := b.get(target); got != want {
			t.Errorf("%s: got %s, want %s", target, got, want)
		}
	}
	for body, want := range map[string]string{"value\n1.234\n": `row 2, column value: "1.234" may be 1.234 or 1234`, "id\tvalue\na\t1,234\nb\tn/a, late\n": `row 2, column value: "1,234" may be`} {
		if r := b.post("judge/nitrate", body); r.status != 400 || !strings.HasPrefix(r.body, want) {
			t.Errorf("%q: got %d %s, want %s", body, r.status, r.body, want)
		}
	}
}

// TestAPreviewRefusesWhatPostingDoes sends the same block to both and compares.
func TestAPreviewRefusesWhatPostingDoes(t *testing.T) {
	b := newBench(t, server.Options{})
	b.kinds()
	b.chart(&pb.Chart{Name: "np", Kind: pb.ChartKind_CHART_KIND_NP, SubgroupSize: 50, Unit: "1"})
	const h, at = "id\ttime\tvalue\tinspected\n", "\t2026-03-02T09:00:00Z\t"
	late := time.Now().Add(25 * time.Hour).UTC().Format(time.RFC3339)
	for _, c := range []struct{ chart, body, where string }{
		{"nitrate", "id\ttime\tvalue\nn1\t1899-12-31T00:00:00Z\t10\n", "row 2, column time: "},
		{"nitrate", "id\ttime\tvalue\nn1\t0001-01-01T00:00:00Z\t10\n", "row 2, column time: "},
		{"nitrate", "id\ttime\tvalue\nn1\t9999-01-01T00:00:00Z\t10\n", "row 2, column time: "},
		{"nitrate", "id\ttime\tvalue\nn1\t" + late + "\t10\n", "row 2, column time: "},
		{"plates", h + "n1" + at + "0.5\t100\n", "row 2, column value: nonconforming 0.5: want a whole number"},
		{"plates", h + "n1" + at + "101\t100\n", "row 2, column value: nonconforming 101: more than the 100 items"},
		{"plates", h + "n1" + at + "-1\t100\n", "row 2, column value: nonconforming -1: want a whole number"},
		{"plates", h + "n1" + at + "1\t10.5\n", "row 2, column inspected: inspected 10.5: want a whole number of items"},
		{"plates", h + "n1" + at + "0\t0\n", "row 2, column inspected: inspected 0: want at least 1e-09"},
		{"plates", h + "n1" + at + "1\t2000000000\n", "row 2, column inspected: inspected 2e+09: want at least"},
		{"plates", h + "n1" + at + "2000000000\t2000000000\n", "row 2, column value: nonconforming 2e+09: want a whole number from 0 to 1000000000"},
		{"np", h + "n1" + at + "1\t49\n", "row 2, column inspected: inspected 49: an np chart"},
		{"colonies", h + "n1" + at + "1\t2\n", "row 2, column inspected: inspected 2: a c chart"},
		{"nitrate", "id\ttime\tvalue\nn1" + at + "2e100\n", "row 2, column value: "},
		{"nitrate", "id\ttime\tvalue\trole\nn1" + at + "10\tREPEAT\n", "row 2, column repeat_of: is empty"},
		{"nitrate", "id\ttime\tvalue\trepeat_of\nn1" + at + "10\tn0\n", "row 2, column repeat_of: is set"},
		{"nitrate", "id\ttime\tvalue\nn\u200b1" + at + "10\n", "row 2, column id: "},
		{"nitrate", "id\ttime\tvalue\n" + strings.Repeat("n", 201) + at + "10\n", "row 2, column id: 201 bytes long, the limit is 200"},
		{"nitrate", "id\ttime\tvalue\tanalyst\nn1" + at + "10\t" + strings.Repeat("n", 201) + "\n", "row 2, column analyst: 201 bytes long, the limit is 200"},
		{"nitrate", "id\ttime\tvalue\nn1" + at + "10\nn1" + at + "11\n", "row 3, column id: row 2 has the same id with other content: measured 2026-03-02T09:00:00Z, readings 10"},
	} {
		preview := b.post("results/"+c.chart+"?source=s&preview=1", c.body)
		posted := b.post("results/"+c.chart+"?source=s", c.body)
		if preview.status != 200 || strings.Count(preview.body, "\tREFUSED\t") != 1 || !strings.Contains(preview.body, c.where) {
			t.Errorf("%s %q: the preview has %d %s, want %s", c.chart, c.body, preview.status, preview.body, c.where)
		}
		if posted.status != 422 || !strings.Contains(posted.body, c.where) {
			t.Errorf("%s %q: posting has %d %s, want %s", c.chart, c.body, posted.status, posted.body, c.where)
		}
	}
	for _, chart := range []string{"nitrate", "plates", "np", "colonies"} {
		if got := b.stored(chart); got != nil {
			t.Errorf("%s has stored %q", chart, got)
		}
	}
}

// TestAPreviewSaysWhatItIs looks at the words of a preview, and at who may have one.
func TestAPreviewSaysWhatItIs(t *testing.T) {
	b := newBench(t, server.Options{})
	const h, at = "id\ttime\tvalue\n", "\t2026-03-02T09:00:00Z\t"
	r := b.post("results/nitrate?source=s&preview=1", h+"n1"+at+"10\nn1\t2026-03-02T10:00:00+01:00\t10\nn2"+at+"11\n")
	for _, want := range []string{"\tPREVIEW\ts/n1\t2026-03-02T09:00:00Z\t10\tnot stored; would be stored, if nothing else is stored under this id\n",
		"\tDUPLICATE\ts/n1\t2026-03-02T10:00:00+01:00\t10\tnot stored; row 2 has the same id and content\n", "\tPREVIEW\ts/n2\t"} {
		if r.status != 200 || !strings.Contains(r.body, want) {
			t.Errorf("got %d %s, want %s", r.status, r.body, want)
		}
	}
	bad := h + "n1" + at + "10\nn2\t1800-01-01T00:00:00Z\t10\n"
	if r := b.post("results/nitrate?source=s&preview=1", bad); !strings.Contains(r.body, "\tPREVIEW\ts/n1\t2026-03-02T09:00:00Z\t10\tnot stored; would not be while another row is refused\n") {
		t.Errorf("beside a bad row: %s", r.body)
	}
	if r := b.post("results/nitrate?source=s&preview=1&all_or_nothing=0", bad); !strings.Contains(r.body, "\t10\tnot stored; would be stored, if") {
		t.Errorf("beside a bad row, the good ones: %s", r.body)
	}
	for _, params := range []string{"", "&preview=1"} {
		if r := b.ask("reader", http.MethodPost, "results/nitrate?source=s"+params, h+"n1"+at+"10\n"); r.status != 403 {
			t.Errorf("a reader, %q: %d %s", params, r.status, r.body)
		}
		if r := b.ask("unknown", http.MethodPost, "results/nitrate?source=s"+params, h+"n1"+at+"10\n"); r.status != 401 {
			t.Errorf("an unknown key, %q: %d %s", params, r.status, r.body)
		}
		if r := b.post("results/nitrate?source=s"+params, h+"\t\t\n \t\t\n"); r.status != 422 || r.body != "nothing stored: every row is blank" {
			t.Errorf("blank rows, %q: %d %s", params, r.status, r.body)
		}
	}
	if got := b.stored("nitrate"); got != nil {
		t.Errorf("previews stored %q", got)
	}
}

// TestAnIdWithTwoContentsNamesBothRows posts one by one; the conflict with what was stored before is told apart.
func TestAnIdWithTwoContentsNamesBothRows(t *testing.T) {
	b := newBench(t, server.Options{})
	const h, at = "id,time,value\n", ",2026-03-02T09:00:00Z,"
	r := b.post("results/nitrate?source=s&all_or_nothing=0", h+"n1"+at+"10\nn2"+at+"10\nn1"+at+"11\n")
	if r.status != 200 || !strings.Contains(r.body, "\nn1,2026-03-02T09:00:00Z,11,CONFLICT,") ||
		!strings.Contains(r.body, `"row 4, column id: row 2 has the same id with other content: measured 2026-03-02T09:00:00Z, readings 10"`) {
		t.Errorf("got %d %s", r.status, r.body)
	}
	r = b.post("results/nitrate?source=s", h+"n2"+at+"12\nn2"+at+"12\n")
	if r.status != 422 || strings.Count(r.body, "the id is stored with other content: measured 2026-03-02T09:00:00Z, readings 10") != 2 {
		t.Errorf("got %d %s", r.status, r.body)
	}
}

// TestColumnsNotReadAreNamed looks at the first row's note and at what is stored.
func TestColumnsNotReadAreNamed(t *testing.T) {
	b := newBench(t, server.Options{})
	block := "id\ttime\tvalue\tEinheit\tunit\t=x\tempty\n\t\t\t\t\t\t\nn1\t2026-03-02T09:00:00Z\t10\tug/L\tmg/L\t1\t\nn2\t2026-03-02T10:00:00Z\t10\t\t\t\t\n"
	for target, note := range map[string]string{"results/nitrate?source=s&preview=1": "under this id; ", "results/nitrate?source=s": "\t", "judge/nitrate?alone=1": "judged alone; "} {
		r := b.post(target, block)
		if r.status != 200 || strings.Count(r.body, "columns not read: Einheit, =x\n") != 1 || !strings.Contains(strings.Split(r.body, "\n")[2], note+"columns not read: ") {
			t.Errorf("%s: got %d %s", target, r.status, r.body)
		}
	}
	many := "value"
	for i := range 12 {
		many += fmt.Sprintf("\tc%d", i)
	}
	if r := b.post("judge/nitrate", many+"\n10"+strings.Repeat("\tx", 12)+"\n"); !strings.Contains(r.body, "c8, c9 and 2 more\n") {
		t.Errorf("got %s", r.body)
	}
	if got := b.get("results/nitrate.csv"); strings.Contains(got, "not read") || strings.Contains(got, "Einheit") {
		t.Errorf("stored: %s", got)
	}
}

// TestATokenIsNotSaidAgain puts a token, and the first part of one, wherever a path or a block takes a name.
func TestATokenIsNotSaidAgain(t *testing.T) {
	b := newBench(t, server.Options{})
	token := b.tokens["reader"]
	for _, text := range []string{token, token[:30]} {
		for _, target := range []string{"limit/" + text + "/centre", "limit/nitrate/" + text, "state/" + text, text, "limits." + text, "kit/" + text, "limit/nitrate/centre?lot=" + text,
			"batch?keys=" + text + "/centre," + text, "limit/nitrate/centre?" + text + "=1", "limit/nitrate/centre?version=" + text, "workbook/nitrate." + text} {
			if r := b.ask("reader", http.MethodGet, target, ""); strings.Contains(r.body, text[:20]) || !strings.Contains(r.body, "lim_(redacted)") && strings.Contains(r.body, "lim_") {
				t.Errorf("%s: got %d %s", target, r.status, r.body)
			}
		}
		for _, target := range []string{"judge/" + text, "judge/nitrate?values=" + text, text} {
			if r := b.ask("reader", http.MethodPost, target, "value\n10\n"); r.status == 200 || strings.Contains(r.body, text[:20]) {
				t.Errorf("%s: got %d %s", target, r.status, r.body)
			}
		}
	}
}

// TestAWorkbookKnowsItsDates says the other date system than the workbook's, and names the columns of readings beside one that
// is shown as a percentage.
func TestAWorkbookKnowsItsDates(t *testing.T) {
	b := newBench(t, server.Options{})
	f := excelize.NewFile()
	for cell, value := range map[string]any{"A1": "id", "B1": "time", "C1": "nitrate", "D1": "recovery", "A2": "n1", "B2": 46083.5, "C2": 10.25, "D2": 0.985} {
		b.must(f.SetCellValue("Sheet1", cell, value))
	}
	percent, err := f.NewStyle(&excelize.Style{NumFmt: 10})
	b.must(err)
	b.must(f.SetCellStyle("Sheet1", "D2", "D2", percent))
	var buf bytes.Buffer
	b.must(f.Write(&buf))
	const at = "results/nitrate?source=s&zone=Z&values=nitrate&dates=serial-"
	if r := b.post(at+"1904", buf.String()); r.status != 400 || !strings.Contains(r.body, "dates=serial-1904: the workbook's own dates are serial-1900") {
		t.Errorf("got %d %.200s", r.status, r.body)
	}
	if r := b.post(at+"1900", buf.String()); r.status != 200 || strings.Join(b.stored("nitrate"), ",") != "n1 2026-03-02T12:00:00Z 10.25" {
		t.Errorf("got %d %.200s, stored %q", r.status, r.body, b.stored("nitrate"))
	}
	if r := b.post(strings.Replace(at, "values=nitrate", "values=recovery", 1)+"1900", buf.String()); r.status != 400 || !strings.Contains(r.body, "cell D2") {
		t.Errorf("a percentage as a reading: got %d %.200s", r.status, r.body)
	}
}
