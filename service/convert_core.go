package service

import (
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/diagnostics"
	"limitary/internal/judge"
	"limitary/internal/limits"
)

// The functions here let commands that need no service answer in the contract's own messages.

// ComputedToProto writes computed limits, and what their data say, as ComputeLimits answers. Exclusions keep the group
// numbers of the computation.
func ComputedToProto(r limits.Result, d diagnostics.Report) *pb.ComputeLimitsResponse {
	return computedToProto(computed{r, d})
}

// EvaluatePoints judges n points as EvaluateBatch does and writes its answer. Point i is asked for once, in order, and
// not kept; those before firstJudged are context. Full adds one verdict a point.
func EvaluatePoints(j *judge.Judge, n, firstJudged int, full bool, point func(i int) judge.Point) *pb.EvaluationResult {
	w := newWalk(j, n, firstJudged, full)
	for i := range n {
		w.take(point(i))
	}
	return w.result()
}

// showImpossible undoes hideImpossible: a line of counts that was left out at the published size is judged all the same.
func showImpossible(in *pb.TraceLimits) *pb.TraceLimits {
	t := proto.CloneOf(in)
	var zero float64
	for _, l := range []*pb.Line{t.LowerAction, t.UpperAction, t.LowerWarning, t.UpperWarning} {
		if l != nil && l.Basis == pb.Basis_BASIS_TAIL_PROBABILITY && l.Value == nil {
			l.Value = &zero
			l.Tail = max(l.Tail, chart.ActionTail) // any: the judge takes the line from the centre
		}
	}
	return t
}

// ComputedLimits reads back what ComputeLimits answered, as limits to judge by; their traces have no rules yet. A line
// that does not lie where its basis puts it is refused, so that limits edited by hand do not pass for computed ones.
func ComputedLimits(in *pb.ComputeLimitsResponse) (judge.Limits, error) {
	l := judge.Limits{SubgroupSize: int(in.SubgroupSize), Places: int(in.PublishedDecimals), ProcessSigma: in.ProcessSigma}
	var err error
	if l.Kind, err = kindFromProto("kind", in.Kind); err != nil {
		return l, err
	}
	if l.Kind == chart.Given {
		return l, noKind()
	}
	if l.Places < 0 || l.Places > decimal.PlacesMax {
		return l, definition.Invalid("published_decimals", "%d: want 0 to %d", l.Places, decimal.PlacesMax)
	}
	if l.Model, err = modelFromProto(in.Model); err != nil {
		return l, under("model", err)
	}
	if !l.Kind.Counts() && !(in.ProcessSigma > 0) || !finite(in.ProcessSigma) || in.ProcessSigma < 0 {
		return l, definition.Invalid("process_sigma", "%v: want a finite number above 0", in.ProcessSigma)
	}
	for role, t := range [...]*pb.TraceLimits{in.Location, in.Dispersion} {
		name := chart.Role(role).String()
		if !l.Kind.Has(chart.Role(role)) {
			continue
		}
		if t == nil {
			return l, definition.Invalid(name, "is not set")
		}
		if l.Kind.Counts() {
			t = showImpossible(t)
		}
		if l.Traces[role], _, err = traceFromProto(t, l.Places); err != nil {
			return l, under(name, err)
		}
		if l.Traces[role].Centre == nil || l.Traces[role].Sigma == nil {
			return l, definition.Invalid(name, "has no centre or no sigma")
		}
	}
	return l, nil
}
