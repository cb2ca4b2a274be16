package demo

import (
	"context"
	"fmt"
	"maps"
	"slices"

	pb "limitary/api/limitary/v1"
)

// openSignals lists the open signals of a track.
func (l *loader) openSignals(ctx context.Context, s *series) ([]*pb.Signal, error) {
	out, err := l.signals.QuerySignals(ctx, &pb.QuerySignalsRequest{
		Chart: s.chart.Name, Lot: s.track(), Statuses: []pb.SignalStatus{pb.SignalStatus_SIGNAL_STATUS_OPEN}, PageSize: pageSize,
	})
	if err != nil {
		return nil, err
	}
	return out.Signals, nil
}

// settle has the reviewer close everything that is open on a track with one decision, and release the track if it is on
// hold.
func settle(s *series, decision, cause string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		ctx = as(ctx, l.tokens.Reviewer)
		open, err := l.openSignals(ctx, s)
		if err != nil {
			return err
		}
		byOccurrence := map[int64][]int64{}
		for _, sig := range open {
			byOccurrence[sig.Occurrence] = append(byOccurrence[sig.Occurrence], sig.Id)
		}
		for _, id := range slices.Sorted(maps.Keys(byOccurrence)) {
			seen := byOccurrence[id]
			slices.Sort(seen)
			_, err := l.signals.CloseOccurrence(ctx, &pb.CloseOccurrenceRequest{
				Occurrence: id, RequestId: fmt.Sprintf("demo-close-%d-%d", id, seen[len(seen)-1]), Decision: decision, Cause: cause, Signals: seen,
			})
			if err != nil {
				return err
			}
		}
		return l.release(ctx, s, cause)
	}}
}

// release ends the hold of a track, if there is one.
func (l *loader) release(ctx context.Context, s *series, reason string) error {
	tracks, err := l.charts.ListTracks(ctx, &pb.ListTracksRequest{Chart: s.chart.Name})
	if err != nil {
		return err
	}
	for _, t := range tracks.Tracks {
		if t.State != pb.TrackState_TRACK_STATE_HOLD || t.Lot != s.track() {
			continue
		}
		_, err := l.signals.ReleaseTrack(ctx, &pb.ReleaseTrackRequest{
			Chart: t.Chart, Lot: t.Lot, RequestId: fmt.Sprintf("demo-release-%s-%d", s.prefix, t.HoldSince.AsTime().UnixMicro()),
			Reason: reason, HoldSince: t.HoldSince,
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// note has the reviewer write a note on each open signal of a track.
func note(s *series, text string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		ctx = as(ctx, l.tokens.Reviewer)
		open, err := l.openSignals(ctx, s)
		if err != nil {
			return err
		}
		for _, sig := range open {
			_, err := l.signals.NoteSignal(ctx, &pb.NoteSignalRequest{Signal: sig.Id, RequestId: fmt.Sprintf("demo-note-%d", sig.Id), Text: text})
			if err != nil {
				return err
			}
		}
		return nil
	}}
}

// voidRequest finds the request to void result i.
func (l *loader) voidRequest(ctx context.Context, s *series, i int) (*pb.ChangeRequest, error) {
	out, err := l.evaluation.ListRequests(ctx, &pb.ListRequestsRequest{Chart: s.chart.Name, PageSize: pageSize})
	if err != nil {
		return nil, err
	}
	for _, r := range out.Requests {
		if r.Kind == pb.ChangeKind_CHANGE_KIND_VOID_RESULT && r.SourceId == s.id(i) {
			return r, nil
		}
	}
	return nil, nil
}

// void has the laboratory ask for result i to be voided.
func void(s *series, i int, code, reason string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		_, err := l.evaluation.VoidResult(as(ctx, l.tokens.Poster), &pb.VoidResultRequest{
			Chart: s.chart.Name, Source: s.source, SourceId: s.id(i), RequestId: "demo-void-" + s.id(i),
			ExpectedRevision: 1, ReasonCode: code, Reason: reason,
		})
		return err
	}}
}

// confirm has the approver confirm the voiding of result i.
func confirm(s *series, i int, reason string) step {
	return step{do: func(ctx context.Context, l *loader) error {
		ctx = as(ctx, l.tokens.Approver)
		r, err := l.voidRequest(ctx, s, i)
		if err != nil {
			return err
		}
		if r == nil {
			return fmt.Errorf("there is no request to void %s", s.id(i))
		}
		if r.Status != pb.ChangeStatus_CHANGE_STATUS_PENDING {
			return nil
		}
		_, err = l.evaluation.ConfirmRequest(ctx, &pb.ConfirmRequestRequest{
			Change: r.Id, RequestId: "demo-confirm-" + s.id(i), Decision: pb.Decision_DECISION_CONFIRM, Reason: reason,
		})
		return err
	}}
}
