package service

import (
	"context"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// AddMark notes an event on the time axis, or asks for it where another principal must confirm.
func (s *ChartService) AddMark(ctx context.Context, in *pb.AddMarkRequest) (*pb.AddMarkResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	m, err := markFromProto(in)
	if err = first(definition.CheckSlug("chart", in.Chart), err, checkWhy(in.ReasonCode, in.Reason, 0)); err != nil {
		return nil, err
	}
	mark, change, err := s.store.AddMark(ctx, who, req, m, in.ReasonCode, in.Reason)
	if err != nil {
		return nil, err
	}
	return &pb.AddMarkResponse{Mark: markToProto(mark), Request: changeToProto(change)}, nil
}

func markFromProto(in *pb.AddMarkRequest) (store.Mark, error) {
	m := in.Mark
	if m == nil {
		return store.Mark{}, definition.Invalid("mark", "is not set")
	}
	if m.Chart != "" && m.Chart != in.Chart {
		return store.Mark{}, definition.Invalid("mark.chart", "%q: the call is for chart %q", clip(m.Chart), clip(in.Chart))
	}
	at, err := readMoment("mark.at", m.At)
	if err != nil {
		return store.Mark{}, err
	}
	if at.IsZero() {
		return store.Mark{}, definition.Invalid("mark.at", "is not set")
	}
	err = first(checkName("mark.lot", m.Lot, 0), definition.CheckText("mark.text", m.Text, 1, definition.TextBytesMax))
	return store.Mark{Chart: in.Chart, Lot: m.Lot, At: at, Text: m.Text, Break: m.Break, Restart: m.Restart}, err
}

// ListMarks gives the marks of a chart.
func (s *ChartService) ListMarks(ctx context.Context, in *pb.ListMarksRequest) (*pb.ListMarksResponse, error) {
	who, err := actor(ctx)
	if err = first(err, definition.CheckSlug("chart", in.Chart)); err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	marks, next, err := s.store.ListMarks(ctx, who, in.Chart, p, in.IncludeVoided)
	if err != nil {
		return nil, err
	}
	out := &pb.ListMarksResponse{Marks: make([]*pb.Mark, len(marks)), NextPageToken: next}
	for i := range marks {
		out.Marks[i] = markToProto(&marks[i])
	}
	return out, nil
}

// VoidMark takes a mark back, or asks for it where another principal must confirm.
func (s *ChartService) VoidMark(ctx context.Context, in *pb.VoidMarkRequest) (*pb.VoidMarkResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	err = first(err, definition.CheckSlug("chart", in.Chart), checkID("mark", in.Mark), checkWhy(in.ReasonCode, in.Reason, 1))
	if err != nil {
		return nil, err
	}
	mark, change, err := s.store.VoidMark(ctx, who, req, in.Chart, in.Mark, in.ReasonCode, in.Reason)
	if err != nil {
		return nil, err
	}
	return &pb.VoidMarkResponse{Mark: markToProto(mark), Request: changeToProto(change)}, nil
}
