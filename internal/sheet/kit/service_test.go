package kit_test

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"io"
	"net/http"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"
	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/pgtest"
	"limitary/internal/server"
	"limitary/internal/store"
	"limitary/service"
)

func TestMain(m *testing.M) {
	pgtest.Main(m, func(ctx context.Context, ownerURL string) error {
		_, err := store.Migrate(ctx, ownerURL)
		return err
	})
}

// running is a service on a database of its own. Its first key is made on the database, all others through the API.
type running struct {
	tb     testing.TB
	conn   *grpc.ClientConn
	at     string
	tokens map[string]string
}

func serve(tb testing.TB) *running {
	tb.Helper()
	r := &running{tb: tb, tokens: map[string]string{}}
	s, err := store.Open(tb.Context(), pgtest.New(tb).ServiceURL(), store.Options{})
	r.must(err)
	tb.Cleanup(s.Close)
	srv, err := server.New(s, server.Options{HTTPAddress: "127.0.0.1:0", GRPCAddress: "127.0.0.1:0"})
	r.must(err)
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- srv.Run(ctx) }()
	tb.Cleanup(func() {
		cancel()
		if err := <-ended; err != nil {
			tb.Error("the service ended with", err)
		}
	})
	r.at = "http://" + srv.HTTPAddress()
	r.conn, err = grpc.NewClient(srv.GRPCAddress(), grpc.WithTransportCredentials(insecure.NewCredentials()))
	r.must(err)
	tb.Cleanup(func() { _ = r.conn.Close() })
	r.firstKey(s)
	for who, role := range map[string]pb.Role{"reader": pb.Role_ROLE_READER, "poster": pb.Role_ROLE_POSTER, "author": pb.Role_ROLE_AUTHOR, "approver": pb.Role_ROLE_APPROVER,
		"reviewer": pb.Role_ROLE_REVIEWER} {
		got, err := pb.NewKeyServiceClient(r.conn).CreateKey(r.as("admin"), &pb.CreateKeyRequest{Principal: who, Roles: []pb.Role{role}, RequestId: "key-" + who})
		r.must(err)
		r.tokens[who] = got.Token
	}
	return r
}

// on is the same service for a subtest.
func (r *running) on(tb testing.TB) *running {
	c := *r
	c.tb = tb
	return &c
}

func (r *running) must(err error) {
	r.tb.Helper()
	if err != nil {
		r.tb.Fatal(err)
	}
}

func (r *running) firstKey(s *store.Store) {
	id, token, hash, err := service.NewToken(rand.Reader)
	r.must(err)
	sum := sha256.Sum256([]byte(id))
	k := definition.Key{ID: id, Principal: "admin", Roles: []definition.Permission{definition.Admin}, ExpiresAt: time.Now().Add(time.Hour).UTC().Truncate(time.Second)}
	_, _, err = s.CreateKey(r.tb.Context(), store.Actor{Principal: "test"}, store.Request{ID: id, Method: "test", Digest: sum[:]}, k, hash)
	r.must(err)
	r.tokens["admin"] = token
}

func (r *running) as(who string) context.Context {
	return metadata.AppendToOutgoingContext(r.tb.Context(), "authorization", "Bearer "+r.tokens[who])
}

// chart makes a chart of individual values with version 1 in force since 2020: the centre, one sigma, Western Electric's rules,
// and what the laboratory says to do.
func (r *running) chart(c *pb.Chart, centre, sigma float64, instructions *pb.Instructions) {
	r.tb.Helper()
	c.Kind, c.SubgroupSize = pb.ChartKind_CHART_KIND_INDIVIDUALS, 1
	_, err := pb.NewChartServiceClient(r.conn).CreateChart(r.as("author"), &pb.CreateChartRequest{Chart: c, RequestId: "chart-" + c.Name})
	r.must(err)
	limits := pb.NewLimitServiceClient(r.conn)
	p, err := limits.ProposeVersion(r.as("author"), &pb.ProposeVersionRequest{Chart: c.Name, RequestId: "propose-" + c.Name, Centre: &centre, ProcessSigma: &sigma,
		EffectiveFrom: timestamppb.New(time.Date(2020, 1, 1, 0, 0, 0, 0, time.UTC)), Reason: "reference value", LocationRules: &pb.TraceRules{RuleSet: "western-electric-1956"},
		Instructions: instructions})
	r.must(err)
	_, err = limits.ApproveVersion(r.as("approver"), &pb.ApproveVersionRequest{Chart: c.Name, Version: p.Version.Number, RequestId: "approve-" + c.Name,
		Digest: p.Version.Digest, Rejudge: true, Reason: "reference value"})
	r.must(err)
}

// stored lists what a chart holds: id, moment, readings and standing.
func (r *running) stored(chart string) (all []string) {
	r.tb.Helper()
	got, err := pb.NewEvaluationServiceClient(r.conn).ListResults(r.as("reader"), &pb.ListResultsRequest{Chart: chart, PageSize: 1000})
	r.must(err)
	for _, s := range got.Results {
		standing := strings.TrimPrefix(s.Verdict.GetStanding().String(), "STANDING_")
		all = append(all, strings.Join([]string{s.Result.Source, s.Result.SourceId, s.Result.MeasuredAt, strings.Join(s.Result.Readings, " "), standing}, "|"))
	}
	return all
}

// get reads an address under /sheet/ as the reader.
func (r *running) get(target string) []byte {
	r.tb.Helper()
	req, err := http.NewRequestWithContext(r.tb.Context(), http.MethodGet, r.at+"/sheet/"+target, nil)
	r.must(err)
	req.Header.Set("Authorization", "Bearer "+r.tokens["reader"])
	resp, err := http.DefaultClient.Do(req)
	r.must(err)
	defer resp.Body.Close()
	body, err := io.ReadAll(resp.Body)
	r.must(err)
	if resp.StatusCode != http.StatusOK {
		r.tb.Fatalf("%s: %s %s", target, resp.Status, body)
	}
	return body
}
