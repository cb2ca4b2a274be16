package service

import (
	"context"
	"errors"
	"strings"

	"google.golang.org/protobuf/reflect/protoreflect"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
)

// AmendResult replaces the content of a result, or asks for it where another principal must confirm.
func (s *EvaluationService) AmendResult(ctx context.Context, in *pb.AmendResultRequest) (*pb.AmendResultResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	if in.Result == nil {
		return nil, definition.Invalid("result", "is not set")
	}
	r, err := resultFromProto(in.Result)
	if err == nil {
		err = checkSource(who, r.Source)
	}
	if err != nil {
		return nil, under("result", err)
	}
	if err = first(checkID("expected_revision", int64(in.ExpectedRevision)), checkWhy(in.ReasonCode, in.Reason, 1)); err != nil {
		return nil, err
	}
	stored, change, err := s.store.AmendResult(ctx, who, req, r, int(in.ExpectedRevision), in.ReasonCode, in.Reason)
	if err != nil {
		return nil, underResult(err)
	}
	out := &pb.AmendResultResponse{Request: changeToProto(change)}
	if stored != nil {
		out.Result = storedToProto(*stored)
	}
	return out, nil
}

// underResult moves a refusal of something in the new content below the field that holds it.
func underResult(err error) error {
	var e *definition.Error
	if !errors.As(err, &e) {
		return err
	}
	field, _, _ := strings.Cut(e.Field, "[")
	if (&pb.Result{}).ProtoReflect().Descriptor().Fields().ByName(protoreflect.Name(field)) == nil {
		return err
	}
	return e.At("result")
}

// VoidResult asks for a result to be taken out of judgement.
func (s *EvaluationService) VoidResult(ctx context.Context, in *pb.VoidResultRequest) (*pb.VoidResultResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	err = first(err, checkResultKey(in.Chart, in.Source, in.SourceId), checkID("expected_revision", int64(in.ExpectedRevision)),
		checkWhy(in.ReasonCode, in.Reason, 1))
	if err == nil {
		err = checkSource(who, in.Source)
	}
	if err != nil {
		return nil, err
	}
	change, err := s.store.VoidResult(ctx, who, req, in.Chart, in.Source, in.SourceId, int(in.ExpectedRevision), in.ReasonCode, in.Reason)
	if err != nil {
		return nil, err
	}
	return &pb.VoidResultResponse{Request: changeToProto(change)}, nil
}

// ConfirmRequest decides on a change that another principal asked for.
func (s *EvaluationService) ConfirmRequest(ctx context.Context, in *pb.ConfirmRequestRequest) (*pb.ConfirmRequestResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err = first(err, checkID("change", in.Change)); err != nil {
		return nil, err
	}
	least := 0
	switch in.Decision {
	case pb.Decision_DECISION_CONFIRM:
	case pb.Decision_DECISION_REJECT:
		least = 1
	default:
		return nil, definition.Invalid("decision", "%d: want CONFIRM or REJECT", in.Decision)
	}
	if err := definition.CheckText("reason", in.Reason, least, ReasonBytesMax); err != nil {
		return nil, err
	}
	change, tracks, err := s.store.DecideChange(ctx, who, req, in.Change, in.Decision == pb.Decision_DECISION_CONFIRM, in.Reason, in.SignalsEnded)
	if err != nil {
		return nil, err
	}
	return &pb.ConfirmRequestResponse{Request: changeToProto(&change), Tracks: updatesToProto(tracks)}, nil
}

// ListRequests gives the changes asked for, newest first.
func (s *EvaluationService) ListRequests(ctx context.Context, in *pb.ListRequestsRequest) (*pb.ListRequestsResponse, error) {
	who, err := actor(ctx)
	if err != nil {
		return nil, err
	}
	if in.Chart != "" {
		if err := definition.CheckSlug("chart", in.Chart); err != nil {
			return nil, err
		}
	}
	if _, known := pb.ChangeStatus_name[int32(in.Status)]; !known {
		return nil, definition.Invalid("status", "%d: no such value", in.Status)
	}
	status := ""
	if in.Status != pb.ChangeStatus_CHANGE_STATUS_UNSPECIFIED {
		status = strings.TrimPrefix(in.Status.String(), "CHANGE_STATUS_")
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	found, next, err := s.store.ListChanges(ctx, who, in.Chart, status, p)
	if err != nil {
		return nil, err
	}
	out := &pb.ListRequestsResponse{Requests: make([]*pb.ChangeRequest, len(found)), NextPageToken: next}
	for i := range found {
		out.Requests[i] = changeToProto(&found[i])
	}
	return out, nil
}
