package service

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
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
}

func (b *evaluator) evaluate(ctx context.Context, e *pb.Evaluation) (*pb.EvaluationResult, error) {
	var with resolved
	var err error
	switch l := e.GetLimits().(type) {
	case *pb.Evaluation_Inline:
		with.judge, err = b.byInline(l.Inline)
		err = under("inline", err)
	case *pb.Evaluation_Chart:
		with, err = b.byChart(ctx, l.Chart)
		err = under("chart", err)
	default:
		err = definition.Invalid("limits", "are not set; want one of chart and inline")
	}
	if err != nil {
		return nil, err
	}
	var out *pb.EvaluationResult
	switch d := e.GetData().(type) {
	case *pb.Evaluation_Series:
		out, err = b.series(with.judge, d.Series.GetValues(), int(e.FirstJudged))
	case *pb.Evaluation_Points:
		out, err = b.points(with.judge, d.Points.GetPoints(), int(e.FirstJudged))
	default:
		err = definition.Invalid("data", "are not set; want one of series and points")
	}
	if err != nil {
		return nil, err
	}
	out.Version = int32(with.version)
	b.hits += len(out.Hits)
	return out, tooMany(dataField(e), b.hits, HitsMax, "hits in one answer; do the limits belong to these values?")
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
	}
	key := chosenVersion{in.Name, in.Lot, in.Version, at}
	if r, ok := b.judges[key]; ok {
		return r, nil
	}
	who, err := actor(ctx)
	if err != nil {
		return resolved{}, err
	}
	var v definition.Version
	if in.Version > 0 {
		v, _, _, err = b.service.store.GetVersion(ctx, who, in.Name, int(in.Version))
	} else {
		v, err = b.service.store.VersionInForce(ctx, who, in.Name, in.Lot, at)
	}
	if err != nil {
		return resolved{}, chartIsName(err)
	}
	j, err := b.service.store.VersionJudge(v)
	if err != nil {
		return resolved{}, err
	}
	r := resolved{j, v.Number}
	if b.judges == nil {
		b.judges = map[chosenVersion]resolved{}
	}
	b.judges[key] = r
	return r, nil
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

// inlineJudge builds the judge of limits sent along.
func inlineJudge(in *pb.InlineLimits) (*judge.Judge, error) {
	kind, err := kindFromProto("kind", in.GetKind())
	if err != nil {
		return nil, err
	}
	l := judge.Limits{Kind: kind, SubgroupSize: int(in.GetSubgroupSize()), Places: decimal.Unrounded}
	if in.PublishedDecimals != nil {
		if l.Places = int(*in.PublishedDecimals); l.Places < 0 || l.Places > decimal.PlacesMax {
			return nil, definition.Invalid("published_decimals", "%d: want 0 to %d", l.Places, decimal.PlacesMax)
		}
	}
	if l.Model, err = modelFromProto(in.GetModel()); err != nil {
		return nil, under("model", err)
	}
	if kind.SizeImplied() && l.SubgroupSize == 0 {
		l.SubgroupSize = 1
	}
	if kind == chart.Given && l.SubgroupSize != 0 {
		return nil, definition.Invalid("subgroup_size", "%d is given, but no kind; statistics are plotted as given", l.SubgroupSize)
	}
	for role, t := range [...]*pb.TraceLimits{in.GetLocation(), in.GetDispersion()} {
		l.Traces[role], _, err = traceFromProto(t, l.Places)
		if err != nil {
			return nil, under(chart.Role(role).String(), err)
		}
	}
	if !hasRules(l) {
		return nil, definition.Invalid("location.rules", "neither rules nor rule_set is given; give exactly one of them for a trace that is to be judged")
	}
	if l.ProcessSigma, err = inlineSigma(in, l); err != nil {
		return nil, err
	}
	j, err := judge.New(l)
	if err != nil {
		return nil, judgeRefusal(err)
	}
	return j, nil
}

func hasRules(l judge.Limits) bool {
	for _, t := range l.Traces {
		if t != nil && len(t.Rules) > 0 {
			return true
		}
	}
	return false
}

// inlineSigma gives the standard deviation of a single reading; 0 where none is known or needed.
func inlineSigma(in *pb.InlineLimits, l judge.Limits) (float64, error) {
	var sigma float64
	switch location := l.Traces[chart.Location]; {
	case in.ProcessSigma != nil:
		sigma = *in.ProcessSigma
		if l.Kind == chart.Given {
			return 0, definition.Invalid("process_sigma", "%v is given, but no kind; statistics are plotted as given", sigma)
		}
		if !(sigma > 0) || math.IsInf(sigma, 0) {
			return 0, definition.Invalid("process_sigma", "%v: want a finite number above 0", sigma)
		}
	case l.Kind == chart.RunMeans && l.Model.BetweenSigma > 0:
		return 0, definition.Invalid("process_sigma", "is not set; it is the standard deviation within runs, which the location trace does not tell")
	case l.Kind == chart.Given || l.Kind.Counts() || location == nil || location.Sigma == nil || !(*location.Sigma > 0):
		return 0, nil
	default:
		sigma = *location.Sigma * math.Sqrt(float64(l.SubgroupSize))
	}
	if l.Places != decimal.Unrounded && decimal.Round(sigma, l.Places) == 0 {
		return 0, definition.Invalid("published_decimals", "%d: the sigma of a single reading, %.4g, rounds to zero; publish more decimals", l.Places, sigma)
	}
	return sigma, nil
}

// judgeRefusal turns what the judge says of limits into a refusal; it names fields as the contract does.
func judgeRefusal(err error) error {
	var e *judge.Error
	if errors.As(err, &e) {
		return definition.Invalid(e.Field, "%s", e.Problem)
	}
	return err
}
