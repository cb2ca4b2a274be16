package service

import (
	"fmt"
	"math"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
)

// series judges single values. Without DETAIL_FULL the judge takes them as a whole, which is many times faster.
func (b *evaluator) series(j *judge.Judge, values []float64, firstJudged int) (*pb.EvaluationResult, error) {
	if k := j.Limits().Kind; k != chart.Given && k != chart.Individuals {
		return nil, definition.Invalid("series", "has one value a point, but the limits are of kind %s; send points with readings", k)
	}
	for i, x := range values {
		if math.IsInf(x, 0) {
			return nil, definition.Invalid(fmt.Sprintf("series.values[%d]", i), "%v: want a finite number, or NaN for no result", x)
		}
	}
	if b.full {
		w := newWalk(j, len(values), firstJudged, true)
		for i := range values {
			w.take(seriesPoint(values, i))
		}
		return w.result(), nil
	}
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
	return out, nil
}

// seriesPoint gives value i as a point.
func seriesPoint(values []float64, i int) judge.Point {
	if math.IsNaN(values[i]) {
		return judge.Point{}
	}
	return judge.Point{Readings: values[i : i+1 : i+1]}
}

// points judges subgroups or statistics one by one.
func (b *evaluator) points(j *judge.Judge, points []*pb.Point, firstJudged int) (*pb.EvaluationResult, error) {
	w := newWalk(j, len(points), firstJudged, b.full)
	limits := j.Limits()
	var one [1]float64 // the judge keeps no reading, so the statistics can share their place
	for i, p := range points {
		pt, err := pointFromProto(p, limits, &one)
		if err != nil {
			return nil, under(fmt.Sprintf("points.points[%d]", i), err)
		}
		w.take(pt)
	}
	return w.result(), nil
}

func pointFromProto(in *pb.Point, l judge.Limits, one *[1]float64) (judge.Point, error) {
	pt := judge.Point{Centre: in.Centre, Sigma: in.Sigma, Break: in.GetBreakBefore(), Material: in.GetMaterial()}
	if (in.Centre != nil || in.Sigma != nil) && l.Kind != chart.Given {
		return pt, definition.Invalid("centre", "centre and sigma of a point are given, but they follow from the number of readings on a chart of kind %s", l.Kind)
	}
	if in.Centre != nil && !finite(*in.Centre) {
		return pt, definition.Invalid("centre", "%v: want a finite number", *in.Centre)
	}
	if in.Sigma != nil && !(finite(*in.Sigma) && *in.Sigma > 0) {
		return pt, definition.Invalid("sigma", "%v: want a finite number above 0", *in.Sigma)
	}
	switch v := in.GetValue().(type) {
	case nil: // no result
	case *pb.Point_Statistic:
		if l.Kind != chart.Given && l.Kind != chart.Individuals {
			return pt, definition.Invalid("statistic", "%v: a chart of kind %s takes %s", v.Statistic, l.Kind, takes(l.Kind))
		}
		if !finite(v.Statistic) {
			return pt, definition.Invalid("statistic", "%v: want a finite number; a point without a value is no result", v.Statistic)
		}
		one[0] = v.Statistic
		pt.Readings = one[:]
	case *pb.Point_Readings:
		if err := checkReadings(v.Readings.GetValues(), l); err != nil {
			return pt, err
		}
		pt.Readings = v.Readings.GetValues()
	case *pb.Point_Count:
		if !l.Kind.Counts() {
			return pt, noCounts("count", l.Kind)
		}
		pt.Count = &chart.Count{Nonconforming: v.Count.GetNonconforming(), Inspected: v.Count.GetInspected()}
		if err := l.Kind.CheckCount(*pt.Count, l.SubgroupSize); err != nil {
			return pt, definition.Invalid("count", "%v", err)
		}
	}
	return pt, nil
}

func noCounts(field string, k chart.Kind) error {
	if k == chart.Given {
		return definition.Invalid(field, "is given, but the limits are for statistics plotted as given")
	}
	return definition.Invalid(field, "is given, but a chart of kind %s takes readings", k)
}

func checkReadings(values []float64, l judge.Limits) error {
	n := len(values)
	switch {
	case l.Kind.Counts():
		return definition.Invalid("readings", "are given, but a chart of kind %s takes counts", l.Kind)
	case l.Kind == chart.Given:
		return definition.Invalid("readings", "are given, but no kind; send the statistic that is plotted, or name a kind")
	case n == 0 || n > l.SubgroupSize:
		return &definition.Error{Reason: definition.WrongReadingCount, Field: "readings",
			Text: fmt.Sprintf("%d readings: want 1 to %d, the subgroup size", n, l.SubgroupSize)}
	case n < l.SubgroupSize && l.ProcessSigma == 0:
		return definition.Invalid("readings", "%d of %d readings, and the sigma of a single reading is not known; give process_sigma", n, l.SubgroupSize)
	}
	for i, x := range values {
		if !finite(x) {
			return definition.Invalid(fmt.Sprintf("readings.values[%d]", i), "%v: want a finite number", x)
		}
	}
	return nil
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// walk judges points in order and collects the answer.
type walk struct {
	judge       *judge.Judge
	state       *judge.State
	verdict     judge.Verdict
	index       int
	firstJudged int
	full        bool
	material    string
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

func (w *walk) take(pt judge.Point) {
	v := &w.verdict
	w.judge.Judge(w.state, pt, v)
	w.material = pt.Material
	for role, t := range v.Traces {
		if t.Point {
			w.places[role] = append(w.places[role], int32(w.index))
		}
	}
	if w.index >= w.firstJudged {
		w.report()
	}
	w.index++
}

func (w *walk) report() {
	v := &w.verdict
	if v.Standing != judge.NotJudged {
		w.out.PointsJudged++
	}
	w.worst = max(w.worst, v.Standing)
	from := len(w.out.Hits)
	for _, h := range v.Hits {
		spec := &w.judge.Plan(h.Role).Specs()[h.Rule]
		places := w.places[h.Role]
		last := len(places) - 1
		w.out.Hits = append(w.out.Hits, &pb.Hit{
			Point: int32(w.index), Trace: roleToProto(h.Role), Rule: spec.ID, Side: sideToProto(h.Side),
			WindowFirst: places[last-h.WindowBack], FirstCounting: places[last-h.FirstBack],
			Consequence: consequenceToProto(spec.Consequence),
		})
	}
	if w.full {
		w.out.Verdicts = append(w.out.Verdicts, w.pointVerdict(w.out.Hits[from:]))
	}
}

func (w *walk) pointVerdict(hits []*pb.Hit) *pb.PointVerdict {
	v := &w.verdict
	out := &pb.PointVerdict{Point: int32(w.index), Standing: standingToProto(v.Standing), Reason: notJudgedToProto(v.Reason), ByBound: v.ByBound}
	for role, t := range v.Traces {
		if !t.Point {
			continue
		}
		lines := w.judge.Lines(chart.Role(role), t.Scale)
		trace := traceVerdictToProto(t.Statistic, t.Scale, lines)
		trace.Original = originalVerdict(w.judge, chart.Role(role), w.material, t.Statistic, lines)
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
