package main

import (
	"context"
	"encoding/json"
	"fmt"
	"math/rand/v2"
	"slices"
	"strconv"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/service"
)

// wireClient is one client of one process, that may act as any of four principals.
type wireClient struct {
	tokens  map[string]string
	charts  pb.ChartServiceClient
	limits  pb.LimitServiceClient
	results pb.EvaluationServiceClient
	signals pb.SignalServiceClient
}

func newWireClient(t *testing.T, address string, tokens map[string]string) *wireClient {
	t.Helper()
	conn, err := grpc.NewClient(address, grpc.WithTransportCredentials(insecure.NewCredentials()))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = conn.Close() })
	return &wireClient{tokens, pb.NewChartServiceClient(conn), pb.NewLimitServiceClient(conn), pb.NewEvaluationServiceClient(conn), pb.NewSignalServiceClient(conn)}
}

// as acts as a principal, and no more as another.
func (c *wireClient) as(ctx context.Context, principal string) context.Context {
	return metadata.NewOutgoingContext(ctx, metadata.Pairs("authorization", "Bearer "+c.tokens[principal]))
}

func refusedAs(err error, reason pb.ErrorReason) bool {
	s, ok := status.FromError(err)
	return ok && err != nil && service.ReasonOf(s) == reason.String()
}

// found sets a chart up, with its versions proposed.
func (c *wireClient) found(ctx context.Context, w *wireWorld, name string) error {
	ctx = c.as(ctx, "author")
	_, err := c.charts.CreateChart(ctx, &pb.CreateChartRequest{RequestId: "create-" + name, Chart: &pb.Chart{
		Name: name, Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "mg/L", LotsAreTracks: w.lots,
	}})
	for i := 0; err == nil && i < len(w.versions); i++ {
		in := proto.CloneOf(w.versions[i])
		in.Chart, in.RequestId = name, fmt.Sprint("propose-", name, i)
		_, err = c.limits.ProposeVersion(ctx, in)
	}
	return err
}

// wireOp is one thing a client does; it may be done before or after any other, and again.
type wireOp struct {
	name string
	do   func(ctx context.Context, c *wireClient) error
}

// ops lists what happens in a world on a chart of a name. Done in any order, also twice, they end in one state.
func (s *replicas) ops(w *wireWorld, name string) []wireOp {
	var list []wireOp
	r := rand.New(rand.NewPCG(w.seed, 5))
	add := func(about string, do func(context.Context, *wireClient) error) {
		list = append(list, wireOp{about, do})
	}
	for i := 0; i < len(w.results); {
		var batch []int
		for n := 1 + r.IntN(5); n > 0 && i < len(w.results); n, i = n-1, i+1 {
			batch = append(batch, i)
		}
		if r.IntN(3) == 0 {
			batch = append(batch, r.IntN(len(w.results)), batch[0])
			r.Shuffle(len(batch), func(a, b int) { batch[a], batch[b] = batch[b], batch[a] })
		}
		add(fmt.Sprint("post ", batch), func(ctx context.Context, c *wireClient) error { return s.post(ctx, c, w, name, batch) })
	}
	for i := range w.amend {
		add(fmt.Sprint("amend ", i), func(ctx context.Context, c *wireClient) error { return s.amend(ctx, c, w, name, i) })
	}
	for _, i := range w.void {
		add(fmt.Sprint("void ", i), func(ctx context.Context, c *wireClient) error { return s.void(ctx, c, w, name, i) })
	}
	for i := range w.versions {
		// A client that repeats a request sends what it sent before, though it would now read something else.
		var sent pb.ApproveVersionRequest
		add(fmt.Sprint("approve ", i+1), func(ctx context.Context, c *wireClient) error { return c.approve(ctx, w, name, i, &sent) })
	}
	for i := range w.marks {
		add(fmt.Sprint("mark ", i), func(ctx context.Context, c *wireClient) error { return c.mark(ctx, w, name, i) })
	}
	slices.SortFunc(list, func(a, b wireOp) int { return strings.Compare(a.name, b.name) })
	return list
}

func (s *replicas) post(ctx context.Context, c *wireClient, w *wireWorld, name string, indices []int) error {
	ctx = c.as(ctx, "poster")
	in := &pb.PostResultsRequest{}
	for _, i := range indices {
		row := proto.CloneOf(w.results[i])
		row.Chart = name
		in.Results = append(in.Results, row)
	}
	out, err := c.results.PostResults(ctx, in)
	if err != nil {
		return err
	}
	for _, row := range out.Results {
		if row.Outcome != pb.PostOutcome_POST_OUTCOME_ACCEPTED && row.Outcome != pb.PostOutcome_POST_OUTCOME_DUPLICATE {
			return fmt.Errorf("row %s: %v: %s", row.SourceId, row.Outcome, row.Message)
		}
		s.acked.Store(name+"/"+row.SourceId, true)
	}
	// Other content under a key that is taken changes nothing.
	other := proto.CloneOf(in.Results[0])
	other.Analyst = "someone else"
	out, err = c.results.PostResults(ctx, &pb.PostResultsRequest{Results: []*pb.Result{other}})
	if err == nil && out.Results[0].Outcome != pb.PostOutcome_POST_OUTCOME_CONFLICT {
		err = fmt.Errorf("other content of %s: %v, want a conflict", other.SourceId, out.Results[0].Outcome)
	}
	return err
}

func (s *replicas) amend(ctx context.Context, c *wireClient, w *wireWorld, name string, i int) error {
	if err := s.post(ctx, c, w, name, []int{i}); err != nil {
		return err
	}
	changed := proto.CloneOf(w.amend[i])
	changed.Chart = name
	if w.lots { // a correction does not open a lot
		_, err := c.charts.StartLot(c.as(ctx, "author"), &pb.StartLotRequest{Chart: name, Lot: changed.Lot, RequestId: fmt.Sprint("lot-", name, changed.Lot, i)})
		if err != nil && !refusedAs(err, pb.ErrorReason_ERROR_REASON_ALREADY_EXISTS) {
			return err
		}
	}
	out, err := c.results.AmendResult(c.as(ctx, "poster"), &pb.AmendResultRequest{Result: changed, RequestId: fmt.Sprint("amend-", name, i), ExpectedRevision: 1, ReasonCode: "TYPO", Reason: "typing error"})
	if refusedAs(err, pb.ErrorReason_ERROR_REASON_NOTHING_TO_DO) {
		return nil
	}
	if err != nil {
		return err
	}
	return c.confirm(ctx, out.Request)
}

func (s *replicas) void(ctx context.Context, c *wireClient, w *wireWorld, name string, i int) error {
	if err := s.post(ctx, c, w, name, []int{i}); err != nil {
		return err
	}
	out, err := c.results.VoidResult(c.as(ctx, "poster"), &pb.VoidResultRequest{Chart: name, Source: "lims", SourceId: w.results[i].SourceId,
		RequestId: fmt.Sprint("void-", name, i), ExpectedRevision: 1, ReasonCode: "SPILT", Reason: "spilt"})
	if err != nil {
		return err
	}
	return c.confirm(ctx, out.Request)
}

// confirm confirms a change where there is one to confirm.
func (c *wireClient) confirm(ctx context.Context, change *pb.ChangeRequest) error {
	return c.confirmAs(ctx, "approver", change)
}

// confirmAs confirms a change as a principal, again with the signals that it has come to end meanwhile. One that was
// decided on already is the earlier try of an op that is repeated.
func (c *wireClient) confirmAs(ctx context.Context, principal string, change *pb.ChangeRequest) error {
	if change == nil {
		return nil
	}
	sent := &pb.ConfirmRequestRequest{Change: change.Id, Decision: pb.Decision_DECISION_CONFIRM, Reason: "seen"}
	for {
		sent.RequestId = fmt.Sprint("confirm-", change.Id, "-", len(sent.SignalsEnded))
		_, err := c.results.ConfirmRequest(c.as(ctx, principal), sent)
		if !refusedAs(err, pb.ErrorReason_ERROR_REASON_WRONG_STATE) {
			return err
		}
		unread := strings.Fields(metaOf(err, "signals"))
		if len(unread) == 0 {
			if strings.Contains(err.Error(), "decided on already") {
				return nil
			}
			return err
		}
		for _, text := range unread {
			id, err := strconv.ParseInt(text, 10, 64)
			if err != nil {
				return err
			}
			sent.SignalsEnded = append(sent.SignalsEnded, id)
		}
	}
}

// metaOf gives what a refusal says under a name.
func metaOf(err error, name string) string {
	for _, d := range status.Convert(err).Details() {
		if info, ok := d.(*errdetails.ErrorInfo); ok {
			return info.Metadata[name]
		}
	}
	return ""
}

// approve reads a version and approves it with the patterns that it ends, again where others have come since. Sent holds
// the request that was sent, and is sent again by who repeats.
func (c *wireClient) approve(ctx context.Context, w *wireWorld, name string, i int, sent *pb.ApproveVersionRequest) error {
	ctx = c.as(ctx, "approver")
	number := int32(i + 1)
	for try := 0; ; try++ {
		if sent.RequestId == "" {
			read, err := c.limits.GetVersion(ctx, &pb.GetVersionRequest{Chart: name, Version: number})
			if err != nil {
				return err
			}
			sent.Chart, sent.Version, sent.Digest, sent.Rejudge, sent.Reason = name, number, read.Version.Digest, true, "retroactive on purpose"
			sent.RequestId = fmt.Sprint("approve-", name, i, "-", try)
			sent.AcceptedPatterns = nil
			for _, p := range read.Version.PatternsEnded {
				sent.AcceptedPatterns = append(sent.AcceptedPatterns, p.Text)
			}
		}
		_, err := c.limits.ApproveVersion(ctx, sent)
		if refusedAs(err, pb.ErrorReason_ERROR_REASON_PATTERNS_NOT_ACCEPTED) {
			sent.RequestId = ""
			continue
		}
		if err != nil {
			return err
		}
		break
	}
	if !w.withdraw[i] {
		return nil
	}
	out, err := c.limits.WithdrawVersion(ctx, &pb.WithdrawVersionRequest{Chart: name, Version: number, RequestId: fmt.Sprint("withdraw-", name, i), Rejudge: true, Reason: "wrong data"})
	if err != nil {
		return err
	}
	return c.confirmAs(ctx, "second", out.Request)
}

func (c *wireClient) mark(ctx context.Context, w *wireWorld, name string, i int) error {
	author := c.as(ctx, "author")
	mark := proto.CloneOf(w.marks[i])
	mark.Chart = name
	out, err := c.charts.AddMark(author, &pb.AddMarkRequest{Chart: name, Mark: mark, RequestId: fmt.Sprint("mark-", name, i), ReasonCode: "SERVICE", Reason: "column changed"})
	if err != nil {
		return err
	}
	if err := c.confirm(ctx, out.Request); err != nil || !w.voidMark[i] {
		return err
	}
	list, err := c.charts.ListMarks(author, &pb.ListMarksRequest{Chart: name, IncludeVoided: true})
	if err != nil {
		return err
	}
	at := slices.IndexFunc(list.Marks, func(m *pb.Mark) bool { return m.Text == mark.Text })
	if at < 0 {
		return fmt.Errorf("%s was set and is not listed", mark.Text)
	}
	gone, err := c.charts.VoidMark(author, &pb.VoidMarkRequest{Chart: name, Mark: list.Marks[at].Id, RequestId: fmt.Sprint("voidmark-", name, i), ReasonCode: "WRONG", Reason: "wrong chart"})
	if err != nil {
		return err
	}
	return c.confirm(ctx, gone.Request)
}

// wirePage is more than any chart of these tests holds.
const wirePage = 500

func (c *wireClient) list(ctx context.Context, name, lot string) ([]*pb.StoredResult, error) {
	out, err := c.results.ListResults(c.as(ctx, "poster"), &pb.ListResultsRequest{Chart: name, Lot: lot, IncludeVoided: true, PageSize: wirePage})
	if err == nil && out.NextPageToken != "" {
		err = fmt.Errorf("%s has more than %d results", name, wirePage)
	}
	return out.GetResults(), err
}

// counts tells how often each source id is listed.
func (c *wireClient) counts(ctx context.Context, name string) (map[string]int, error) {
	list, err := c.list(ctx, name, "")
	n := map[string]int{}
	for _, r := range list {
		n[r.Result.SourceId]++
	}
	return n, err
}

// dump gives what the API tells of a chart: every result in its place on its track with revision, verdict and hits, and
// every episode. The chart's name, ids and the times of recording, which may differ, are taken out.
func (c *wireClient) dump(ctx context.Context, name string) ([]string, error) {
	var lines []string
	for _, lot := range []string{"A", "B", ""} {
		list, err := c.list(ctx, name, lot)
		if err != nil {
			return nil, err
		}
		for i, r := range list {
			if r.Result.Lot != lot {
				continue // with no lot named all are listed, here those of tracks without one
			}
			r.Result.Chart, r.RecordedAt, r.Verdict.RecordedAt = "", nil, nil
			lines = append(lines, fmt.Sprintf("result %s %03d %s", lot, i, plainJSON(r)))
		}
	}
	out, err := c.signals.QuerySignals(c.as(ctx, "poster"), &pb.QuerySignalsRequest{Chart: name, PageSize: wirePage,
		Statuses: []pb.SignalStatus{pb.SignalStatus_SIGNAL_STATUS_OPEN, pb.SignalStatus_SIGNAL_STATUS_CLOSED}})
	if err != nil {
		return nil, err
	}
	if out.NextPageToken != "" {
		return nil, fmt.Errorf("%s has more than %d signals", name, wirePage)
	}
	for _, signal := range out.Signals {
		signal.Chart, signal.Id, signal.Occurrence, signal.OpenTime = "", 0, 0, nil
		lines = append(lines, "signal "+plainJSON(signal))
	}
	slices.Sort(lines)
	return lines, nil
}

// plainJSON writes a message in one fixed form, which protojson on purpose does not.
func plainJSON(m proto.Message) string {
	b, err := protojson.Marshal(m)
	var v any
	if err == nil {
		err = json.Unmarshal(b, &v)
	}
	if err == nil {
		b, err = json.Marshal(v)
	}
	if err != nil {
		panic(err) // a message that was just received can be written
	}
	return string(b)
}
