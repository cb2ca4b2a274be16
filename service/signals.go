package service

import (
	"context"
	"fmt"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// SignalService finds signals and records what people decide on them.
type SignalService struct {
	pb.UnimplementedSignalServiceServer
	store *store.Store
}

const signalStatusPrefix = "SIGNAL_STATUS_"

// QuerySignals finds signals, newest first.
func (s *SignalService) QuerySignals(ctx context.Context, in *pb.QuerySignalsRequest) (*pb.QuerySignalsResponse, error) {
	who, err := actor(ctx)
	if err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	filter, err := signalFilter(in)
	if err != nil {
		return nil, err
	}
	found, next, err := s.store.QuerySignals(ctx, who, filter, p)
	if err != nil {
		return nil, err
	}
	return &pb.QuerySignalsResponse{Signals: signalsToProto(found), NextPageToken: next}, nil
}

func signalFilter(in *pb.QuerySignalsRequest) (store.SignalFilter, error) {
	f := store.SignalFilter{Chart: in.Chart, Lot: in.Lot, Rule: in.Rule, Occurrence: in.Occurrence, ChangedAfterClosing: in.ChangedAfterClosing}
	if in.Chart != "" {
		if err := definition.CheckSlug("chart", in.Chart); err != nil {
			return f, err
		}
	}
	if in.Consequence < 0 || in.Consequence > pb.Consequence_CONSEQUENCE_STOP {
		return f, definition.Invalid("consequence", "%d: no such value", in.Consequence)
	}
	f.Consequence = rules.Consequence(in.Consequence)
	if in.Occurrence < 0 {
		return f, definition.Invalid("occurrence", "%d: want the id of an occurrence, or 0 for any", in.Occurrence)
	}
	for i, st := range in.Statuses {
		if _, known := pb.SignalStatus_name[int32(st)]; !known || st == pb.SignalStatus_SIGNAL_STATUS_UNSPECIFIED {
			return f, definition.Invalid(fmt.Sprintf("statuses[%d]", i), "%d: want OPEN, CLOSED, MERGED or RETRACTED", st)
		}
		f.Statuses = append(f.Statuses, strings.TrimPrefix(st.String(), signalStatusPrefix))
	}
	var err error
	if f.Labels, err = readLabels("labels", in.Labels); err != nil {
		return f, err
	}
	if f.From, f.To, err = readBetween(in.From, in.To); err != nil {
		return f, err
	}
	return f, first(checkName("lot", in.Lot, 0), checkName("rule", in.Rule, 0), tooMany("statuses", len(in.Statuses), len(pb.SignalStatus_name), "statuses"))
}

// GetSignal gives a signal with everything that happened to it.
func (s *SignalService) GetSignal(ctx context.Context, in *pb.GetSignalRequest) (*pb.GetSignalResponse, error) {
	who, err := actor(ctx)
	if err = first(err, checkID("signal", in.Signal)); err != nil {
		return nil, err
	}
	signal, events, notes, err := s.store.GetSignal(ctx, who, in.Signal)
	if err != nil {
		return nil, err
	}
	out := &pb.GetSignalResponse{Signal: signalToProto(signal)}
	for _, e := range events {
		out.Events = append(out.Events, eventToProto(e))
	}
	for _, n := range notes {
		out.Notes = append(out.Notes, noteToProto(n))
	}
	return out, nil
}

// NoteSignal adds a note.
func (s *SignalService) NoteSignal(ctx context.Context, in *pb.NoteSignalRequest) (*pb.NoteSignalResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err = first(err, checkID("signal", in.Signal), definition.CheckText("text", in.Text, 1, ReasonBytesMax)); err != nil {
		return nil, err
	}
	note, err := s.store.NoteSignal(ctx, who, req, in.Signal, in.Text)
	if err != nil {
		return nil, err
	}
	return &pb.NoteSignalResponse{Note: noteToProto(note)}, nil
}

// CloseOccurrence decides on the open signals of an occurrence together.
func (s *SignalService) CloseOccurrence(ctx context.Context, in *pb.CloseOccurrenceRequest) (*pb.CloseOccurrenceResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	err = first(err, checkID("occurrence", in.Occurrence), definition.CheckText("decision", in.Decision, 1, ReasonCodeBytesMax),
		definition.CheckText("cause", in.Cause, 0, ReasonBytesMax), tooMany("signals", len(in.Signals), SignalsMax, "signals"))
	if err != nil {
		return nil, err
	}
	if len(in.Signals) == 0 {
		return nil, definition.Invalid("signals", "is empty; name the open signals that were seen")
	}
	for i, id := range in.Signals {
		if err := checkID(fmt.Sprintf("signals[%d]", i), id); err != nil {
			return nil, err
		}
	}
	closed, track, err := s.store.CloseOccurrence(ctx, who, req, in.Occurrence, in.Decision, in.Cause, in.Signals)
	if err != nil {
		return nil, err
	}
	return &pb.CloseOccurrenceResponse{Signals: signalsToProto(closed), Track: trackToProto(track)}, nil
}

// ReleaseTrack ends a hold.
func (s *SignalService) ReleaseTrack(ctx context.Context, in *pb.ReleaseTrackRequest) (*pb.ReleaseTrackResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	since, err := readMoment("hold_since", in.HoldSince)
	err = first(err, definition.CheckSlug("chart", in.Chart), checkName("lot", in.Lot, 0), definition.CheckText("reason", in.Reason, 1, ReasonBytesMax))
	if err != nil {
		return nil, err
	}
	if since.IsZero() {
		return nil, definition.Invalid("hold_since", "is not set; send the hold_since that was read, so that no later STOP is released unseen")
	}
	track, err := s.store.ReleaseTrack(ctx, who, req, in.Chart, in.Lot, in.Reason, since)
	if err != nil {
		return nil, err
	}
	return &pb.ReleaseTrackResponse{Track: trackToProto(track)}, nil
}
