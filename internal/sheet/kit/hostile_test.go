package kit_test

import (
	"fmt"
	"strings"
	"testing"

	pb "limitary/api/limitary/v1"
)

// hostile are texts that a spreadsheet program might run, with the sheet and the number that stand beside each.
var hostile = []string{`=HYPERLINK("http://127.0.0.1:1/x";"y")`, "+1+1", "-2+3", "@SUM(A1)", "\t=1+1", "\r=1+1", "=cmd|' /C calc'!A0", `=DDE("soffice";"x";"y")`,
	"'=1+1", "＝1+1", "=" + strings.Repeat("1+", 90) + "1"}

// prepareHostile stores the texts wherever the service takes text. Those with a control character are refused there, at the
// field; texts as long as a field takes are cut from the longest.
func prepareHostile(t *testing.T, r *running) {
	t.Helper()
	r.chart(&pb.Chart{Name: "hostile", Title: hostile[0], Unit: "+mg"}, -0.01, 0.002,
		&pb.Instructions{Look: hostile[1], Act: hostile[2], Stop: hostile[3]})
	post := pb.NewEvaluationServiceClient(r.conn)
	for i, text := range hostile {
		result := &pb.Result{Chart: "hostile", Source: text, SourceId: text, MeasuredAt: "2026-03-02T09:30:00Z", RunId: text, Lot: text, Material: text, Analyst: text,
			Instrument: text, Readings: []string{[]string{"-0.012", "-5", "-1.50", "0.30", "-1e-3"}[i%5]}}
		got, err := post.PostResults(r.as("poster"), &pb.PostResultsRequest{Results: []*pb.Result{result}, AllOrNothing: true})
		outcome := pb.PostOutcome_POST_OUTCOME_REFUSED
		if err == nil {
			outcome = got.Results[0].Outcome
		}
		if control := strings.ContainsAny(text, "\t\r"); control != (outcome != pb.PostOutcome_POST_OUTCOME_ACCEPTED) {
			t.Errorf("%q: %v, %v", text, got, err)
		}
	}
	closeHostile(t, r)
}

// closeHostile closes every signal of the chart with texts that are meant to run.
func closeHostile(t *testing.T, r *running) {
	t.Helper()
	signals := pb.NewSignalServiceClient(r.conn)
	open, err := signals.QuerySignals(r.as("reader"), &pb.QuerySignalsRequest{Chart: "hostile", PageSize: 100,
		Statuses: []pb.SignalStatus{pb.SignalStatus_SIGNAL_STATUS_OPEN}})
	r.must(err)
	seen := map[int64][]int64{}
	for _, s := range open.Signals {
		seen[s.Occurrence] = append(seen[s.Occurrence], s.Id)
	}
	if len(seen) == 0 {
		t.Fatal("the hostile results gave no signal")
	}
	for occurrence, ids := range seen {
		_, err := signals.CloseOccurrence(r.as("reviewer"), &pb.CloseOccurrenceRequest{Occurrence: occurrence, RequestId: fmt.Sprintf("close-%d", occurrence),
			Decision: hostile[3], Cause: hostile[0], Signals: ids})
		r.must(err)
	}
}

// delimited are the filter and its options for a file separated by a character: quotes, UTF-8, from line 1, and every cell
// looked at for what it might be, as a program does that opens a file by a double click.
func delimited(separator string) args {
	return args{"filter": "Text - txt - csv (StarCalc)", "options": separator + ",34,76,1,,0,false,true"}
}

// hostileTexts opens everything that is exported: no cell is a formula, and numbers are numbers.
func hostileTexts(t *testing.T, r *running, o *office, decimal string) {
	open := func(name string, data []byte, with args) []string {
		t.Helper()
		if with == nil {
			with = args{}
		}
		with["path"] = o.save(t, name, data)
		var sheets []string
		o.do(t, "open", with, &sheets)
		return sheets
	}
	// The same file with nothing done to its texts does run: the test could see a formula.
	sheets := open("alive.csv", []byte("a,b\n=1+1,-0.012\n"), delimited("44"))
	if c := o.one(t, sheets[0], "A2"); c.Kind != "FORMULA" {
		t.Errorf("a formula in a plain file is %+v: this test sees none", c)
	}
	o.do(t, "close", nil, nil)

	separator, query := "44", ""
	if decimal == "," {
		separator, query = "59", "?decimal=comma"
	}
	for _, target := range []string{"limits.csv", "results/hostile.csv", "verdicts/hostile.csv", "signals.csv"} {
		sheets := open(strings.ReplaceAll(target, "/", "-"), r.get(target+query), delimited(separator))
		dead(t, target, o.whole(t, sheets[0]))
		o.do(t, "close", nil, nil)
	}
	for _, name := range open("hostile.xlsx", r.get("workbook/hostile.xlsx"), nil) {
		dead(t, "workbook, "+name, o.whole(t, name))
	}
	o.do(t, "close", nil, nil)
}

// numberColumns are columns of the tables that hold numbers alone.
var numberColumns = map[string]bool{"reading_1": true, "centre": true, "sigma": true, "lower_action": true, "upper_action": true, "statistic": true, "version": true,
	"n": true, "process_sigma": true, "open_signals": true, "revision": true, "signal": true, "occurrence": true}

func dead(t *testing.T, what string, rows [][]cell) {
	t.Helper()
	numbers, texts, guarded := 0, 0, 0
	found := map[float64]bool{}
	for y, row := range rows {
		for x, c := range row {
			name := rows[0][x].Text
			switch {
			case c.Kind == "FORMULA":
				t.Errorf("%s: %s of row %d is alive: %s", what, name, y+1, c.Formula)
			case y > 0 && numberColumns[name] && c.Kind == "TEXT":
				t.Errorf("%s: %s of row %d is the text %q, want a number", what, name, y+1, c.Text)
			case y > 0 && numberColumns[name] && c.Kind == "VALUE":
				numbers++
				found[c.Number] = true
			case c.Kind == "TEXT" && c.Text != "" && strings.ContainsAny(c.Text[:1], "=+-@\t\r"):
				t.Errorf("%s: %s of row %d begins like a formula: %q", what, name, y+1, c.Text)
			case c.Kind == "TEXT":
				if texts++; strings.HasPrefix(c.Text, "'") {
					guarded++
				}
			}
		}
	}
	if about := strings.HasSuffix(what, "About"); texts < 5 || !about && (numbers < 5 || guarded < 2) {
		t.Errorf("%s: only %d texts, %d of them guarded, and %d numbers were looked at", what, texts, guarded, numbers)
	}
	if strings.Contains(strings.ToLower(what), "results") && (!found[-0.012] || !found[-1.5] || !found[0.3]) {
		t.Errorf("%s: the readings -0.012, -1.50 and 0.30 are not all there as numbers: %v", what, found)
	}
}
