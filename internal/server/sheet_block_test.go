package server_test

import (
	"fmt"
	"net/http"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/server"
	"limitary/internal/sheet/block"
)

// control are the rows that are posted in every dialect.
var control = [][2]string{
	{"n1", "10.30"}, {"n2", "9.8"}, {"n3", "10"}, {"n4", "<11.0"}, {"n5", "12.125"}, {"n6", "-0.012"},
}

// written writes the control rows in a dialect; times are written by a function of the row.
func written(d block.Dialect, time func(i int) string) string {
	w := block.NewWriter(d)
	w.Row("id", "time", "value", "note")
	for i, r := range control {
		value := r[1]
		if d.Decimal == ',' {
			value = strings.Replace(value, ".", ",", 1)
		}
		w.Row(r[0], time(i), value, "a \"note\", with; everything\nin it")
	}
	return string(w.Bytes())
}

// TestTheSameRowsInAllDialectsStoreTheSame posts the control rows in every dialect and every way to write times, each to a
// chart of its own, and compares what is stored.
func TestTheSameRowsInAllDialectsStoreTheSame(t *testing.T) {
	b := newBench(t, server.Options{})
	iso := func(i int) string { return fmt.Sprintf("2026-03-02T%02d:30:00+00:00", 9+i) }
	var want []string
	for i, r := range control {
		want = append(want, r[0]+" "+strings.Replace(iso(i), "+00:00", "Z", 1)+" "+r[1])
	}
	n := 0
	check := func(name, body, params string) {
		t.Helper()
		n++
		chart := fmt.Sprintf("dialect-%d", n)
		b.chart(dialectChart(chart))
		r := b.post("results/"+chart+"?source=s"+params, body)
		if r.status != http.StatusOK {
			t.Fatalf("%s: %d %s", name, r.status, r.body)
		}
		if got := b.stored(chart); !reflect.DeepEqual(got, want) {
			t.Errorf("%s:\ngot  %q\nwant %q", name, got, want)
		}
	}
	for _, delimiter := range []byte{block.Tab, block.Comma, block.Semicolon} {
		for _, decimal := range []byte{'.', ','} {
			d := block.Dialect{Delimiter: delimiter, Decimal: decimal, CRLF: decimal == ',', BOM: delimiter != block.Tab}
			check(fmt.Sprintf("%+v", d), written(d, iso), "")
		}
	}
	tab := block.Dialect{Delimiter: block.Tab, Decimal: '.'}
	// 2 March 2026, 09:30 UTC is day 46083.3958333333 of the 1900 system and 1,462 days less of the 1904 system.
	check("serial 1900", written(tab, func(i int) string { return fmt.Sprintf("%.10f", 46083+(9.5+float64(i))/24) }), "&dates=serial-1900&zone=Z")
	check("serial 1904", written(tab, func(i int) string { return fmt.Sprintf("%.10f", 44621+(9.5+float64(i))/24) }), "&dates=serial-1904&zone=UTC")
	check("a zone", written(tab, func(i int) string { return fmt.Sprintf("2026-03-02 %02d:30", 9+i) }), "&zone=Europe/London")
	check("day first", written(tab, func(i int) string { return fmt.Sprintf("2.3.2026 %02d:30", 9+i) }), "&dates=dmy&zone=Europe/London")
	check("month first", written(tab, func(i int) string { return fmt.Sprintf("03/02/2026 %02d:30", 9+i) }), "&dates=mdy&zone=Europe/London")
}

func TestAmbiguityIsRefusedWithWhatToSay(t *testing.T) {
	b := newBench(t, server.Options{})
	for _, c := range []struct{ params, body, want string }{
		{"", "id,time,value\nx,2026-03-02T09:30:00Z,\"1,234\"\n", `row 2, column value: "1,234" may be 1.234 or 1234; say decimal=comma or decimal=point`},
		{"", "id\ttime\tvalue\nx\t03/04/2026\t1.5\n", `row 2, column time: "03/04/2026": day and month may be either; write ISO 8601 such as 2026-03-02T09:30:00+01:00, or say dates=dmy or dates=mdy`},
		{"", "id\ttime\tvalue\nx\t46083.4\t1.5\n", "say dates=serial-1900 or dates=serial-1904"},
		{"", "id\ttime\tvalue\nx\t2026-03-02 09:30\t1.5\n", "say zone="},
		{"", "id,time;value\nx,2026-03-02T09:30:00Z;1\n", "say delimiter=semicolon or delimiter=comma"},
		{"", "time,value\n2026-03-02T09:30:00Z,1\n", "say id="},
		{"", "id,value\nx,1.5\n", "say time="},
		{"", "id,time,nitrate\nx,2026-03-02T09:30:00Z,1.5\n", "say values="},
		{"&values=nitrat", "id,time,nitrate\nx,2026-03-02T09:30:00Z,1.5\n", "there are id, time, nitrate"},
		{"", "id,source_id,time,value\nx,y,2026-03-02T09:30:00Z,1.5\n", "say id="},
		{"", "id,time,value\n", "no rows"},
		{"", "", "empty"},
		{"", "id,time,value\nx,2026-03-02T09:30:00Z,10 mg/L\n", "row 2, column value"},
		{"", "id,time,value\nx,2026-03-02T09:30:00Z,\n", "row 2, column value: is empty"},
		{"", "id,time,value\n,2026-03-02T09:30:00Z,1\n", "row 2, column id: is empty"},
		{"", "id,time,value,position\nx,2026-03-02T09:30:00Z,1,first\n", "row 2, column position"},
		{"", "id,time,value,role\nx,2026-03-02T09:30:00Z,1,BEST\n", "row 2, column role"},
		{"", "id,time,value,unit\nx,2026-03-02T09:30:00Z,1,ug/L\n", `row 2, column unit: "ug/L"`},
		{"", "id,time,value,value 2\nx,2026-03-02T09:30:00Z,1,2\n", "row 2, column value: 2 readings: want 1 to 1"},
	} {
		r := b.post("results/nitrate?source=s"+c.params, c.body)
		if r.status/100 != 4 || !strings.Contains(r.body, c.want) {
			t.Errorf("%s %q:\ngot  %d %s\nwant %s", c.params, c.body, r.status, r.body, c.want)
		}
	}
	if r := b.post("results/nitrate", "id,time,value\nx,2026-03-02T09:30:00Z,1\n"); r.status != 400 || !strings.Contains(r.body, "say source=") {
		t.Errorf("no source: %d %s", r.status, r.body)
	}
	if got := b.stored("nitrate"); got != nil {
		t.Errorf("refused blocks stored %q", got)
	}
}

// TestABlockIsStoredWholeOrNotAtAll posts a block with one bad row, then the rows one by one, then the good block twice.
func TestABlockIsStoredWholeOrNotAtAll(t *testing.T) {
	b := newBench(t, server.Options{})
	block := func(bad string) string {
		return "id;time;value\r\nn1;2026-03-02T09:30:00Z;10,2\r\nn2;" + bad + "\r\nn3;2026-03-02T11:30:00Z;12,0\r\n"
	}
	for bad, want := range map[string]string{
		"2026-03-02T10:30:00Z;ten":  "nothing stored: row 3, column value: reading \"ten\"",
		"2026-03-02;10,1":           "nothing stored: row 3, column time: ",
		"2999-03-02T10:30:00Z;10,1": "nothing stored: row 3, column time: ",
	} {
		if r := b.post("results/nitrate?source=s", block(bad)); r.status != http.StatusUnprocessableEntity || !strings.HasPrefix(r.body, want) {
			t.Errorf("%s: got %d %s, want 422 %s", bad, r.status, r.body, want)
		}
	}
	if got := b.stored("nitrate"); got != nil {
		t.Fatalf("a refused block stored %q", got)
	}
	r := b.post("results/nitrate?source=s&all_or_nothing=0", block("2026-03-02T10:30:00Z;ten"))
	lines := strings.Split(r.body, "\r\n")
	if r.status != 200 || len(lines) != 5 || lines[1] != "n1;2026-03-02T09:30:00Z;10,2;ACCEPTED;CLEAR;;1;HOLD;" ||
		!strings.HasPrefix(lines[2], "n2;2026-03-02T10:30:00Z;ten;REFUSED;;;;;\"row 3, column value: ") ||
		!strings.HasPrefix(lines[3], "n3;2026-03-02T11:30:00Z;12,0;ACCEPTED;STOP;western-electric-1956/1 upper;1;HOLD;") {
		t.Errorf("one by one: got %d\n%s", r.status, r.body)
	}
	good := block("2026-03-02T10:30:00Z;10,1")
	if r = b.post("results/nitrate?source=s", good); r.status != 200 || strings.Count(r.body, ";DUPLICATE;") != 2 || strings.Count(r.body, ";ACCEPTED;") != 1 {
		t.Errorf("the good block: got %d\n%s", r.status, r.body)
	}
	first := b.stored("nitrate")
	// What came back is posted again, verdict columns and all.
	if r = b.post("results/nitrate?source=s", r.body); r.status != 200 || strings.Count(r.body, ";DUPLICATE;") != 3 || strings.Count(r.body, "limitary_outcome") != 1 {
		t.Errorf("the answer posted again: got %d\n%s", r.status, r.body)
	}
	if got := b.stored("nitrate"); !reflect.DeepEqual(got, first) || len(got) != 3 {
		t.Errorf("posting again made %q of %q", got, first)
	}
	other := strings.Replace(good, "10,1", "10,4", 1)
	if r = b.post("results/nitrate?source=s", other); r.status != 422 || !strings.Contains(r.body, "row 3, column id: the id is stored with other content: measured 2026-03-02T10:30:00Z, readings 10.1") {
		t.Errorf("other content: got %d %s", r.status, r.body)
	}
}

func TestJudgingABlockStoresNothing(t *testing.T) {
	b := newBench(t, server.Options{})
	for _, c := range []struct{ params, body, want string }{
		{"", "value\r\n10,1\r\n12,2\r\n\r\n9,9\r\n", "value\tlimitary_standing\tlimitary_rules\tlimitary_version\tlimitary_note\r\n" +
			"10,1\tCLEAR\t\t1\tnot recorded; after no stored result\r\n" +
			"12,2\tSTOP\twestern-electric-1956/1 upper\t1\tnot recorded; after no stored result\r\n" +
			"\tNOT_JUDGED (NO_RESULT)\t\t1\tnot recorded; after no stored result\r\n" +
			"9,9\tCLEAR\t\t1\tnot recorded; after no stored result\r\n"},
		{"?header=no&alone=1&decimal=comma", "10,1\n8,4\n", "10,1\tCLEAR\t\t1\tnot recorded; judged alone\n" +
			"8,4\tSTOP\twestern-electric-1956/1 lower\t1\tnot recorded; judged alone\n"},
		{"?values=result", "sample,result\n=cmd(),10.1\n", "sample,result,limitary_standing,limitary_rules,limitary_version,limitary_note\n'=cmd(),10.1,CLEAR,,1,not recorded; after no stored result; columns not read: sample\n"},
	} {
		r := b.ask("reader", http.MethodPost, "judge/nitrate"+c.params, c.body)
		if r.status != 200 || r.body != c.want {
			t.Errorf("%s %q:\ngot  %d %q\nwant %q", c.params, c.body, r.status, r.body, c.want)
		}
	}
	for body, want := range map[string]string{"value\tinspected\n10\t5\n": "row 2, column value: count is given, but a chart of kind individuals takes readings", "value,inspected\n,\n1,many\n": "row 3, column inspected", "value\n1.5\nx\n": "row 3, column value"} {
		if r := b.ask("reader", http.MethodPost, "judge/nitrate", body); r.status != 400 || !strings.Contains(r.body, want) {
			t.Errorf("%q: got %d %s, want %s", body, r.status, r.body, want)
		}
	}
	if got := b.stored("nitrate"); got != nil {
		t.Errorf("judging stored %q", got)
	}
}

func TestTooMuchIsRefusedByName(t *testing.T) {
	b := newBench(t, server.Options{})
	if r := b.post("results/nitrate?source=s", "value\n"+strings.Repeat("1\n", block.RowsMax+1)); r.status != 400 || !strings.Contains(r.body, "10000") {
		t.Errorf("rows: %d %s", r.status, r.body)
	}
	if r := b.post("results/nitrate?source=s", strings.Repeat("x", block.BytesMax+1)); r.status != 413 || !strings.Contains(r.body, "8388608") {
		t.Errorf("bytes: %d %s", r.status, r.body)
	}
	if r := b.ask("reader", http.MethodPost, "batch", strings.Repeat("nitrate/centre\n", 5001)); r.status != 400 || !strings.Contains(r.body, "5001 keys, the limit is 5000") {
		t.Errorf("keys: %d %s", r.status, r.body)
	}
	if r := b.ask("reader", http.MethodPost, "batch", strings.Repeat("nitrate/centre\n", 5000)); r.status != 200 || strings.Count(r.body, "nitrate/centre,10,1,\r\n") != 5000 {
		t.Errorf("5000 keys: %d", r.status)
	}
	if got := b.get("verdict/nitrate?values=" + strings.Repeat("12;", 499) + "12"); strings.Count(strings.Split(got, ";")[2], "STOP") != 500 {
		t.Errorf("500 values: %s", got)
	}
	prefix := "limit/nitrate/centre?lot="
	room := 2048 - len("https://"+b.server.HTTPAddress()+"/sheet/"+prefix)
	if got := b.get(prefix + long(room)); strings.Contains(got, "the address has") {
		t.Errorf("an address of 2048 characters: %s", got)
	}
	if got := b.get(prefix + long(room+1)); got != "refused: the address has 2049 characters, the limit is 2048; send fewer values, or POST them" {
		t.Errorf("an address of 2049 characters: %s", got)
	}
}
