package service

import (
	"context"
	"fmt"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// version reads a version as it now stands.
func (s *LimitService) version(ctx context.Context, who store.Actor, chart string, number int) (*pb.Version, error) {
	v, patterns, inForce, err := s.store.GetVersion(ctx, who, chart, number)
	if err != nil {
		return nil, err
	}
	out := versionToProto(v)
	out.InForce = inForce
	for _, p := range patterns {
		out.PatternsEnded = append(out.PatternsEnded, patternToProto(p))
	}
	return out, nil
}

func checkVersion(chart string, number int32) error {
	return first(definition.CheckSlug("chart", chart), checkID("version", int64(number)))
}

// GetVersion gives a version; for a proposal also the patterns in progress that it would end.
func (s *LimitService) GetVersion(ctx context.Context, in *pb.GetVersionRequest) (*pb.GetVersionResponse, error) {
	who, err := actor(ctx)
	if err = first(err, checkVersion(in.Chart, in.Version)); err != nil {
		return nil, err
	}
	v, err := s.version(ctx, who, in.Chart, int(in.Version))
	if err != nil {
		return nil, err
	}
	return &pb.GetVersionResponse{Version: v}, nil
}

// ListVersions gives the versions of a chart, newest number first, without what each leaves out of its estimate.
func (s *LimitService) ListVersions(ctx context.Context, in *pb.ListVersionsRequest) (*pb.ListVersionsResponse, error) {
	who, err := actor(ctx)
	if err = first(err, definition.CheckSlug("chart", in.Chart)); err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	versions, next, err := s.store.ListVersions(ctx, who, in.Chart, p)
	if err != nil {
		return nil, err
	}
	tracks, err := allTracks(ctx, s.store, who, in.Chart)
	if err != nil {
		return nil, err
	}
	inForce := map[int]bool{}
	for _, t := range tracks {
		inForce[t.Version] = true
	}
	out := &pb.ListVersionsResponse{Versions: make([]*pb.Version, len(versions)), NextPageToken: next}
	for i, v := range versions {
		out.Versions[i] = versionToProto(v)
		out.Versions[i].InForce = inForce[v.Number]
		out.Versions[i].ExcludedResults, out.Versions[i].ExcludedPoints = nil, nil // up to a megabyte each
	}
	return out, nil
}

// ApproveVersion puts a proposed version in force.
func (s *LimitService) ApproveVersion(ctx context.Context, in *pb.ApproveVersionRequest) (*pb.ApproveVersionResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	least := 0
	if in.Rejudge {
		least = 1
	}
	err = first(err, checkVersion(in.Chart, in.Version), checkDigest(in.Digest), definition.CheckText("reason", in.Reason, least, ReasonBytesMax),
		tooMany("accepted_patterns", len(in.AcceptedPatterns), PatternsMax, "patterns"))
	if err != nil {
		return nil, err
	}
	for i, p := range in.AcceptedPatterns {
		if err := definition.CheckText(fmt.Sprintf("accepted_patterns[%d]", i), p, 1, definition.TextBytesMax); err != nil {
			return nil, err
		}
	}
	_, rejudged, err := s.store.ApproveVersion(ctx, who, req, in.Chart, int(in.Version), in.Digest, in.Rejudge, in.Reason, in.AcceptedPatterns)
	if err != nil {
		return nil, err
	}
	v, err := s.version(ctx, who, in.Chart, int(in.Version))
	if err != nil {
		return nil, err
	}
	return &pb.ApproveVersionResponse{Version: v, ResultsRejudged: int64(rejudged)}, nil
}

// digestHexLen is the length of SHA-256 in hexadecimal.
const digestHexLen = 64

func checkDigest(digest string) error {
	if len(digest) != digestHexLen {
		return definition.Invalid("digest", "%q: want the %d hexadecimal digits of the version that was read", clip(digest), digestHexLen)
	}
	return definition.CheckText("digest", digest, digestHexLen, digestHexLen)
}

// RejectVersion ends a proposal.
func (s *LimitService) RejectVersion(ctx context.Context, in *pb.RejectVersionRequest) (*pb.RejectVersionResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err = first(err, checkVersion(in.Chart, in.Version), definition.CheckText("reason", in.Reason, 1, ReasonBytesMax)); err != nil {
		return nil, err
	}
	v, err := s.store.RejectVersion(ctx, who, req, in.Chart, int(in.Version), in.Reason)
	if err != nil {
		return nil, err
	}
	return &pb.RejectVersionResponse{Version: versionToProto(v)}, nil
}

// WithdrawVersion takes an approved version out of force, or asks for it where another principal confirms it first.
func (s *LimitService) WithdrawVersion(ctx context.Context, in *pb.WithdrawVersionRequest) (*pb.WithdrawVersionResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err = first(err, checkVersion(in.Chart, in.Version), definition.CheckText("reason", in.Reason, 1, ReasonBytesMax)); err != nil {
		return nil, err
	}
	_, rejudged, ch, err := s.store.WithdrawVersion(ctx, who, req, in.Chart, int(in.Version), in.Rejudge, in.Reason)
	if err != nil {
		return nil, err
	}
	v, err := s.version(ctx, who, in.Chart, int(in.Version))
	if err != nil {
		return nil, err
	}
	return &pb.WithdrawVersionResponse{Version: v, ResultsRejudged: int64(rejudged), Request: changeToProto(ch)}, nil
}
