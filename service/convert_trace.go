package service

import (
	"math"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

// kindFromProto reads a chart kind; unspecified is chart.Given, which only inline limits may have.
func kindFromProto(field string, k pb.ChartKind) (chart.Kind, error) {
	if k < pb.ChartKind_CHART_KIND_UNSPECIFIED || k > pb.ChartKind_CHART_KIND_RELATIVE_RANGE {
		return chart.Given, definition.Invalid(field, "%d: no such value", k)
	}
	return chart.Kind(k), nil
}

func kindToProto(k chart.Kind) pb.ChartKind { return pb.ChartKind(k) }

func basisFromProto(b pb.Basis) (chart.Basis, error) {
	switch {
	case b == pb.Basis_BASIS_UNSPECIFIED:
		return chart.SigmaMultiple, nil
	case b < 0 || b > pb.Basis_BASIS_ABSENT:
		return 0, definition.Invalid("basis", "%d: no such value", b)
	}
	return chart.Basis(b - pb.Basis_BASIS_SIGMA_MULTIPLE), nil
}

// fixedLine reads a line whose position does not follow from sigma, or an absent one.
func fixedLine(in *pb.Line) (chart.Line, error) {
	basis, err := basisFromProto(in.GetBasis())
	if err != nil {
		return chart.Line{}, err
	}
	line := chart.Line{Basis: basis}
	switch {
	case basis == chart.Absent && in.Value != nil:
		return line, definition.Invalid("value", "%v is given, but the basis is ABSENT", in.GetValue())
	case in.GetTail() != 0 && basis != chart.TailProbability:
		return line, definition.Invalid("tail", "%v is given, but the basis is not TAIL_PROBABILITY", in.GetTail())
	case basis == chart.Absent || basis == chart.SigmaMultiple:
		return line, nil
	case in.Value == nil:
		return line, definition.Invalid("value", "is not set; a line of this basis needs it")
	case math.IsNaN(in.GetValue()) || math.IsInf(in.GetValue(), 0):
		return line, definition.Invalid("value", "%v: want a finite number", in.GetValue())
	case basis == chart.TailProbability && !(in.GetTail() > 0 && in.GetTail() < 0.5):
		return line, definition.Invalid("tail", "%v: want more than 0 and less than 0.5", in.GetTail())
	}
	line.Value, line.Tail = in.GetValue(), in.GetTail()
	return line, nil
}

// lineFromProto reads a line of a trace. One of basis SIGMA_MULTIPLE follows from centre and sigma; where it has a value
// all the same, the value must lie where the line is judged.
func lineFromProto(in *pb.Line, t chart.Trace, multiple float64, places int) (chart.Line, error) {
	if in == nil {
		return chart.Line{}, nil
	}
	line, err := fixedLine(in)
	if err != nil || line.Basis != chart.SigmaMultiple || in.Value == nil {
		return line, err
	}
	if t.Centre == nil || t.Sigma == nil {
		return line, definition.Invalid("value", "%v: a line of basis SIGMA_MULTIPLE needs the trace's centre and sigma", in.GetValue())
	}
	where := decimal.Line(*t.Centre, multiple, *t.Sigma, places)
	if !(math.Abs(in.GetValue()-where) <= 1e-9*max(math.Abs(where), *t.Sigma)) {
		return line, definition.Invalid("value", "%v: a line of basis SIGMA_MULTIPLE lies at %v here, centre %+v times sigma in the published decimals; give another basis, or leave the value out",
			in.GetValue(), where, multiple)
	}
	line.Value = where
	return line, nil
}

// traceFromProto reads centre, sigma, lines and rules of a trace. The judge checks what they mean together.
func traceFromProto(in *pb.TraceLimits, places int) (*judge.Trace, string, error) {
	if in == nil {
		return nil, "", nil
	}
	for field, x := range map[string]*float64{"centre": in.Centre, "sigma": in.Sigma} {
		if x != nil && (math.IsNaN(*x) || math.IsInf(*x, 0)) {
			return nil, "", definition.Invalid(field, "%v: want a finite number", *x)
		}
	}
	t := chart.Trace{Centre: in.Centre, Sigma: in.Sigma}
	for _, l := range []struct {
		field    string
		in       *pb.Line
		out      *chart.Line
		multiple float64
	}{
		{"lower_action", in.LowerAction, &t.LowerAction, -chart.ActionMultiple},
		{"upper_action", in.UpperAction, &t.UpperAction, chart.ActionMultiple},
		{"lower_warning", in.LowerWarning, &t.LowerWarning, -chart.WarningMultiple},
		{"upper_warning", in.UpperWarning, &t.UpperWarning, chart.WarningMultiple},
	} {
		line, err := lineFromProto(l.in, t, l.multiple, places)
		if err != nil {
			return nil, "", under(l.field, err)
		}
		*l.out = line
	}
	specs, err := rulesFromProto(in.Rules, in.RuleSet)
	if err != nil {
		return nil, "", err
	}
	return &judge.Trace{Trace: t, Rules: specs}, in.RuleSet, nil
}

// rulesFromProto reads rules given one by one or by the name of a set; neither gives none.
func rulesFromProto(specs []*pb.RuleSpec, set string) ([]rules.Spec, error) {
	if set == "" {
		return specsFromProto("rules", specs)
	}
	if len(specs) > 0 {
		return nil, definition.Invalid("rule_set", "%q is given beside %d rules; give exactly one of rules and rule_set", clip(set), len(specs))
	}
	found, ok := catalogue()[set]
	if !ok {
		return nil, definition.Invalid("rule_set", "%q: no such set; ListRules names them", clip(set))
	}
	return found.Rules, nil
}

// traceToProto writes a trace with all its rules and, where they come from a published set, the set's name beside them.
func traceToProto(t chart.Trace, specs []rules.Spec, set string) *pb.TraceLimits {
	out := &pb.TraceLimits{
		Centre: t.Centre, Sigma: t.Sigma,
		LowerAction: lineToProto(t.LowerAction), UpperAction: lineToProto(t.UpperAction),
		LowerWarning: lineToProto(t.LowerWarning), UpperWarning: lineToProto(t.UpperWarning),
		Rules: specsToProto(specs), RuleSet: set,
	}
	return out
}

// hideImpossible leaves out where a line of counts lies that no count of the published size can be beyond; samples of
// another size may have such a line, which is why its basis stays.
func hideImpossible(kind chart.Kind, t *pb.TraceLimits) {
	if !kind.Counts() {
		return
	}
	for _, l := range []*pb.Line{t.LowerAction, t.LowerWarning} {
		if l.Value != nil && *l.Value <= 0 && follows(l) {
			l.Value = nil
		}
	}
	for _, l := range []*pb.Line{t.UpperAction, t.UpperWarning} {
		if kind == chart.P && l.Value != nil && *l.Value >= 1 && follows(l) {
			l.Value = nil
		}
	}
}

// follows reports a line that follows from the centre, as opposed to one that somebody set.
func follows(l *pb.Line) bool {
	return l.Basis == pb.Basis_BASIS_SIGMA_MULTIPLE || l.Basis == pb.Basis_BASIS_TAIL_PROBABILITY
}

func lineToProto(l chart.Line) *pb.Line {
	out := &pb.Line{Basis: pb.Basis(l.Basis) + pb.Basis_BASIS_SIGMA_MULTIPLE, Tail: l.Tail}
	if l.Basis != chart.Absent {
		out.Value = &l.Value
	}
	return out
}
