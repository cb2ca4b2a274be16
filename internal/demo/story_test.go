package demo_test

import (
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
)

func containsAll(s string, parts ...string) bool {
	for _, p := range parts {
		if !strings.Contains(s, p) {
			return false
		}
	}
	return true
}

func (s *served) track(t *testing.T, chart, lot string) *pb.TrackStatus {
	t.Helper()
	out, err := pb.NewChartServiceClient(s.conn).ListTracks(as(t, s.tokens.Reviewer), &pb.ListTracksRequest{Chart: chart})
	if err != nil {
		t.Fatal(err)
	}
	for _, tr := range out.Tracks {
		if tr.Lot == lot {
			return tr
		}
	}
	t.Fatalf("chart %s has no track %q", chart, lot)
	return nil
}

func (s *served) result(t *testing.T, chart, source, id string) *pb.GetResultResponse {
	t.Helper()
	out, err := pb.NewEvaluationServiceClient(s.conn).GetResult(as(t, s.tokens.Reviewer), &pb.GetResultRequest{Chart: chart, Source: source, SourceId: id})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func (s *served) version(t *testing.T, chart string, number int32) *pb.Version {
	t.Helper()
	out, err := pb.NewLimitServiceClient(s.conn).GetVersion(as(t, s.tokens.Reviewer), &pb.GetVersionRequest{Chart: chart, Version: number})
	if err != nil {
		t.Fatal(err)
	}
	return out.Version
}

func (s *served) signalsOf(t *testing.T, chart, lot string, statuses ...pb.SignalStatus) []*pb.Signal {
	t.Helper()
	out, err := pb.NewSignalServiceClient(s.conn).QuerySignals(as(t, s.tokens.Reviewer), &pb.QuerySignalsRequest{Chart: chart, Lot: lot, Statuses: statuses})
	if err != nil {
		t.Fatal(err)
	}
	return out.Signals
}

func hasRule(signals []*pb.Signal, rule string) bool {
	for _, sig := range signals {
		if sig.Rule == rule {
			return true
		}
	}
	return false
}

// Each event that is built into the data is what the service shows in the end.
func TestStories(t *testing.T) {
	s := serve(t)
	s.load(t, base)
	open, closed, retracted := pb.SignalStatus_SIGNAL_STATUS_OPEN, pb.SignalStatus_SIGNAL_STATUS_CLOSED, pb.SignalStatus_SIGNAL_STATUS_RETRACTED

	t.Run("the new column is a mark and a run on one side", func(t *testing.T) {
		marks, err := pb.NewChartServiceClient(s.conn).ListMarks(as(t, s.tokens.Reviewer), &pb.ListMarksRequest{Chart: "nitrate-ic2-mid"})
		if err != nil || len(marks.Marks) != 1 {
			t.Fatalf("got marks %v, %v; want one", marks, err)
		}
		signals := s.signalsOf(t, "nitrate-ic2-mid", "", open)
		if !hasRule(signals, "nelson-1984/2") {
			t.Errorf("got open signals %v, want a run of nine", signals)
		}
		for _, sig := range signals {
			if sig.FirstHit.MeasuredAt.AsTime().Before(marks.Marks[0].At.AsTime()) {
				t.Errorf("signal %d was there before the column", sig.Id)
			}
		}
		if v := s.version(t, "nitrate-ic2-mid", 2); v.State != pb.VersionState_VERSION_STATE_PROPOSED || len(v.PatternsEnded) == 0 {
			t.Errorf("got version 2 %s with patterns %v, want it proposed, and patterns that it would end", v.State, v.PatternsEnded)
		}
	})
	t.Run("set-up has an exclusion with its reason, and two people", func(t *testing.T) {
		v := s.version(t, "nitrate-ic2-mid", 1)
		if len(v.ExcludedResults) != 1 || v.ExcludedResults[0].Result.SourceId != "HW-NO3M-0018" || v.ExcludedResults[0].Reason == "" || v.N != 39 {
			t.Errorf("got exclusions %v and n %d, want one of 40", v.ExcludedResults, v.N)
		}
		if v.Author == v.DecidedBy || !v.InForce {
			t.Errorf("got author %q, approver %q, in force %v", v.Author, v.DecidedBy, v.InForce)
		}
	})
	t.Run("bounds are judged where they prove something", func(t *testing.T) {
		clear, nothing := s.result(t, "nitrate-ic2-blank", "lims-harwick", "HW-NO3B-0001"), s.result(t, "nitrate-ic2-blank", "lims-harwick", "HW-NO3B-0012")
		if v := clear.Result.Verdict; v.Standing != pb.Standing_STANDING_CLEAR || !v.ByBound {
			t.Errorf("%v: got %v, want clear by its bound", clear.Result.Result.Readings, v)
		}
		if v := nothing.Result.Verdict; v.Standing != pb.Standing_STANDING_NOT_JUDGED || v.Reason != pb.NotJudgedReason_NOT_JUDGED_REASON_BOUND_PROVES_NOTHING {
			t.Errorf("%v: got %v, want not judged", nothing.Result.Result.Readings, v)
		}
	})
	t.Run("limits approved late judged what was stored", func(t *testing.T) {
		r := s.result(t, "turbidity-1", "lims-harwick", "HW-TURB-0040")
		verdicts := r.Revisions[0].Verdicts
		if len(verdicts) != 2 || verdicts[0].Reason != pb.NotJudgedReason_NOT_JUDGED_REASON_NO_VERSION_IN_FORCE || verdicts[1].Version != 1 {
			t.Errorf("got verdicts %v, want not judged first and then by version 1", verdicts)
		}
	})
	t.Run("the late result was recorded after later ones", func(t *testing.T) {
		late, next := s.result(t, "turbidity-1", "lims-harwick", "HW-TURB-0132").Result, s.result(t, "turbidity-1", "lims-harwick", "HW-TURB-0150").Result
		if !late.RecordedAt.AsTime().After(next.RecordedAt.AsTime()) || late.Verdict.Version != 1 {
			t.Errorf("got it recorded %v with %v, and a later one %v", late.RecordedAt.AsTime(), late.Verdict, next.RecordedAt.AsTime())
		}
	})
	t.Run("each lot is a track with its version, and the second drifts", func(t *testing.T) {
		old, fresh := s.track(t, "lead-icpms-mid", "PB-118"), s.track(t, "lead-icpms-mid", "PB-119")
		if old.Version != 1 || fresh.Version != 2 || old.State != pb.TrackState_TRACK_STATE_CLEAR || fresh.State != pb.TrackState_TRACK_STATE_OPEN_SIGNAL {
			t.Errorf("got %v and %v", old, fresh)
		}
		signals := s.signalsOf(t, "lead-icpms-mid", "PB-119", open)
		if !hasRule(signals, "ewma-0.2") || !hasRule(signals, "run-of-seven/2") {
			t.Errorf("got open signals %v, want the weighted average and the run", signals)
		}
		out, err := pb.NewSignalServiceClient(s.conn).GetSignal(as(t, s.tokens.Reviewer), &pb.GetSignalRequest{Signal: signals[0].Id})
		if err != nil || len(out.Notes) != 1 {
			t.Errorf("got notes %v, %v; want the reviewer's", out.GetNotes(), err)
		}
	})
	t.Run("the failed spike stopped, and its track was released", func(t *testing.T) {
		r := s.result(t, "lead-icpms-recovery", "lims-ostley", "OS-PBREC-0119").Result
		if v := r.Verdict; v.Standing != pb.Standing_STANDING_STOP || v.Location.GetLowerAction() != 85 || !strings.Contains(v.Instruction, "Do not report") {
			t.Errorf("got %v, want a stop below the method's 85 %%, with the instruction", v)
		}
		closed := s.signalsOf(t, "lead-icpms-recovery", "", closed)
		if tr := s.track(t, "lead-icpms-recovery", ""); tr.State == pb.TrackState_TRACK_STATE_HOLD || !hasRule(closed, "action-warning/2") {
			t.Errorf("got %v with closed signals %v, want it released", tr, closed)
		}
	})
	t.Run("the slip was voided by two people and retracted its stop", func(t *testing.T) {
		r := s.result(t, "fluoride-ise", "lims-ostley", "OS-FISE-0302")
		if !r.Result.Voided || len(r.Revisions) != 2 || r.Revisions[1].Author == r.Revisions[1].ConfirmedBy {
			t.Errorf("got %v", r)
		}
		if signals := s.signalsOf(t, "fluoride-ise", "", retracted); !hasRule(signals, "nordic-handbook/1") {
			t.Errorf("got retracted signals %v, want the stop", signals)
		}
	})
	t.Run("a request waits that would end a signal", func(t *testing.T) {
		out, err := pb.NewEvaluationServiceClient(s.conn).ListRequests(as(t, s.tokens.Reviewer), &pb.ListRequestsRequest{Status: pb.ChangeStatus_CHANGE_STATUS_PENDING})
		if err != nil || len(out.Requests) != 1 || out.Requests[0].SourceId != "OS-PBREC-0147" || len(out.Requests[0].SignalsEnded) == 0 {
			t.Errorf("got %v, %v", out, err)
		}
	})
	t.Run("the failed low control is on hold in spite of its good repeat", func(t *testing.T) {
		if tr := s.track(t, "lead-icpms-low", ""); tr.State != pb.TrackState_TRACK_STATE_HOLD || tr.HoldSince == nil {
			t.Errorf("got %v, want it on hold", tr)
		}
		repeat := s.result(t, "lead-icpms-low", "lims-brenmoor", "BR-PBLOW-0359-R1").Result
		if repeat.Result.Role != pb.ResultRole_RESULT_ROLE_REPEAT || repeat.Verdict.Location.GetStatistic() > repeat.Verdict.Location.GetUpperWarning() {
			t.Errorf("got %v, want a repeat in order", repeat)
		}
	})
	t.Run("without a version nothing is judged", func(t *testing.T) {
		out, err := pb.NewEvaluationServiceClient(s.conn).ListResults(as(t, s.tokens.Reviewer), &pb.ListResultsRequest{Chart: "ph-buffer-7"})
		if err != nil || len(out.Results) != 50 {
			t.Fatalf("got %d results, %v; want 50", len(out.GetResults()), err)
		}
		for _, r := range out.Results {
			if r.Verdict.Standing != pb.Standing_STANDING_NOT_JUDGED {
				t.Fatalf("got %v, want not judged", r.Verdict)
			}
		}
	})
	t.Run("limits from few results are provisional", func(t *testing.T) {
		if !s.version(t, "colonies-22c", 1).Provisional || !s.version(t, "turbidity-5", 1).Provisional || s.version(t, "turbidity-5", 2).Provisional {
			t.Error("want colonies-22c 1 and turbidity-5 1 provisional, turbidity-5 2 not")
		}
	})
	t.Run("nothing more is posted to the archived chart", func(t *testing.T) {
		out, err := pb.NewEvaluationServiceClient(s.conn).PostResults(as(t, s.tokens.Poster), &pb.PostResultsRequest{Results: []*pb.Result{
			{Chart: "nitrate-ic1-mid", Source: "lims-harwick", SourceId: "late", MeasuredAt: base.Format(time.RFC3339), Readings: []string{"5"}},
		}})
		if err != nil || out.Results[0].Reason != pb.ErrorReason_ERROR_REASON_CHART_ARCHIVED {
			t.Errorf("got %v, %v; want it refused as archived", out, err)
		}
	})
	t.Run("the author may not approve what waits", func(t *testing.T) {
		v := s.version(t, "nitrate-ic2-mid", 2)
		_, err := pb.NewLimitServiceClient(s.conn).ApproveVersion(as(t, s.tokens.Author), &pb.ApproveVersionRequest{
			Chart: v.Chart, Version: v.Number, RequestId: "own", Digest: v.Digest,
		})
		if status.Code(err) != codes.PermissionDenied {
			t.Errorf("got %v, want it refused", err)
		}
	})
	testStoriesOfKinds(t, s)
	testRevisions(t, s)
}
