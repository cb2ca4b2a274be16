package service

import (
	"fmt"
	"math"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/store"
)

// series judges single values. Without DETAIL_FULL the judge takes them as a whole, which is many times faster.
func (b *evaluator) series(with resolved, values []float64, firstJudged int) (*pb.EvaluationResult, error) {
	j := with.judge
	if k := j.Limits().Kind; k != chart.Given && k != chart.Individuals {
		return nil, definition.Invalid("series", "has one value a point, but the limits are of kind %s; send points with readings", k)
	}
	for i, x := range values {
		if math.IsInf(x, 0) {
			return nil, definition.Invalid(fmt.Sprintf("series.values[%d]", i), "%v: want a finite number, or NaN for no result", x)
		}
	}
	if b.full || with.after != nil {
		w := with.walk(len(values), firstJudged, b.full)
		for i := range values {
			if err := w.next(seriesPoint(values, i)); err != nil {
				return nil, err
			}
		}
		return w.result(), nil
	}
	return seriesAtOnce(j, values, firstJudged), nil
}

func seriesAtOnce(j *judge.Judge, values []float64, firstJudged int) *pb.EvaluationResult {
	all := j.Series(values)
	for len(all) > 0 && all[0].Point < firstJudged {
		all = all[1:]
	}
	out := &pb.EvaluationResult{Hits: make([]*pb.Hit, len(all))}
	slab := make([]pb.Hit, len(all))
	worst := judge.NotJudged
	for _, x := range values[firstJudged:] {
		if !math.IsNaN(x) {
			out.PointsJudged++
		}
	}
	if out.PointsJudged > 0 {
		worst = judge.Clear
	}
	for i, h := range all {
		spec := &j.Plan(h.Role).Specs()[h.Rule]
		worst = max(worst, judge.StandingOf(spec.Consequence))
		out.Hits[i] = &slab[i]
		slab[i].Point, slab[i].Trace, slab[i].Rule = int32(h.Point), roleToProto(h.Role), spec.ID
		slab[i].Side, slab[i].Consequence = sideToProto(h.Side), consequenceToProto(spec.Consequence)
		slab[i].WindowFirst, slab[i].FirstCounting = int32(h.WindowFirst), int32(h.FirstCounting)
	}
	out.Standing = standingToProto(worst)
	return out
}

// seriesPoint gives value i as a point.
func seriesPoint(values []float64, i int) judge.Point {
	if math.IsNaN(values[i]) {
		return judge.Point{}
	}
	return judge.Point{Readings: values[i : i+1 : i+1]}
}

// points judges subgroups or statistics one by one.
func (b *evaluator) points(with resolved, points []*pb.Point, firstJudged int) (*pb.EvaluationResult, error) {
	w := with.walk(len(points), firstJudged, b.full)
	limits := with.judge.Limits()
	var one [1]float64 // the judge keeps no reading, so the statistics can share their place
	for i, p := range points {
		pt, err := pointFromProto(p, limits, &one)
		if err != nil {
			return nil, under(fmt.Sprintf("points.points[%d]", i), err)
		}
		if err := w.next(pt); err != nil {
			return nil, err
		}
	}
	return w.result(), nil
}

// walk judges points in order and collects the answer.
type walk struct {
	judge *judge.Judge
	state *judge.State
	// after is set where the points continue a stored track, which then keeps the state.
	after       *store.Continuation
	verdict     judge.Verdict
	index       int
	firstJudged int
	full        bool
	worst       judge.Standing
	out         *pb.EvaluationResult
	// places has, for each trace, the index of every point it has had: hits count back in points of their trace.
	places [chart.Roles][]int32
}

func newWalk(j *judge.Judge, n, firstJudged int, full bool) *walk {
	w := &walk{judge: j, state: j.NewState(), firstJudged: firstJudged, full: full, out: &pb.EvaluationResult{}}
	for role := range w.places {
		if j.Plan(chart.Role(role)) != nil {
			w.places[role] = make([]int32, 0, n)
		}
	}
	if full {
		w.out.Verdicts = make([]*pb.PointVerdict, 0, n-firstJudged)
	}
	return w
}

// next judges the next point, of a stored track where there is one.
func (w *walk) next(pt judge.Point) error {
	if w.after != nil {
		return w.continued(pt)
	}
	w.take(pt)
	return nil
}

// take judges the next point of what was sent.
func (w *walk) take(pt judge.Point) {
	v := &w.verdict
	w.judge.Judge(w.state, pt, v)
	for role, t := range v.Traces {
		if t.Point {
			w.places[role] = append(w.places[role], int32(w.index))
		}
	}
	var hits []*pb.Hit
	for _, h := range v.Hits {
		spec := &w.judge.Plan(h.Role).Specs()[h.Rule]
		places := w.places[h.Role]
		last := len(places) - 1
		hits = append(hits, &pb.Hit{
			Point: int32(w.index), Trace: roleToProto(h.Role), Rule: spec.ID, Side: sideToProto(h.Side),
			WindowFirst: places[last-h.WindowBack], FirstCounting: places[last-h.FirstBack],
			Consequence: consequenceToProto(spec.Consequence),
		})
	}
	w.report(hits, pt.Material)
}

// report answers for the newest point.
func (w *walk) report(hits []*pb.Hit, material string) {
	at := w.index
	w.index++
	if at < w.firstJudged {
		return
	}
	if w.verdict.Standing != judge.NotJudged {
		w.out.PointsJudged++
	}
	w.worst = max(w.worst, w.verdict.Standing)
	w.out.Hits = append(w.out.Hits, hits...)
	if w.full {
		w.out.Verdicts = append(w.out.Verdicts, w.pointVerdict(at, material, hits))
	}
}

func (w *walk) pointVerdict(at int, material string, hits []*pb.Hit) *pb.PointVerdict {
	v := &w.verdict
	out := &pb.PointVerdict{Point: int32(at), Standing: standingToProto(v.Standing), Reason: notJudgedToProto(v.Reason), ByBound: v.ByBound}
	for role, t := range v.Traces {
		if !t.Point {
			continue
		}
		lines := w.judge.Lines(chart.Role(role), t.Scale)
		trace := traceVerdictToProto(t.Statistic, t.Scale, lines)
		trace.Original = originalVerdict(w.judge, chart.Role(role), material, t.Statistic, lines)
		for _, h := range hits {
			if h.Trace == roleToProto(chart.Role(role)) {
				trace.Hits = append(trace.Hits, h)
			}
		}
		if chart.Role(role) == chart.Location {
			out.Location = trace
		} else {
			out.Dispersion = trace
		}
	}
	return out
}

func (w *walk) result() *pb.EvaluationResult {
	w.out.Standing = standingToProto(w.worst)
	return w.out
}
