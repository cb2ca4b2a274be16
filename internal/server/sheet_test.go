package server_test

import (
	"bytes"
	"context"
	"io"
	"net/http"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/metadata"
	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
)

// bench is a service with a chart of nitrate around 10 mg/L: version 1 has centre 10, sigma 0.5 and the rules of western-electric-1956,
// in force since 2020.
type bench struct {
	*fixture
	tb testing.TB
}

func newBench(tb testing.TB, o server.Options) *bench {
	tb.Helper()
	b := &bench{newFixture(tb, o), tb}
	b.chart(&pb.Chart{Name: "nitrate", Title: "Nitrate check", Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "mg/L", Labels: map[string]string{"site": "harwick"}})
	b.version("nitrate", "", "2020-01-01T00:00:00Z", 10, 0.5, "western-electric-1956")
	return b
}

// as gives a context that calls as a principal.
func (b *bench) as(who string) context.Context {
	return metadata.AppendToOutgoingContext(b.tb.Context(), "authorization", "Bearer "+b.tokens[who])
}

func (b *bench) must(err error) {
	b.tb.Helper()
	if err != nil {
		b.tb.Fatal(err)
	}
}

func (b *bench) chart(c *pb.Chart) {
	b.tb.Helper()
	_, err := pb.NewChartServiceClient(b.conn).CreateChart(b.as("author"), &pb.CreateChartRequest{Chart: c, RequestId: "chart-" + c.Name})
	b.must(err)
}

// version proposes and approves a version.
func (b *bench) version(chart, lot, from string, centre, sigma float64, set string) *pb.Version {
	b.tb.Helper()
	limits := pb.NewLimitServiceClient(b.conn)
	at, err := time.Parse(time.RFC3339, from)
	b.must(err)
	p, err := limits.ProposeVersion(b.as("author"), &pb.ProposeVersionRequest{Chart: chart, RequestId: "p" + from + lot + chart, Lot: lot, Centre: &centre, ProcessSigma: &sigma,
		EffectiveFrom: timestamppb.New(at), Reason: "reference value", LocationRules: &pb.TraceRules{RuleSet: set}})
	b.must(err)
	var patterns []string
	read, err := limits.GetVersion(b.as("approver"), &pb.GetVersionRequest{Chart: chart, Version: p.Version.Number})
	b.must(err)
	for _, e := range read.Version.PatternsEnded {
		patterns = append(patterns, e.Text)
	}
	a, err := limits.ApproveVersion(b.as("approver"), &pb.ApproveVersionRequest{Chart: chart, Version: p.Version.Number, RequestId: "a" + from + lot + chart, Digest: p.Version.Digest, Rejudge: true, Reason: "reference value", AcceptedPatterns: patterns})
	b.must(err)
	return a.Version
}

// reply is what came back over HTTP.
type reply struct {
	status int
	header http.Header
	body   string
}

// ask makes a request under /sheet/; headers are pairs.
func (b *bench) ask(as, method, target, body string, headers ...string) reply {
	b.tb.Helper()
	r, err := b.tryAsk(as, method, target, body, headers...)
	b.must(err)
	return r
}

func (b *bench) tryAsk(as, method, target, body string, headers ...string) (reply, error) {
	req, err := http.NewRequest(method, "http://"+b.server.HTTPAddress()+"/sheet/"+target, strings.NewReader(body))
	if err != nil {
		return reply{}, err
	}
	if token := b.tokens[as]; token != "" {
		req.Header.Set("Authorization", "Bearer "+token)
	}
	for i := 0; i+1 < len(headers); i += 2 {
		req.Header.Set(headers[i], headers[i+1])
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return reply{}, err
	}
	defer resp.Body.Close()
	var buf bytes.Buffer
	_, err = io.Copy(&buf, resp.Body)
	return reply{resp.StatusCode, resp.Header, buf.String()}, err
}

func (b *bench) get(target string) string {
	b.tb.Helper()
	r := b.ask("reader", http.MethodGet, target, "")
	if r.status != http.StatusOK {
		b.tb.Errorf("GET %s: got %d %s", target, r.status, r.body)
	}
	return r.body
}

// post posts a block and gives what came back.
func (b *bench) post(target, body string) reply {
	b.tb.Helper()
	return b.ask("poster", http.MethodPost, target, body)
}

// stored lists what the chart holds: id, moment and readings.
func (b *bench) stored(chart string) (all []string) {
	b.tb.Helper()
	got, err := pb.NewEvaluationServiceClient(b.conn).ListResults(b.as("reader"), &pb.ListResultsRequest{Chart: chart, PageSize: 1000})
	b.must(err)
	for _, r := range got.Results {
		all = append(all, r.Result.SourceId+" "+r.Result.MeasuredAt+" "+strings.Join(r.Result.Readings, " "))
	}
	return all
}
