package service

import (
	"context"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/judge"
	"limitary/internal/track"
)

// byTrack finds where the stored track stands that values continue. Every evaluation continues from there anew.
func (b *evaluator) byTrack(ctx context.Context, in *pb.ByChart, at time.Time) (resolved, error) {
	who, err := actor(ctx)
	if err != nil {
		return resolved{}, err
	}
	c, err := b.service.store.Continue(ctx, who, in.Name, in.Lot, at)
	if err != nil {
		return resolved{}, chartIsName(err)
	}
	return resolved{c.By, c.Version, c}, nil
}

// say tells what the values were judged after.
func (r resolved) say(out *pb.EvaluationResult) {
	if r.after == nil {
		return
	}
	out.TrackState, out.OpenSignals = trackStateToProto(r.after.Track.State()), int32(r.after.Track.OpenSignals)
	if !r.after.After.IsZero() {
		out.ContinuedFrom = timestamppb.New(r.after.After)
	}
}

// walk begins to judge n points.
func (r resolved) walk(n, firstJudged int, full bool) *walk {
	w := newWalk(r.judge, n, firstJudged, full)
	w.after = r.after
	return w
}

// continued judges the next point of a stored track.
func (w *walk) continued(pt judge.Point) error {
	o, err := w.after.Judge(pt)
	if err != nil {
		return err
	}
	v := &w.verdict
	v.Standing, v.Reason, v.ByBound, v.Traces = o.Standing, o.Reason, o.ByBound, o.Traces
	hits := make([]*pb.Hit, len(o.Hits))
	for i, h := range o.Hits {
		hits[i] = &pb.Hit{
			Point: int32(w.index), Trace: roleToProto(h.Role), Rule: h.Rule, Side: sideToProto(h.Side),
			WindowFirst: sentIndex(h.WindowFirst), FirstCounting: sentIndex(h.FirstCounting), Consequence: consequenceToProto(h.Consequence),
		}
	}
	w.report(hits, pt.Material)
	return nil
}

// sentIndex is the index of a value that was sent, or -1 for a stored point.
func sentIndex(r track.Ref) int32 { return int32(r.ID) - 1 }
