package server_test

import (
	"fmt"
	"math"
	"net/http"
	"strconv"
	"strings"
	"testing"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
	"limitary/internal/sheet/kit"
)

// propose puts limits in force since 2020.
func (b *bench) propose(chart string, in *pb.ProposeVersionRequest) {
	b.tb.Helper()
	limits := pb.NewLimitServiceClient(b.conn)
	in.Chart, in.RequestId, in.EffectiveFrom, in.Reason = chart, "p-"+chart, stamp("2020-01-01T00:00:00Z"), "set-up"
	p, err := limits.ProposeVersion(b.as("author"), in)
	b.must(err)
	_, err = limits.ApproveVersion(b.as("approver"), &pb.ApproveVersionRequest{Chart: chart, Version: p.Version.Number, RequestId: "a-" + chart, Digest: p.Version.Digest})
	b.must(err)
}

// kinds adds a p chart "plates" of 4 in 100, a c chart "colonies" of 4, "turbidity" judged as logarithms around 0 with sigma 0.5,
// and the standardised "lead" of two materials.
func (b *bench) kinds() {
	b.tb.Helper()
	action := &pb.TraceRules{Rules: []*pb.RuleSpec{{Id: "action", Consequence: pb.Consequence_CONSEQUENCE_STOP,
		Rule: &pb.RuleSpec_BeyondLine_{BeyondLine: &pb.RuleSpec_BeyondLine{Line: pb.LineKind_LINE_KIND_ACTION}}}}}
	set, zero, one, four, half, places := &pb.TraceRules{RuleSet: "shewhart-1931"}, 0.0, 1.0, 4.0, 0.5, int32(4)
	for _, name := range []string{"plates", "plates-2"} {
		b.chart(&pb.Chart{Name: name, Kind: pb.ChartKind_CHART_KIND_P, Unit: "1"})
	}
	points := &pb.Points{}
	for range 10 {
		points.Points = append(points.Points, &pb.Point{Value: &pb.Point_Count{Count: &pb.Count{Nonconforming: 4, Inspected: 100}}})
	}
	b.propose("plates", &pb.ProposeVersionRequest{LocationRules: action, Basis: &pb.ProposeVersionRequest_Sent{Sent: &pb.SentBasis{Data: &pb.SentBasis_Points{Points: points}}}})
	b.chart(&pb.Chart{Name: "colonies", Kind: pb.ChartKind_CHART_KIND_C, Unit: "1"})
	b.propose("colonies", &pb.ProposeVersionRequest{LocationRules: action, Centre: &four})
	b.chart(&pb.Chart{Name: "turbidity", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "FNU"})
	b.propose("turbidity", &pb.ProposeVersionRequest{LocationRules: set, Centre: &zero, ProcessSigma: &half, PublishedDecimals: &places,
		Options: &pb.KindOptions{Transform: &pb.Transform{Kind: pb.TransformKind_TRANSFORM_KIND_LOG}}})
	b.chart(&pb.Chart{Name: "lead", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "ug/L", Standardised: true})
	b.propose("lead", &pb.ProposeVersionRequest{LocationRules: set, Centre: &zero, ProcessSigma: &one,
		Options: &pb.KindOptions{Levels: []*pb.Level{{Material: "low", Reference: 2, Sigma: 0.1}, {Material: "high", Reference: 20, Sigma: 0.8}}}})
}

// TestCellsOfEveryKind judges counts and materials. A Poisson count of mean 4 is 11 or more with probability 0.00284 and 12 or
// more with 0.00092 (closed form), so that 12 is the first beyond the action line at 0.00135.
func TestCellsOfEveryKind(t *testing.T) {
	b := newBench(t, server.Options{})
	b.kinds()
	for target, want := range map[string]string{
		"verdict/colonies?value=11&inspected=1":                       "not recorded; CLEAR; version 1;",
		"verdict/colonies?value=12&inspected=1":                       "not recorded; STOP; rules action upper;",
		"verdict/colonies?value=12&inspected=2":                       "refused: inspected 2: a c chart counts in one inspection unit",
		"verdict/colonies?value=11":                                   "refused: readings are given, but a chart of kind c takes counts; give the number inspected",
		"verdict/plates?value=3&inspected=100":                        "not recorded; CLEAR; version 1; track CLEAR;",
		"verdict/plates?values=3;30&inspected=100":                    "not recorded; STOP; points CLEAR STOP;",
		"verdict/plates?value=30&inspected=1000":                      "not recorded; CLEAR;",
		"verdict/plates?value=3.5&inspected=100":                      "refused: nonconforming 3.5: want a whole number",
		"verdict/plates?value=101&inspected=100":                      "refused: nonconforming 101: more than the 100",
		"verdict/plates?value=3&inspected=all":                        "refused: ",
		"verdict/nitrate?value=3&inspected=100":                       "refused: count is given, but a chart of kind individuals takes readings",
		"verdict/lead?value=22.5&material=high":                       "not recorded; STOP;",
		"verdict/lead?value=2.25&material=low":                        "not recorded; CLEAR;",
		"verdict/lead?value=2.25":                                     "not recorded; NOT_JUDGED (NO_SCALE);",
		"limit/lead/upper_action":                                     "3",
		"limit/lead/upper_action?unit=original&material=low":          "2.3",
		"limit/lead/upper_action?unit=original&material=high":         "22.4",
		"limit/lead/centre?unit=original&material=high&version=1":     "20",
		"limit/lead/upper_action?unit=original":                       "refused: material=: version 1 of chart \"lead\" has the levels low, high",
		"limit/lead/dispersion_lower_action?unit=original":            "refused: material=",
		"limit/turbidity/upper_action":                                "1.5",
		"limit/turbidity/centre?unit=original":                        "1",
		"limit/turbidity/dispersion_centre?unit=original":             "0.5642",
		"limit/turbidity/centre?unit=original&material=low":           "refused: material=low: chart \"turbidity\" is not standardised",
		"limit/turbidity/sigma?unit=original":                         "refused: unit=original: sigma is no place",
		"limit/turbidity/centre?unit=FNU":                             "refused: unit=FNU: want original",
		"limit/turbidity/centre?material=low":                         "refused: material=low: chooses the level",
		"limit/nitrate/upper_action?unit=original&decimal=comma":      "11,5",
		"limit/nitrate/dispersion_lower_action?unit=original":         "refused: version 1 of chart \"nitrate\" has no dispersion_lower_action",
		"limit/lead/dispersion_centre?unit=original&material=high":    "0.90", // 1.128·0.8
		"limit/turbidity/lower_action?unit=original&decimal=comma":    "0,2231",
		"limit/turbidity/upper_warning?unit=original&decimal=comma":   "2,718",
		"limit/turbidity/scale":                                       "LOG",
		"limit/turbidity/original_centre":                             "1",
		"limit/lead/scale":                                            "STANDARDISED",
		"verdict/turbidity?value=4.5":                                 "not recorded; STOP;",
		"verdict/turbidity?value=4.4":                                 "not recorded; CLEAR;",
		"verdict/turbidity?value=4.4&inspected=":                      "not recorded; CLEAR;",
		"verdict/turbidity?value=%3E4.5&alone=1":                      "not recorded; STOP;",
		"verdict/turbidity?value=4.5&alone=1&version=1&decimal=point": "not recorded; STOP;",
	} {
		if got := b.get(target); !strings.HasPrefix(got, want) {
			t.Errorf("%s: got %s, want %s", target, got, want)
		}
	}
	got, err := strconv.ParseFloat(b.get("limit/turbidity/upper_action?unit=original"), 64)
	if want := math.Exp(1.5); err != nil || math.Abs(got-want) > 1e-12*want {
		t.Errorf("the upper action line of turbidity: %v, %v, want %v", got, err, want)
	}
	table := b.get("limits.csv")
	if header, _, _ := strings.Cut(table, "\n"); !strings.Contains(header, ",scale,original_centre,") || !strings.Contains(table, ",LOG,1,0.2231") {
		t.Errorf("a table that does not say on which scale the limits of turbidity are:\n%s", table)
	}
}

// TestBlocksOfEveryKind posts counts and materials, exports them and reads back what was exported.
func TestBlocksOfEveryKind(t *testing.T) {
	b := newBench(t, server.Options{})
	b.kinds()
	block := "id;time;nonconforming;inspected\nn1;2026-03-02T09:30:00Z;3;100\nn2;2026-03-02T10:30:00Z;30;100\nn3;2026-03-02T11:30:00Z;0;50\n"
	if r := b.ask("reader", http.MethodPost, "judge/plates", block); r.status != 200 || !strings.Contains(r.body, ";30;100;STOP;action upper;1;") || !strings.Contains(r.body, ";0;50;CLEAR;") {
		t.Errorf("judging: %d %s", r.status, r.body)
	}
	if r := b.post("results/plates?source=s&preview=1", block); r.status != 200 || !strings.Contains(r.body, "30 of 100 inspected") {
		t.Errorf("preview: %d %s", r.status, r.body)
	}
	if r := b.post("results/plates?source=s", block); r.status != 200 || !strings.Contains(r.body, ";30;100;ACCEPTED;STOP;action upper;1;HOLD;") {
		t.Errorf("posting: %d %s", r.status, r.body)
	}
	exported := b.get("results/plates.csv")
	if !strings.Contains(exported, "measured_at_utc,nonconforming,inspected,unit") || !strings.Contains(exported, ",3,100,1,") {
		t.Errorf("exported: %s", exported)
	}
	if r := b.post("results/plates-2?time=measured_at", strings.ReplaceAll(exported, "\nplates,", "\nplates-2,")); r.status != 200 || b.get("results/plates-2.csv") == "" {
		t.Errorf("what was exported: %d %s", r.status, r.body)
	}
	first, _ := pb.NewEvaluationServiceClient(b.conn).ListResults(b.as("reader"), &pb.ListResultsRequest{Chart: "plates"})
	second, _ := pb.NewEvaluationServiceClient(b.conn).ListResults(b.as("reader"), &pb.ListResultsRequest{Chart: "plates-2"})
	for i, r := range first.GetResults() {
		if s := second.GetResults()[i].Result; fmt.Sprint(s.Count) != fmt.Sprint(r.Result.Count) || s.MeasuredAt != r.Result.MeasuredAt {
			t.Errorf("exported %v, read back %v", r.Result, s)
		}
	}
	for _, c := range []struct{ target, body, want string }{
		{"results/plates?source=s", "id,time,value\nx,2026-03-02T12:30:00Z,3\n", "row 2, column value: 1 given, but a chart of kind p takes a count; give the number inspected in a column inspected"},
		{"results/plates?source=s&preview=1", "id,time,value\nx,2026-03-02T12:30:00Z,3\n", "takes counts; give the number inspected"},
		{"results/plates?source=s", "id,time,value,inspected\nx,2026-03-02T12:30:00Z,3,2\n", "row 2, column value: nonconforming 3"},
		{"results/colonies?source=s", "id,time,value,inspected\nx,2026-03-02T12:30:00Z,3,2\n", "row 2, column inspected: inspected 2"},
		{"results/plates?source=s", "id,time,value,inspected\nx,2026-03-02T12:30:00Z,<3,100\n", "row 2, column value: \"<3\": a count is a number"},
		{"results/lead?source=s", "id,time,value\nx,2026-03-02T12:30:00Z,3\n", "row 2, column material: is empty"},
		{"results/lead?source=s&preview=1", "id,time,value\nx,2026-03-02T12:30:00Z,3\n", "is empty, and results of chart"},
		{"results/nitrate?source=s&preview=1", "id,time,value,inspected\nx,2026-03-02T12:30:00Z,3,4\n", "inspected: is given"},
	} {
		if r := b.post(c.target, c.body); r.status == 200 != strings.Contains(c.target, "preview") || !strings.Contains(r.body, c.want) {
			t.Errorf("%s: got %d %s, want %s", c.target, r.status, r.body, c.want)
		}
	}
	r := b.post("results/lead?source=s", "id,time,value,material\nn1,2026-03-02T09:30:00Z,2.1,low\nn2,2026-03-02T10:30:00Z,22.5,high\n")
	if r.status != 200 || !strings.Contains(r.body, "n2,2026-03-02T10:30:00Z,22.5,high,ACCEPTED,STOP,") {
		t.Errorf("materials: %d %s", r.status, r.body)
	}
	if r := b.ask("reader", http.MethodPost, "judge/lead?material=high", "value\n20.1\n22.5\n"); r.status != 200 || !strings.Contains(r.body, "22.5\tSTOP\t") {
		t.Errorf("one material for all: %d %s", r.status, r.body)
	}
}

// TestRefusalsAsText asks for a line that a macro can read where it cannot read the body of a refusal.
func TestRefusalsAsText(t *testing.T) {
	b := newBench(t, server.Options{})
	for _, c := range []struct {
		as, target, body string
		status           int
		want             string
	}{
		{"reader", "judge/nitrate?refusals=text", "value\nten\n", 200, "refused: row 2, column value: "},
		{"reader", "judge/nowhere?refusals=text", "value\n10\n", 200, "refused: there is no chart \"nowhere\""},
		{"reader", "judge/nitrate?page=1&refusals=text", "value\n10\n", 200, "refused: page: is no parameter here"},
		{"reader", "judge/nitrate?refusals=yes", "value\n10\n", 400, "refusals=yes: want text"},
		{"poster", "results/nitrate?source=s&refusals=text", "id,time,value\n1,2026-01-01T00:00:00Z,ten\n2,noon,10\n", 200, "refused: nothing stored: row 2, column value: "},
		{"reader", "results/nitrate?source=s&refusals=text", "id,time,value\n1,2026-01-01T00:00:00Z,10\n", 403, ""},
		{"unknown", "judge/nitrate?refusals=text", "value\n10\n", 401, ""},
		{"reader", "judge/nitrate?refusals=text", "value\n10\n", 200, "value\tlimitary_standing"},
	} {
		r := b.ask(c.as, http.MethodPost, c.target, c.body)
		if r.status != c.status || !strings.HasPrefix(r.body, c.want) || c.status == 200 && strings.HasPrefix(r.body, "refused") && strings.Contains(r.body, "\n") {
			t.Errorf("%s: got %d %q, want %d %q", c.target, r.status, r.body, c.status, c.want)
		}
	}
	if got := b.stored("nitrate"); got != nil {
		t.Errorf("refused blocks stored %q", got)
	}
}

// TestTheKitIsServed fetches every file of the kit without a key.
func TestTheKitIsServed(t *testing.T) {
	b := newBench(t, server.Options{})
	address := "http://" + b.server.HTTPAddress()
	for _, target := range []string{"kit", "kit/", "kit/" + kit.IndexName} {
		r := b.ask("", http.MethodGet, target, "")
		if r.status != 200 || r.header.Get("Content-Disposition") != "" {
			t.Errorf("%s: got %d %v", target, r.status, r.header)
		}
		for _, f := range kit.Files() {
			if f.Name != kit.IndexName && !strings.Contains(r.body, address+"/sheet/kit/"+f.Name+"\n") {
				t.Errorf("%s does not list %s", target, f.Name)
			}
		}
	}
	for _, f := range kit.Files() {
		r := b.ask("", http.MethodGet, "kit/"+f.Name, "")
		plain, err := f.Bytes(kit.Service)
		b.must(err)
		named := strings.Contains(r.body, address) == strings.Contains(string(plain), kit.Service)
		if r.status != 200 || r.header.Get("Content-Type") != f.ContentType || !named || strings.Contains(r.body, kit.Service) {
			t.Errorf("%s: got %d %s, names %s as it should: %t", f.Name, r.status, r.header.Get("Content-Type"), address, named)
		}
		if f.Name != kit.IndexName && r.header.Get("Content-Disposition") != `attachment; filename="`+f.Name+`"` {
			t.Errorf("%s: %v", f.Name, r.header)
		}
		if again := b.ask("", http.MethodGet, "kit/"+f.Name, "", "If-None-Match", r.header.Get("ETag")); again.status != http.StatusNotModified {
			t.Errorf("%s again: %d", f.Name, again.status)
		}
	}
	for target, want := range map[string]int{"kit/none.bas": 404, "kit/a/b": 404, "kitchen": 401, "kit?key=x": 200} {
		if r := b.ask("", http.MethodGet, target, ""); r.status != want {
			t.Errorf("%s: got %d %s, want %d", target, r.status, r.body, want)
		}
	}
	if r := b.ask("", http.MethodPost, "kit", ""); r.status != 401 {
		t.Errorf("POST: %d", r.status)
	}
	proxied := newBench(t, server.Options{BehindProxy: true})
	if r := proxied.ask("", http.MethodGet, "kit", ""); !strings.Contains(r.body, "https://"+proxied.server.HTTPAddress()+"/sheet/kit/") {
		t.Errorf("behind a proxy: %s", r.body)
	}
}

// TestPinnedVersionsStayOutOfSight reads a pinned version into memory with one key, and asks for it with another that must
// not see the chart, and again when nothing is in force.
func TestPinnedVersionsStayOutOfSight(t *testing.T) {
	b := newBench(t, server.Options{})
	for range 2 {
		if got := b.get("limit/nitrate/centre?version=1"); got != "10" {
			t.Errorf("got %s", got)
		}
		if r := b.ask("ostley", http.MethodGet, "limit/nitrate/centre?version=1", ""); !strings.HasPrefix(r.body, "refused: there is no chart") {
			t.Errorf("a key that does not see the chart: %s", r.body)
		}
	}
	read, err := pb.NewLimitServiceClient(b.conn).GetVersion(b.as("approver"), &pb.GetVersionRequest{Chart: "nitrate", Version: 1})
	b.must(err)
	_, err = pb.NewLimitServiceClient(b.conn).WithdrawVersion(b.as("approver"), &pb.WithdrawVersionRequest{Chart: "nitrate", Version: read.Version.Number, RequestId: "w", Rejudge: true, Reason: "wrong data"})
	b.must(err)
	if got := b.get("limit/nitrate/centre?version=1"); got != "10" {
		t.Errorf("withdrawn: got %s", got)
	}
	if got := b.get("limit/nitrate/centre"); !strings.HasPrefix(got, "refused: no version is in force") {
		t.Errorf("withdrawn, in force: got %s", got)
	}
	if got := b.get("state/nitrate"); got != "CLEAR" {
		t.Errorf("the state where nothing is in force: %s", got)
	}
}
