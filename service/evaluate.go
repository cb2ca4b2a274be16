package service

import (
	"context"
	"errors"
	"fmt"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// EvaluationService judges values, and keeps and judges control results.
type EvaluationService struct {
	pb.UnimplementedEvaluationServiceServer
	store *store.Store
}

// EvaluateBatch judges sequences of values and stores nothing.
func (s *EvaluationService) EvaluateBatch(ctx context.Context, in *pb.EvaluateBatchRequest) (*pb.EvaluateBatchResponse, error) {
	if err := checkEvaluations(in); err != nil {
		return nil, err
	}
	out := &pb.EvaluateBatchResponse{
		Evaluations: make([]*pb.EvaluationResult, len(in.Evaluations)),
		Judge:       rules.JudgeNumber,
	}
	batch := evaluator{service: s, full: in.Detail == pb.Detail_DETAIL_FULL}
	for i, e := range in.Evaluations {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		result, err := batch.evaluate(ctx, e)
		if err != nil {
			return nil, under(fmt.Sprintf("evaluations[%d]", i), err)
		}
		out.Evaluations[i] = result
	}
	return out, nil
}

// checkEvaluations checks everything that only needs counting, before any value is looked at.
func checkEvaluations(in *pb.EvaluateBatchRequest) error {
	if err := tooMany("evaluations", len(in.Evaluations), EvaluationsMax, "evaluations"); err != nil {
		return err
	}
	if in.Detail != pb.Detail_DETAIL_UNSPECIFIED && in.Detail != pb.Detail_DETAIL_FULL {
		return definition.Invalid("detail", "%d: no such value", in.Detail)
	}
	total, answered := 0, 0
	for i, e := range in.Evaluations {
		n := lengthOf(e)
		if n > PointsMax {
			return tooMany(fmt.Sprintf("evaluations[%d].%s", i, dataField(e)), n, PointsMax, "values in one evaluation")
		}
		if f := e.GetFirstJudged(); f < 0 || int(f) > n {
			return definition.Invalid(fmt.Sprintf("evaluations[%d].first_judged", i), "%d: want 0 to %d, the number of values", f, n)
		}
		total += n
		answered += n - int(e.GetFirstJudged())
	}
	if err := tooMany("evaluations", total, PointsTotalMax, "values in all"); err != nil {
		return err
	}
	if in.Detail == pb.Detail_DETAIL_FULL {
		return tooMany("detail", answered, VerdictsMax, "points to answer one by one with DETAIL_FULL")
	}
	return nil
}

func lengthOf(e *pb.Evaluation) int {
	if s := e.GetSeries(); s != nil {
		return len(s.Values)
	}
	return len(e.GetPoints().GetPoints())
}

func dataField(e *pb.Evaluation) string {
	if e.GetSeries() != nil {
		return "series.values"
	}
	return "points.points"
}

// evaluator carries what the evaluations of one call share.
type evaluator struct {
	service *EvaluationService
	full    bool
	hits    int
	// judges are the versions already resolved for this call, so that "in force" means one moment in all of it.
	judges map[chosenVersion]resolved
	// inline is the judge of the limits sent last; a batch often judges many series by the same.
	inline     *judge.Judge
	inlineFrom *pb.InlineLimits
}

type chosenVersion struct {
	chart, lot string
	number     int32
	at         time.Time
}

type resolved struct {
	judge   *judge.Judge
	version int
	// after is set where the values continue a stored track.
	after *store.Continuation
}

func (b *evaluator) evaluate(ctx context.Context, e *pb.Evaluation) (*pb.EvaluationResult, error) {
	with, err := b.resolve(ctx, e)
	if err != nil {
		return nil, err
	}
	var out *pb.EvaluationResult
	switch d := e.GetData().(type) {
	case *pb.Evaluation_Series:
		out, err = b.series(with, d.Series.GetValues(), int(e.FirstJudged))
	case *pb.Evaluation_Points:
		out, err = b.points(with, d.Points.GetPoints(), int(e.FirstJudged))
	default:
		err = definition.Invalid("data", "are not set; want one of series and points")
	}
	if err != nil {
		return nil, err
	}
	out.Version = int32(with.version)
	with.say(out)
	b.hits += len(out.Hits)
	return out, tooMany(dataField(e), b.hits, HitsMax, "hits in one answer; do the limits belong to these values?")
}

// resolve finds what judges the values.
func (b *evaluator) resolve(ctx context.Context, e *pb.Evaluation) (with resolved, err error) {
	switch l := e.GetLimits().(type) {
	case *pb.Evaluation_Inline:
		with.judge, err = b.byInline(l.Inline)
		return with, under("inline", err)
	case *pb.Evaluation_Chart:
		with, err = b.byChart(ctx, l.Chart)
		return with, under("chart", err)
	}
	return with, definition.Invalid("limits", "are not set; want one of chart and inline")
}

func (b *evaluator) byInline(in *pb.InlineLimits) (*judge.Judge, error) {
	if b.inline != nil && sameInline(b.inlineFrom, in) {
		return b.inline, nil
	}
	j, err := inlineJudge(in)
	if err == nil {
		b.inline, b.inlineFrom = j, in
	}
	return j, err
}

// sameInline reports limits of the plainest kind, one trace with a set of rules and no lines of its own, that are the
// same. It says no where it would have to look further.
func sameInline(a, b *pb.InlineLimits) bool {
	plain := func(l *pb.InlineLimits) bool {
		t := l.GetLocation()
		return l.GetDispersion() == nil && l.GetProcessSigma() == 0 && t != nil && len(t.Rules) == 0 &&
			t.LowerAction == nil && t.UpperAction == nil && t.LowerWarning == nil && t.UpperWarning == nil
	}
	return plain(a) && plain(b) && a.Kind == b.Kind && a.SubgroupSize == b.SubgroupSize &&
		equalOptional(a.PublishedDecimals, b.PublishedDecimals) && (a.ProcessSigma == nil) == (b.ProcessSigma == nil) &&
		equalOptional(a.Location.Centre, b.Location.Centre) && equalOptional(a.Location.Sigma, b.Location.Sigma) &&
		a.Location.RuleSet == b.Location.RuleSet
}

func equalOptional[T comparable](a, b *T) bool {
	return a == nil && b == nil || a != nil && b != nil && *a == *b
}

// byChart resolves a version once for each way the call names it.
func (b *evaluator) byChart(ctx context.Context, in *pb.ByChart) (resolved, error) {
	at, err := readMoment("at", in.At)
	err = first(definition.CheckSlug("name", in.Name), checkName("lot", in.Lot, 0), err)
	switch {
	case err != nil:
		return resolved{}, err
	case in.Version < 0:
		return resolved{}, definition.Invalid("version", "%d: want a version number, or 0 for the one in force", in.Version)
	case in.Version > 0 && in.At != nil:
		return resolved{}, definition.Invalid("at", "is given beside version %d; give at most one of them", in.Version)
	case in.Version > 0 && in.ContinueTrack:
		return resolved{}, definition.Invalid("continue_track", "is given beside version %d; the next points of a track are judged by the version in force", in.Version)
	case in.ContinueTrack:
		return b.byTrack(ctx, in, at)
	}
	key := chosenVersion{in.Name, in.Lot, in.Version, at}
	if r, ok := b.judges[key]; ok {
		return r, nil
	}
	who, err := actor(ctx)
	if err != nil {
		return resolved{}, err
	}
	var r resolved
	if in.Version > 0 {
		r, err = b.byNumber(ctx, who, in.Name, int(in.Version))
	} else {
		r.version, r.judge, err = b.service.store.JudgeInForce(ctx, who, in.Name, in.Lot, at)
	}
	if err != nil {
		return resolved{}, chartIsName(err)
	}
	if b.judges == nil {
		b.judges = map[chosenVersion]resolved{}
	}
	b.judges[key] = r
	return r, nil
}

func (b *evaluator) byNumber(ctx context.Context, who store.Actor, chart string, number int) (resolved, error) {
	v, _, _, err := b.service.store.GetVersion(ctx, who, chart, number)
	if err != nil {
		return resolved{}, err
	}
	j, err := b.service.store.VersionJudge(v)
	return resolved{judge: j, version: v.Number}, err
}

// chartIsName gives what the store says of a chart the field that holds its name here.
func chartIsName(err error) error {
	var e *definition.Error
	if !errors.As(err, &e) || e.Field != "chart" {
		return err
	}
	renamed := *e
	renamed.Field = "name"
	return &renamed
}
