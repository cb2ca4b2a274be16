package service

import (
	"context"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// ExplainVerdict shows the points, lines and arithmetic behind the current verdict on a result.
func (s *EvaluationService) ExplainVerdict(ctx context.Context, in *pb.ExplainVerdictRequest) (*pb.ExplainVerdictResponse, error) {
	who, err := actor(ctx)
	if err = first(err, checkResultKey(in.Chart, in.Source, in.SourceId)); err != nil {
		return nil, err
	}
	result, before, err := s.store.Window(ctx, who, in.Chart, in.Source, in.SourceId, rules.WindowPointsMax)
	if err != nil {
		return nil, err
	}
	out := &pb.ExplainVerdictResponse{Result: storedToProto(result), Safety: definition.SafetyText}
	if result.Verdict.Version == 0 {
		out.Arithmetic = notJudgedSentences(result)
		return out, nil
	}
	v, _, _, err := s.store.GetVersion(ctx, who, in.Chart, result.Verdict.Version)
	if err != nil {
		return nil, err
	}
	j, err := s.store.VersionJudge(v)
	if err != nil {
		return nil, err
	}
	e := explainer{
		version: v, judge: j, result: result, before: pointsBefore(before, result), whole: len(before) < rules.WindowPointsMax,
	}
	if out.Rules, err = e.rules(); err != nil {
		return nil, err
	}
	changes, err := e.changeSentences()
	out.Arithmetic = append(e.sentences(), changes...)
	return out, err
}

// pointsBefore keeps the results that are points: repeats, voided and unjudged results are none.
func pointsBefore(before []store.StoredResult, result store.StoredResult) []store.StoredResult {
	var out []store.StoredResult
	for _, r := range before {
		if r.ID != result.ID && !r.Voided && r.Result.Role != definition.Repeat && r.Verdict.Standing != judge.NotJudged {
			out = append(out, r)
		}
	}
	return out
}

// explainer holds one verdict with everything it rests on.
type explainer struct {
	version definition.Version
	judge   *judge.Judge
	result  store.StoredResult
	before  []store.StoredResult // points, oldest first
	// whole is set where before reaches back to the first point of the segment.
	whole bool
}

// trace gives the results that are points of a trace, the explained one last.
func (e *explainer) trace(role chart.Role) []store.StoredResult {
	var out []store.StoredResult
	for _, r := range e.before {
		if r.Verdict.Traces[role].Point {
			out = append(out, r)
		}
	}
	if e.result.Verdict.Traces[role].Point {
		out = append(out, e.result)
	}
	return out
}

// rules explains every rule of the version: the completed ones first.
func (e *explainer) rules() ([]*pb.RuleExplanation, error) {
	var completed, others []*pb.RuleExplanation
	for role := range chart.Roles {
		plan := e.judge.Plan(role)
		if plan == nil {
			continue
		}
		points := e.trace(role)
		for _, spec := range plan.Specs() {
			hits := e.hits(role, spec.ID)
			for _, h := range hits {
				x, err := e.rule(role, spec, points, &h)
				if err != nil {
					return nil, err
				}
				completed = append(completed, x)
			}
			if len(hits) > 0 {
				continue
			}
			x, err := e.rule(role, spec, points, nil)
			if err != nil {
				return nil, err
			}
			others = append(others, x)
		}
	}
	return append(completed, others...), nil
}

func (e *explainer) hits(role chart.Role, rule string) []store.Hit {
	var out []store.Hit
	for _, h := range e.result.Verdict.Hits {
		if h.Role == role && h.Rule == rule {
			out = append(out, h)
		}
	}
	return out
}

func (e *explainer) rule(role chart.Role, spec rules.Spec, points []store.StoredResult, hit *store.Hit) (*pb.RuleExplanation, error) {
	means, look := spec.Advice()
	x := &pb.RuleExplanation{
		Trace: roleToProto(role), Rule: spec.ID, Description: spec.Describe(), Consequence: consequenceToProto(spec.Consequence),
		Means: means, LookFirst: look,
	}
	if !e.result.Verdict.Traces[role].Point {
		return x, nil
	}
	window := points[max(0, len(points)-spec.Window()):]
	if spec.Kind == rules.EWMA || spec.Kind == rules.CUSUM {
		window = points // these look at the whole segment; what is shown is its end
	}
	counts, side, err := e.counting(role, spec, window)
	if err != nil {
		return nil, err
	}
	if hit != nil {
		x.Completed, side = true, hit.Side
	}
	x.Side = sideToProto(side)
	for i, r := range window {
		t := r.Verdict.Traces[role]
		lines := traceVerdictToProto(t.Statistic, t.Scale, t.Lines)
		lines.Original = originalVerdict(e.judge, role, r.Result.Material, t.Statistic, t.Lines)
		x.Window = append(x.Window, &pb.WindowPoint{
			Result:    &pb.StoredKey{Source: r.Result.Source, SourceId: r.Result.SourceID, MeasuredAt: timeToProto(r.Result.MeasuredAt)},
			Statistic: t.Statistic, Lines: lines,
			Counts: counts(i, side),
		})
	}
	return x, nil
}

// counting tells which points of the window count towards the rule's pattern, and on which side most do. It asks the
// judge itself, with the rule made easier: a single point for k of m, ever shorter patterns for runs.
func (e *explainer) counting(role chart.Role, spec rules.Spec, window []store.StoredResult) (counts func(i int, side rules.Side) bool, side rules.Side, err error) {
	last := len(window) - 1
	switch spec.Kind {
	case rules.Beyond, rules.BeyondLine:
		alone := spec
		if spec.Kind == rules.Beyond {
			alone.K, alone.M = 1, 1
		}
		found, err := e.probe(role, alone, window)
		if err != nil {
			return nil, 0, err
		}
		var n [3]int
		on := map[int]rules.Side{}
		for _, h := range found {
			on[h.Point] = h.Side
			n[h.Side]++
		}
		if side = rules.Upper; n[rules.Lower] > n[rules.Upper] {
			side = rules.Lower
		}
		if len(found) == 0 {
			side = rules.NoSide
		}
		return func(i int, side rules.Side) bool { s, ok := on[i]; return ok && s == side }, side, nil
	case rules.SameSide, rules.Trend, rules.Alternating, rules.Within, rules.Outside:
		long := 0
		for n := len(window); n >= 2 && long == 0; n-- {
			shorter := spec
			shorter.N = n
			if spec.Kind == rules.Alternating && n < 3 {
				break
			}
			shorter.OneSideOK = true
			found, err := e.probe(role, shorter, window)
			if err != nil {
				return nil, 0, err
			}
			for _, h := range found {
				if h.Point == last {
					long, side = n, h.Side
				}
			}
		}
		return func(i int, _ rules.Side) bool { return i > last-long }, side, nil
	case rules.Span:
		return func(int, rules.Side) bool { return len(e.hits(role, spec.ID)) > 0 }, rules.NoSide, nil
	}
	first := e.firstCounting(role, spec.ID, window)
	return func(i int, _ rules.Side) bool { return first >= 0 && i >= first }, rules.NoSide, nil
}

// firstCounting finds the first point that counts for a completed rule within what is shown; -1 where it did not complete.
func (e *explainer) firstCounting(role chart.Role, rule string, window []store.StoredResult) int {
	for _, h := range e.hits(role, rule) {
		for i, r := range window {
			if r.Result.Source == h.FirstCounting.Source && r.Result.SourceID == h.FirstCounting.SourceID {
				return i
			}
		}
		return 0 // it lies before what is shown
	}
	return -1
}

// probe judges a window of stored points by one rule.
func (e *explainer) probe(role chart.Role, spec rules.Spec, window []store.StoredResult) (found []rules.Hit, err error) {
	err = e.replay(role, spec, window, false, func(h rules.Hit) { found = append(found, h) }, func(int, rules.Sum) {})
	return found, err
}

// replay judges stored points by one rule, in a new segment. It calls hit as the rule completes, its Point counting the
// points given, and, for an EWMA or CUSUM, after with what it has accumulated at each point.
func (e *explainer) replay(role chart.Role, spec rules.Spec, window []store.StoredResult, headStart bool, hit func(rules.Hit), after func(i int, s rules.Sum)) error {
	plan, err := e.judge.Alone(role, spec)
	if err != nil {
		return err
	}
	st := plan.Start(headStart)
	for i, r := range window {
		t := r.Verdict.Traces[role]
		at := func(h rules.Hit) { h.Point = i; hit(h) }
		if r.Verdict.ByBound {
			plan.JudgeBound(st, t.Statistic, boundOf(r.Result), t.Scale, at)
		} else {
			plan.Judge(st, []float64{t.Statistic}, []rules.Scale{t.Scale}, at)
		}
		for _, s := range plan.Sums(st) {
			after(i, s)
		}
	}
	return nil
}

// boundOf gives the bound of a result that was judged by one.
func boundOf(r definition.Result) decimal.Bound {
	for _, text := range r.Readings {
		if reading, err := decimal.ParseReading(text); err == nil && reading.Bound != decimal.Measured {
			return reading.Bound
		}
	}
	return decimal.Below // a measured value outside the domain of the chart's scale
}
