package server_test

import (
	"net/http"
	"strconv"
	"strings"
	"testing"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
)

// TestOneCellReads asks for every kind of cell. The lines of version 1 by hand: 10 ± 3·0.5 and 10 ± 2·0.5; the moving range of
// two has the mean 1.128379·0.5 = 0.564 and the upper action line 3.6857·0.5 = 1.843 (D2 of 2 after the usual tables).
func TestOneCellReads(t *testing.T) {
	b := newBench(t, server.Options{})
	b.chart(&pb.Chart{Name: "empty", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "1"})
	for target, want := range map[string]string{
		"limit/nitrate/centre":                                      "10",
		"limit/nitrate/sigma":                                       "0.5",
		"limit/nitrate/process_sigma?decimal=comma":                 "0,5",
		"limit/nitrate/upper_action":                                "11.5",
		"limit/nitrate/lower_action?decimal=comma":                  "8,5",
		"limit/nitrate/upper_warning":                               "11",
		"limit/nitrate/lower_warning?version=1":                     "9",
		"limit/nitrate/version":                                     "1",
		"limit/nitrate/unit":                                        "mg/L",
		"limit/nitrate/kind":                                        "INDIVIDUALS",
		"limit/nitrate/rules":                                       "western-electric-1956",
		"limit/nitrate/effective_from":                              "2020-01-01T00:00:00Z",
		"state/nitrate":                                             "CLEAR",
		"signals/nitrate":                                           "0",
		"limit/nowhere/centre":                                      `refused: there is no chart "nowhere"`,
		"limit/nitrate/centre?version=9":                            "refused: ",
		"limit/nitrate/centre?version=x":                            "refused: version=x: want a version's number",
		"limit/nitrate/middle":                                      "refused: middle: is no number of a version; there are author, centre,",
		"limit/empty/centre":                                        `refused: no version is in force for chart "empty"`,
		"limit/nitrate/dispersion_lower_action":                     "refused: version 1 of chart \"nitrate\" has no dispersion_lower_action",
		"limit/nitrate/centre?decimal=dot":                          "refused: decimal=dot: want point or comma",
		"limit/nitrate/centre?page=2":                               "refused: page: is no parameter here; there are version, unit, material, lot, decimal",
		"verdict/nitrate?value=10.2":                                "not recorded; CLEAR; version 1; track CLEAR; after no stored result",
		"verdict/nitrate?value=11.6":                                "not recorded; STOP; rules western-electric-1956/1 upper; version 1; track CLEAR; after no stored result",
		"verdict/nitrate?value=8,4":                                 "not recorded; STOP; rules western-electric-1956/1 lower; version 1; track CLEAR; after no stored result",
		"verdict/nitrate?value=11,501&decimal=comma":                "not recorded; STOP; rules western-electric-1956/1 upper; version 1; track CLEAR; after no stored result",
		"verdict/nitrate?value=1,234":                               `refused: "1,234" may be 1.234 or 1234; say decimal=comma or decimal=point`,
		"verdict/nitrate?value=1,234&decimal=point":                 "refused: ",
		"verdict/nitrate?value=ten":                                 "refused: ",
		"verdict/nitrate?value=":                                    "refused: give value= for one result",
		"verdict/nitrate?value=%3C0.5":                              "not recorded; STOP; rules western-electric-1956/1 lower; version 1; track CLEAR; after no stored result",
		"verdict/nitrate?values=10;12;10":                           "not recorded; STOP; points CLEAR STOP CLEAR; rules western-electric-1956/1 upper; version 1; track CLEAR; after no stored result",
		"verdict/nitrate?values=10|12&alone=1&version=1":            "not recorded; STOP; points CLEAR STOP; rules western-electric-1956/1 upper; version 1; track CLEAR; judged alone",
		"verdict/nitrate?value=10&version=1":                        "refused: version=1: the stored track is judged by the version in force; add alone=1",
		"verdict/nitrate?value=10;11":                               "refused: ",
		"verdict/empty?value=10":                                    `refused: no version is in force for chart "empty"`,
		"verdict/nitrate?value=10&value=11":                         "refused: value: is given twice",
		"limit/nitrate/centre?lot=" + long(2048):                    "refused: the address has ",
		"verdict/nitrate?values=" + strings.Repeat("1;", 500) + "1": "refused: values=: 501 results, the limit is 500",
	} {
		r := b.ask("reader", http.MethodGet, target, "")
		if r.status != http.StatusOK || r.header.Get("Content-Type") != "text/plain; charset=utf-8" {
			t.Errorf("%.80s: got %d %s: %s", target, r.status, r.header.Get("Content-Type"), r.body)
		}
		whole := !strings.HasPrefix(want, "refused: ")
		if whole && r.body != want || !whole && !strings.HasPrefix(r.body, want) {
			t.Errorf("%.80s:\ngot  %s\nwant %s", target, r.body, want)
		}
	}
}

func long(n int) string { return strings.Repeat("x", n) }

func TestTheNumbersOfTheDispersionTrace(t *testing.T) {
	b := newBench(t, server.Options{})
	for name, want := range map[string]float64{"dispersion_centre": 1.128379 * 0.5, "dispersion_upper_action": (1.128379 + 3*0.852502) * 0.5} {
		got, err := strconv.ParseFloat(b.get("limit/nitrate/"+name), 64)
		if err != nil || got < want-0.0005 || got > want+0.0005 {
			t.Errorf("%s: got %v, %v, want %v to three decimals", name, got, err, want)
		}
	}
}

// TestFaultsHaveTheirStatus goes through what no cell should take for a value.
func TestFaultsHaveTheirStatus(t *testing.T) {
	b := newBench(t, server.Options{})
	for _, c := range []struct {
		as, method, target string
		want               int
		text               string
	}{
		{"", "GET", "limit/nitrate/centre", 401, "no key"},
		{"unknown", "GET", "limit/nitrate/centre", 401, ""},
		{"revoked", "GET", "limit/nitrate/centre", 401, ""},
		{"malformed", "GET", "limit/nitrate/centre", 401, "form"},
		{"reader", "POST", "results/nitrate?source=s", 403, "role"},
		{"reader", "GET", "nothing/here", 404, "nothing/here"},
		{"reader", "GET", "limit/nitrate", 404, ""},
		{"reader", "POST", "limit/nitrate/centre", 405, "GET, HEAD, OPTIONS"},
		{"reader", "GET", "judge/nitrate", 405, "POST, OPTIONS"},
		{"reader", "DELETE", "results/nitrate", 405, "POST"},
		{"reader", "GET", "limits.pdf", 404, "csv, tsv or xlsx"},
		{"reader", "GET", "results/nowhere.csv", 404, "nowhere"},
	} {
		r := b.ask(c.as, c.method, c.target, "id,time,value\n1,2026-01-01T00:00:00Z,10\n")
		if r.status != c.want || !strings.Contains(r.body, c.text) {
			t.Errorf("%s %s as %q: got %d %s, want %d and %q", c.method, c.target, c.as, r.status, r.body, c.want, c.text)
		}
	}
	if r := b.ask("ostley", "GET", "limit/nitrate/centre", ""); !strings.HasPrefix(r.body, "refused: ") {
		t.Errorf("a chart outside the key's labels: got %s", r.body)
	}
}

// TestTheNextPointIsThatOfTheTrack holds a value's verdict against that of the same value really posted, after a history with
// everything the judge looks back on: a pattern, a repeat, a void result's like, a break, and a version of other numbers.
func TestTheNextPointIsThatOfTheTrack(t *testing.T) {
	b := newBench(t, server.Options{})
	post := func(rows string) {
		t.Helper()
		if r := b.post("results/nitrate?source=s", "id,time,value,role,repeat_of\n"+rows); r.status != 200 {
			t.Fatal(r.status, r.body)
		}
	}
	agree := func(when, id, value, want string) {
		t.Helper()
		before := strings.Split(b.get("verdict/nitrate?value="+value), "; ")
		r := b.post("results/nitrate?source=s", "id,time,value\n"+id+","+value+"\n")
		if r.status != 200 {
			t.Fatal(r.status, r.body)
		}
		after := strings.Split(strings.TrimRight(strings.Split(r.body, "\n")[1], "\r"), ",")
		if before[1] != after[4] || !strings.Contains(strings.Join(before, "; "), want) {
			t.Errorf("%s: the sheet said %q, posting %q; want %q", when, before, after, want)
		}
	}
	post("a1,2026-01-01T08:00:00Z,10.6,,\na2,2026-01-01T09:00:00Z,10.2,,\na3,2026-01-01T10:00:00Z,10.6,,\n")
	post("a4,2026-01-01T11:00:00Z,9.0,REPEAT,a3\na5,2026-01-01T11:30:00Z,10.7,,\n")
	// With 10.6, four of five points are beyond one sigma, 10.5; the repeat at 9.0 is no point and breaks nothing.
	agree("a pattern across a repeat", "a6,2026-01-01T12:00:00Z", "10.6", "western-electric-1956/3 upper")
	if _, err := pb.NewChartServiceClient(b.conn).AddMark(b.as("author"), &pb.AddMarkRequest{Chart: "nitrate", RequestId: "m",
		Mark: &pb.Mark{Chart: "nitrate", At: stamp("2026-01-02T00:00:00Z"), Text: "new column", Break: true}}); err != nil {
		t.Fatal(err)
	}
	agree("after a break", "b1,2026-01-02T09:00:00Z", "10.6", "after the result of 2026-01-01T12:00:00Z")
	agree("after a break and a point", "b2,2026-01-02T10:00:00Z", "10.6", "after the result of 2026-01-02T09:00:00Z")
	b.version("nitrate", "", "2026-01-03T00:00:00Z", 10, 0.5, "western-electric-1956")
	agree("a version of the same numbers goes on", "b3,2026-01-03T10:00:00Z", "10.6", "after the result of 2026-01-02T10:00:00Z")
	b.version("nitrate", "", "2026-01-04T00:00:00Z", 10, 0.4, "western-electric-1956")
	agree("a version of other numbers begins anew", "b4,2026-01-04T10:00:00Z", "10.6", "after the result of 2026-01-03T10:00:00Z")
}
