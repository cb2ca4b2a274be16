package server_test

import (
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"testing"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
)

// rulesVersion puts rules of the test's own in force.
func (b *bench) rulesVersion(chart string, rules ...*pb.RuleSpec) {
	b.tb.Helper()
	centre, sigma := 10.0, 0.5
	limits := pb.NewLimitServiceClient(b.conn)
	p, err := limits.ProposeVersion(b.as("author"), &pb.ProposeVersionRequest{Chart: chart, RequestId: "p-" + chart, Centre: &centre, ProcessSigma: &sigma,
		EffectiveFrom: stamp("2020-01-01T00:00:00Z"), Reason: "reference value", LocationRules: &pb.TraceRules{Rules: rules}})
	b.must(err)
	_, err = limits.ApproveVersion(b.as("approver"), &pb.ApproveVersionRequest{Chart: chart, Version: p.Version.Number, RequestId: "a-" + chart, Digest: p.Version.Digest})
	b.must(err)
}

// agrees asks for a verdict, posts the same value and compares standing and rules.
func (b *bench) agrees(chart string, i int, value string) {
	b.tb.Helper()
	said := strings.Split(b.get("verdict/"+chart+"?value="+url.PathEscape(value)), "; ")
	r := b.post("results/"+chart+"?source=s", fmt.Sprintf("id,time,value\nn%d,2026-03-02T09:%02d:00Z,%s\n", i, i, value))
	posted := strings.Split(strings.Split(r.body, "\n")[1], ",")
	if r.status != 200 || said[1] != posted[4] || (posted[5] != "") != (strings.Contains(strings.Join(said, ";"), "rules ")) {
		b.tb.Errorf("%s, point %d, %s: the sheet said %q, posting %q", chart, i, value, said, posted)
	}
}

// TestRulesThatRememberTheirSegment compares EWMA and CUSUM as the sheet says them with what posting says, along a slow drift
// that no single point shows.
func TestRulesThatRememberTheirSegment(t *testing.T) {
	b := newBench(t, server.Options{})
	for name, rule := range map[string]*pb.RuleSpec{
		"ewma":  {Id: "e", Consequence: pb.Consequence_CONSEQUENCE_ACT, Rule: &pb.RuleSpec_Ewma_{Ewma: &pb.RuleSpec_Ewma{Lambda: 0.1, Limit: 2.7}}},
		"cusum": {Id: "c", Consequence: pb.Consequence_CONSEQUENCE_ACT, Rule: &pb.RuleSpec_Cusum_{Cusum: &pb.RuleSpec_Cusum{K: 0.5, H: 4}}},
	} {
		b.chart(dialectChart(name))
		b.rulesVersion(name, rule)
		for i := range 24 {
			b.agrees(name, i, fmt.Sprintf("%.2f", 10+0.02*float64(i)+0.1*float64(i%3)))
		}
		if got := b.get("signals/" + name); got == "0" {
			t.Errorf("%s: the drift gave no signal, so that nothing was compared", name)
		}
	}
	b.chart(dialectChart("head"))
	b.rulesVersion("head", &pb.RuleSpec{Id: "h", Consequence: pb.Consequence_CONSEQUENCE_ACT, Rule: &pb.RuleSpec_Cusum_{Cusum: &pb.RuleSpec_Cusum{K: 0.5, H: 4, HeadStart: 2}}})
	for i := range 24 { // a sum that begins at 2 is over 4 after five points half a sigma above the reference value
		b.agrees("head", i, fmt.Sprintf("%.2f", 10.5-0.1*float64(i%2)))
	}
	// From 2, five points at one sigma add 0.5 each: 4.5 is over 4. From 0 it takes nine.
	b.chart(dialectChart("head-2"))
	b.rulesVersion("head-2", &pb.RuleSpec{Id: "h", Consequence: pb.Consequence_CONSEQUENCE_ACT, Rule: &pb.RuleSpec_Cusum_{Cusum: &pb.RuleSpec_Cusum{K: 0.5, H: 4, HeadStart: 2}}})
	for values, want := range map[string]string{"10.5;10.5;10.5;10.5": "not recorded; CLEAR;", "10.5;10.5;10.5;10.5;10.5": "not recorded; ACT; points CLEAR CLEAR CLEAR CLEAR ACT; rules h upper;"} {
		if got := b.get("verdict/head-2?values=" + values); !strings.HasPrefix(got, want) {
			t.Errorf("a head start, %s: %s", values, got)
		}
	}
	if got := b.get("verdict/head-2?values=10.5;10.5;10.5;10.5;10.5&alone=1"); !strings.HasPrefix(got, "not recorded; CLEAR;") {
		t.Errorf("alone there is no head start: %s", got)
	}
}

// TestBoundsAreLookedBackOn posts a greater-than result that is beyond the line, and finds the next point judged after it.
func TestBoundsAreLookedBackOn(t *testing.T) {
	b := newBench(t, server.Options{})
	b.post("results/nitrate?source=s", "id,time,value\nn1,2026-03-01T09:00:00Z,10.1\nn2,2026-03-01T10:00:00Z,>11.6\nn3,2026-03-01T11:00:00Z,10.2\n")
	// Two of three beyond two sigma: the bound above 11.6 is one of them.
	want := "not recorded; ACT; rules western-electric-1956/2 upper; version 1; track HOLD; after the result of 2026-03-01T11:00:00Z"
	if got := b.get("verdict/nitrate?value=11.2"); got != want {
		t.Errorf("got %s, want %s", got, want)
	}
	for i, value := range []string{">11.2", "<10", "10.4", "<8.4", "> 9", "11.1"} {
		b.agrees("nitrate", 20+i, value)
	}
}

func TestLotsThatAreTracks(t *testing.T) {
	b := newBench(t, server.Options{})
	b.chart(&pb.Chart{Name: "lots", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "mg/L", LotsAreTracks: true})
	for _, lot := range []string{"A 1", "B"} {
		if _, err := pb.NewChartServiceClient(b.conn).StartLot(b.as("author"), &pb.StartLotRequest{Chart: "lots", Lot: lot, RequestId: "lot-" + lot}); err != nil {
			t.Fatal(err)
		}
	}
	b.version("lots", "A 1", "2020-01-01T00:00:00Z", 10, 0.5, "western-electric-1956")
	b.version("lots", "B", "2020-01-01T00:00:00Z", 20, 0.5, "western-electric-1956")
	if r := b.post("results/lots?source=s&lot=B", "id,time,value\nn1,2026-03-02T09:00:00Z,30\n"); r.status != 200 {
		t.Fatal(r.status, r.body)
	}
	for target, want := range map[string]string{
		"limit/lots/centre?lot=A%201":       "10",
		"limit/lots/centre?lot=B":           "20",
		"limit/lots/centre?lot=C":           "refused: ",
		"limit/lots/centre?lot=B&version=1": `refused: version 1 of chart "lots" is for lot "A 1", not "B"`,
		"state/lots":                        `refused: every lot of chart "lots" is a track of its own; say which`,
		"state/lots?lot=B":                  "HOLD",
		"state/lots?lot=A%201":              "CLEAR",
		"signals/lots":                      "1",
		"signals/lots?lot=A%201":            "0",
		"verdict/lots?lot=A%201&value=10.1": "not recorded; CLEAR; version 1; track CLEAR; after no stored result",
		"verdict/lots?lot=B&value=20":       "not recorded; CLEAR; version 2; track HOLD; after the result of 2026-03-02T09:00:00Z",
		"verdict/lots?value=20":             "refused: every lot",
		"batch?lot=B&keys=lots/centre":      "key,value,version,note\r\nlots/centre,20,2,\r\n",
		"limits.tsv?label=site:nowhere":     "chart\t",
	} {
		got := b.get(target)
		begins := strings.HasPrefix(want, "refused: ") || strings.HasSuffix(want, "\t")
		if got != want && !(begins && strings.HasPrefix(got, want)) {
			t.Errorf("%s: got %q, want %q", target, got, want)
		}
	}
}

// TestSubgroups judges and posts results of several readings.
func TestSubgroups(t *testing.T) {
	b := newBench(t, server.Options{})
	b.chart(&pb.Chart{Name: "means", Kind: pb.ChartKind_CHART_KIND_XBAR_R, SubgroupSize: 3, Unit: "mg/L"})
	b.version("means", "", "2020-01-01T00:00:00Z", 10, 0.5, "western-electric-1956")
	// Sigma of a mean of three is 0.5/√3 = 0.289: 10.9 is 3.1 of it from 10, a mean of two at 10.9 only 2.5.
	for target, want := range map[string]string{
		"verdict/means?value=10.8;10.9;11":             "not recorded; STOP; rules western-electric-1956/1 upper;",
		"verdict/means?value=10,8;10,9;11":             "not recorded; STOP;",
		"verdict/means?value=10.8;11":                  "not recorded; CLEAR;",
		"verdict/means?values=10;10;10.1|10.8;10.9;11": "not recorded; STOP; points CLEAR STOP;",
		"verdict/means?value=10;10;10;10":              "refused: ",
	} {
		if got := b.get(target); !strings.HasPrefix(got, want) {
			t.Errorf("%s: got %s, want %s", target, got, want)
		}
	}
	r := b.ask("reader", http.MethodPost, "judge/means", "reading 2\treading 1\treading 3\n11\t10.8\t10.9\n10\t10.1\t\n")
	if r.status != 200 || !strings.Contains(r.body, "\n11\t10.8\t10.9\tSTOP\twestern-electric-1956/1 upper\t1\t") || !strings.Contains(r.body, "\n10\t10.1\t\tCLEAR\t") {
		t.Errorf("judging: %d\n%s", r.status, r.body)
	}
	r = b.post("results/means?source=s&values=b,a,c", "id\ttime\ta\tb\tc\nn1\t2026-03-02T09:00:00Z\t10.10\t10\t9,9\n")
	if r.status != 400 || !strings.Contains(r.body, "decimal comma") {
		t.Errorf("two decimals: %d %s", r.status, r.body)
	}
	r = b.post("results/means?source=s&values=b,a,c", "id\ttime\ta\tb\tc\nn1\t2026-03-02T09:00:00Z\t10.10\t10\t9.9\n")
	if got := b.stored("means"); r.status != 200 || len(got) != 1 || got[0] != "n1 2026-03-02T09:00:00Z 10 10.10 9.9" {
		t.Errorf("posting: %d %s %q", r.status, r.body, got)
	}
}
