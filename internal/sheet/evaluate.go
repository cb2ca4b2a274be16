package sheet

import (
	"context"
	"strconv"
	"strings"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/decimal"
)

// trial is values to be judged without being stored.
type trial struct {
	chart, lot string
	// alone judges the values by themselves; version is then the one to judge by, 0 for the one in force.
	alone   bool
	version int32
	points  []*pb.Point
}

// judged is what a trial came to, and where the track stands.
type judged struct {
	result *pb.EvaluationResult
	track  *pb.EvaluationResult
}

// try judges a trial, in one call wherever no version is named. The track's place comes with it.
func (h *Handler) try(ctx context.Context, t trial) (judged, error) {
	next := evaluation(&pb.ByChart{Name: t.chart, Lot: t.lot, ContinueTrack: true}, nil)
	switch {
	case t.version != 0 && !t.alone:
		return judged{}, refuse("version=%d: the stored track is judged by the version in force; add alone=1", t.version)
	case t.version != 0:
		return h.tryPinned(ctx, t)
	case !t.alone:
		next.Data = dataOf(t.points)
		got, err := h.evaluate(ctx, next)
		if err != nil {
			return judged{}, err
		}
		return judged{got[0], got[0]}, nil
	}
	got, err := h.evaluate(ctx, next, evaluation(&pb.ByChart{Name: t.chart, Lot: t.lot}, t.points))
	if err != nil {
		return judged{}, err
	}
	return judged{got[1], got[0]}, nil
}

// tryPinned judges by a version that was once approved, whatever is in force now.
func (h *Handler) tryPinned(ctx context.Context, t trial) (judged, error) {
	_, track, err := h.track(ctx, t.chart, t.lot)
	if err != nil {
		return judged{}, err
	}
	v, err := h.version(ctx, t.chart, track.Lot, t.version)
	if err != nil {
		return judged{}, err
	}
	got, err := h.evaluate(ctx, evaluation(&pb.ByChart{Name: t.chart, Lot: track.Lot, Version: v.Number}, t.points))
	if err != nil {
		return judged{}, err
	}
	return judged{got[0], &pb.EvaluationResult{TrackState: track.State}}, nil
}

func evaluation(by *pb.ByChart, points []*pb.Point) *pb.Evaluation {
	return &pb.Evaluation{Limits: &pb.Evaluation_Chart{Chart: by}, Data: dataOf(points)}
}

func dataOf(points []*pb.Point) *pb.Evaluation_Points {
	return &pb.Evaluation_Points{Points: &pb.Points{Points: points}}
}

func (h *Handler) evaluate(ctx context.Context, all ...*pb.Evaluation) ([]*pb.EvaluationResult, error) {
	got, err := h.evaluations.EvaluateBatch(ctx, &pb.EvaluateBatchRequest{Detail: pb.Detail_DETAIL_FULL, Evaluations: all})
	return got.GetEvaluations(), err
}

// pointOf makes a point of decimal texts with a point: readings, or a count where what was inspected is given.
func pointOf(texts []string, inspected, material string) (*pb.Point, error) {
	if inspected != "" {
		count, err := countOf(texts, inspected)
		return &pb.Point{Value: &pb.Point_Count{Count: count}, Material: material}, err
	}
	r := &pb.Readings{}
	bounded := false
	for _, text := range texts {
		reading, err := decimal.ParseReading(text)
		if err != nil {
			return nil, asRefusal(err)
		}
		bounded = bounded || reading.Bound != decimal.Measured
		r.Values, r.Bounds = append(r.Values, reading.Value), append(r.Bounds, bounds[reading.Bound])
	}
	if !bounded {
		r.Bounds = nil
	}
	return &pb.Point{Value: &pb.Point_Readings{Readings: r}, Material: material}, nil
}

var bounds = map[decimal.Bound]pb.ReadingBound{decimal.Below: pb.ReadingBound_READING_BOUND_BELOW, decimal.Above: pb.ReadingBound_READING_BOUND_ABOVE}

// countOf makes a count of its two texts; whether a chart can have it is for the service to say.
func countOf(texts []string, inspected string) (*pb.Count, error) {
	if len(texts) != 1 {
		return nil, refuse("%d values, and inspected=%s: a count is one value", len(texts), clip(inspected))
	}
	var numbers [2]float64
	for i, text := range []string{texts[0], inspected} {
		reading, err := decimal.ParseReading(text)
		if err != nil {
			return nil, asRefusal(err)
		}
		if reading.Bound != decimal.Measured {
			return nil, refuse("%q: a count is a number", clip(text))
		}
		numbers[i] = reading.Value
	}
	return &pb.Count{Nonconforming: numbers[0], Inspected: numbers[1]}, nil
}

// rulesHit names the rules that complete at a point, with their side.
func rulesHit(v *pb.PointVerdict) string {
	var all []string
	for _, t := range []*pb.TraceVerdict{v.GetLocation(), v.GetDispersion()} {
		for _, hit := range t.GetHits() {
			all = append(all, hitText(hit.Trace, hit.Rule, hit.Side))
		}
	}
	return strings.Join(all, ", ")
}

func hitText(trace pb.TraceRole, rule string, side pb.Side) string {
	text := rule
	if trace == pb.TraceRole_TRACE_ROLE_DISPERSION {
		text = "dispersion " + text
	}
	if side != pb.Side_SIDE_NONE {
		text += " " + strings.ToLower(word(side.String(), "SIDE_"))
	}
	return text
}

// afterText says what the values were judged after.
func (j judged) afterText(alone bool) string {
	switch from := j.track.ContinuedFrom; {
	case alone:
		return "judged alone"
	case from == nil:
		return "after no stored result"
	default:
		return "after the result of " + from.AsTime().Format(time.RFC3339Nano)
	}
}

func (j judged) version() string { return strconv.Itoa(int(j.result.Version)) }
