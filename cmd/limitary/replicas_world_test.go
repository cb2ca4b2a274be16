package main

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
)

// replicaEpoch is long past, so that nothing lies in the future.
var replicaEpoch = time.Date(2025, 3, 1, 8, 0, 0, 0, time.UTC)

// wireWorld is one schedule: what happens to a chart, whatever the order.
type wireWorld struct {
	seed     uint64
	lots     bool
	results  []*pb.Result
	versions []*pb.ProposeVersionRequest
	withdraw map[int]bool
	amend    map[int]*pb.Result
	void     []int
	marks    []*pb.Mark
	voidMark map[int]bool
}

func newWireWorld(seed uint64, results int) *wireWorld {
	r := rand.New(rand.NewPCG(seed, 77))
	w := &wireWorld{seed: seed, lots: seed%3 == 1, withdraw: map[int]bool{}, amend: map[int]*pb.Result{}, voidMark: map[int]bool{}}
	for i := range results {
		w.results = append(w.results, w.result(r, i))
	}
	for i := range 1 + r.IntN(3) {
		w.versions = append(w.versions, wireVersion(r, i, results))
		w.withdraw[i] = i > 0 && r.IntN(4) == 0
	}
	for range 1 + r.IntN(4) {
		i := r.IntN(results)
		w.amend[i] = w.result(r, r.IntN(results))
		w.amend[i].SourceId = w.results[i].SourceId
	}
	for range 1 + r.IntN(3) {
		if i := r.IntN(results); w.amend[i] == nil && !slices.Contains(w.void, i) {
			w.void = append(w.void, i)
		}
	}
	for i := range r.IntN(3) {
		at := timestamppb.New(replicaEpoch.Add(time.Duration(r.IntN(results)) * time.Hour))
		w.marks = append(w.marks, &pb.Mark{At: at, Text: fmt.Sprint("mark ", i), Break: true, Restart: r.IntN(2) == 0})
		w.voidMark[i] = r.IntN(3) == 0
	}
	return w
}

// result draws values from a coarse grid, so that ties on lines are common.
func (w *wireWorld) result(r *rand.Rand, i int) *pb.Result {
	at := replicaEpoch.Add(time.Duration(i) * time.Hour)
	if r.IntN(8) == 0 {
		at = replicaEpoch.Add(time.Duration(i/4*4) * time.Hour)
	}
	value := 10 + float64(r.IntN(9)-4)*0.5 + float64(r.IntN(12)/11)*3
	res := &pb.Result{
		Source: "lims", SourceId: fmt.Sprintf("s%03d", i), MeasuredAt: at.Format(time.RFC3339), Role: pb.ResultRole_RESULT_ROLE_ROUTINE,
		Readings: []string{fmt.Sprintf("%.1f", value)}, Unit: "mg/L", RunId: fmt.Sprint("run", i/5),
	}
	switch r.IntN(15) {
	case 0:
		res.Role, res.RepeatOf = pb.ResultRole_RESULT_ROLE_REPEAT, "s000"
	case 1:
		res.Readings[0] = "<" + res.Readings[0]
	case 2:
		res.Readings[0] = ">" + res.Readings[0]
	}
	if w.lots {
		res.Lot = []string{"A", "B"}[r.IntN(2)]
	}
	return res
}

// wireVersion gives figures and rules of every kind that a decision may end or begin.
func wireVersion(r *rand.Rand, i, results int) *pb.ProposeVersionRequest {
	const look, act, stop = pb.Consequence_CONSEQUENCE_LOOK, pb.Consequence_CONSEQUENCE_ACT, pb.Consequence_CONSEQUENCE_STOP
	beyondLine := &pb.RuleSpec_BeyondLine_{BeyondLine: &pb.RuleSpec_BeyondLine{Line: pb.LineKind_LINE_KIND_ACTION}}
	from := replicaEpoch.Add(time.Duration(i*results/3+r.IntN(5)-2) * time.Hour)
	return &pb.ProposeVersionRequest{
		Centre: proto.Float64(10), ProcessSigma: proto.Float64([]float64{0.5, 1, 1}[r.IntN(3)]), PublishedDecimals: proto.Int32(2),
		LocationRules: &pb.TraceRules{Rules: []*pb.RuleSpec{
			{Id: "a", Consequence: stop, Rule: beyondLine},
			{Id: "b", Consequence: act, Rule: &pb.RuleSpec_SameSide_{SameSide: &pb.RuleSpec_SameSide{N: int32(3 + r.IntN(4))}}},
			{Id: "c", Consequence: act, Rule: &pb.RuleSpec_Beyond_{Beyond: &pb.RuleSpec_Beyond{K: 2, M: 3, Z: 1}}},
			{Id: "d", Consequence: look, Rule: &pb.RuleSpec_Trend_{Trend: &pb.RuleSpec_Trend{N: 3}}},
			{Id: "e", Consequence: act, Rule: &pb.RuleSpec_Cusum_{Cusum: &pb.RuleSpec_Cusum{K: 0.5, H: 2, HeadStart: float64(r.IntN(2))}}},
			{Id: "f", Consequence: look, Rule: &pb.RuleSpec_Ewma_{Ewma: &pb.RuleSpec_Ewma{Lambda: 0.4, Limit: 1.5}}},
		}},
		DispersionRules: &pb.TraceRules{Rules: []*pb.RuleSpec{{Id: "m", Consequence: act, Rule: beyondLine}}},
		EffectiveFrom:   timestamppb.New(from), Reason: "set-up",
	}
}
