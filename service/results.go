package service

import (
	"context"
	"errors"
	"fmt"
	"slices"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/store"
)

// PostResults stores control results and judges them, each row answered in order.
func (s *EvaluationService) PostResults(ctx context.Context, in *pb.PostResultsRequest) (*pb.PostResultsResponse, error) {
	who, err := actor(ctx)
	if err != nil {
		return nil, err
	}
	if err := tooMany("results", len(in.Results), ResultsMax, "results"); err != nil {
		return nil, err
	}
	if len(in.Results) == 0 {
		return nil, definition.Invalid("results", "is empty; want 1 to %d results", ResultsMax)
	}
	results := make([]definition.Result, len(in.Results))
	var refused []*definition.Error
	for i, row := range in.Results {
		r, err := resultFromProto(row)
		if err == nil {
			err = checkSource(who, r.Source)
		}
		results[i] = r
		if err == nil {
			continue
		}
		var e *definition.Error
		if !errors.As(err, &e) {
			return nil, err
		}
		if refused == nil {
			refused = make([]*definition.Error, len(in.Results))
		}
		refused[i] = e.At(fmt.Sprintf("results[%d]", i))
	}
	answer, err := s.store.PostResults(ctx, who, results, in.AllOrNothing, refused)
	if err != nil {
		return nil, err
	}
	out := &pb.PostResultsResponse{Results: make([]*pb.PostedResult, len(answer.Rows)), Tracks: updatesToProto(answer.Tracks)}
	for i, p := range answer.Rows {
		out.Results[i] = postedToProto(i, in.Results[i], p)
	}
	return out, nil
}

// checkSource refuses a source that the key may not post as. A key that names no sources may post as any, also as one
// that another key names: only the sources of its own key bind a caller.
func checkSource(who store.Actor, source string) error {
	if len(who.Key.Sources) > 0 && !slices.Contains(who.Key.Sources, source) {
		return &definition.Error{Reason: definition.SourceNotOwn, Field: "source", Text: fmt.Sprintf("%q is none of the sources of key %s", clip(source), who.Key.ID)}
	}
	return nil
}

func checkResultKey(chart, source, sourceID string) error {
	return first(definition.CheckSlug("chart", chart), checkName("source", source, 1), checkName("source_id", sourceID, 1))
}

// GetResult gives a result with all its revisions and the verdicts each has had.
func (s *EvaluationService) GetResult(ctx context.Context, in *pb.GetResultRequest) (*pb.GetResultResponse, error) {
	who, err := actor(ctx)
	if err = first(err, checkResultKey(in.Chart, in.Source, in.SourceId)); err != nil {
		return nil, err
	}
	r, revisions, err := s.store.GetResult(ctx, who, in.Chart, in.Source, in.SourceId)
	if err != nil {
		return nil, err
	}
	out := &pb.GetResultResponse{Result: storedToProto(r), Revisions: make([]*pb.ResultRevision, len(revisions))}
	for i, rev := range revisions {
		out.Revisions[i] = revisionToProto(rev)
	}
	return out, nil
}

// ListResults gives the results of a chart in the order they are judged.
func (s *EvaluationService) ListResults(ctx context.Context, in *pb.ListResultsRequest) (*pb.ListResultsResponse, error) {
	who, err := actor(ctx)
	if err = first(err, definition.CheckSlug("chart", in.Chart), checkName("lot", in.Lot, 0)); err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	from, to, err := readBetween(in.From, in.To)
	if err != nil {
		return nil, err
	}
	filter := store.ResultFilter{Chart: in.Chart, Lot: in.Lot, From: from, To: to, IncludeVoided: in.IncludeVoided, Descending: in.Descending}
	found, next, err := s.store.ListResults(ctx, who, filter, p)
	if err != nil {
		return nil, err
	}
	return &pb.ListResultsResponse{Results: storedAllToProto(found), NextPageToken: next}, nil
}

// GetRun gives the results of one analytical run.
func (s *EvaluationService) GetRun(ctx context.Context, in *pb.GetRunRequest) (*pb.GetRunResponse, error) {
	who, err := actor(ctx)
	if err = first(err, checkName("run_id", in.RunId, 1)); err != nil {
		return nil, err
	}
	from, to, err := readBetween(in.From, in.To)
	if err != nil {
		return nil, err
	}
	found, err := s.store.GetRun(ctx, who, in.RunId, from, to)
	if err != nil {
		return nil, err
	}
	return &pb.GetRunResponse{Results: storedAllToProto(found), Standing: standingToProto(runStanding(found))}, nil
}

// runStanding gives the worst standing of a run. A control that was not judged leaves the run not judged, unless
// another one is worse than clear. Voided results have no say.
func runStanding(found []store.StoredResult) judge.Standing {
	worst, unjudged := judge.NotJudged, false
	for _, r := range found {
		if r.Voided {
			continue
		}
		worst = max(worst, r.Verdict.Standing)
		unjudged = unjudged || r.Verdict.Standing == judge.NotJudged
	}
	if worst == judge.Clear && unjudged {
		return judge.NotJudged
	}
	return worst
}
