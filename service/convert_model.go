package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
)

// modelFromProto reads a model; the judge checks whether the kind has it. Absent, it adds nothing.
func modelFromProto(in *pb.Model) (chart.Model, error) {
	var m chart.Model
	if in == nil {
		return m, nil
	}
	var err error
	m.BetweenSigma, m.Inflation, m.Inspected = in.BetweenSigma, in.Inflation, in.Inspected
	if m.CountMethod, err = countMethodFromProto(in.CountMethod); err != nil {
		return m, err
	}
	if m.Transform, err = transformFromProto(in.Transform); err != nil {
		return m, err
	}
	m.Levels = levelsFromProto(in.Levels)
	if s := in.Spread; s != nil {
		m.Spread = &chart.Spread{S0: s.S0, B: s.B, AbsoluteBelow: s.AbsoluteBelow, AbsoluteSigma: s.AbsoluteSigma}
		for _, b := range s.Bands {
			m.Spread.Bands = append(m.Spread.Bands, chart.Band{From: b.GetFrom(), Sigma: b.GetSigma()})
		}
	}
	return m, nil
}

func countMethodFromProto(m pb.CountMethod) (chart.CountMethod, error) {
	if m < 0 || m > pb.CountMethod_COUNT_METHOD_EXACT {
		return 0, definition.Invalid("count_method", "%d: no such value", m)
	}
	return chart.CountMethod(m), nil
}

func transformFromProto(in *pb.Transform) (chart.Transform, error) {
	if k := in.GetKind(); k < 0 || k > pb.TransformKind_TRANSFORM_KIND_SQUARE_ROOT {
		return chart.Transform{}, definition.Invalid("transform.kind", "%d: no such value", k)
	}
	return chart.Transform{Kind: chart.TransformKind(in.GetKind()), Offset: in.GetOffset()}, nil
}

func levelsFromProto(in []*pb.Level) []chart.Level {
	var out []chart.Level
	for _, l := range in {
		out = append(out, chart.Level{Material: l.GetMaterial(), Reference: l.GetReference(), Sigma: l.GetSigma()})
	}
	return out
}

// modelToProto writes a model; nil where it adds nothing.
func modelToProto(m *chart.Model) *pb.Model {
	if m == nil || emptyModel(*m) {
		return nil
	}
	out := &pb.Model{
		BetweenSigma: m.BetweenSigma, Inflation: m.Inflation, CountMethod: pb.CountMethod(m.CountMethod), Inspected: m.Inspected,
	}
	if m.Transform.Kind != chart.Identity {
		out.Transform = &pb.Transform{Kind: pb.TransformKind(m.Transform.Kind), Offset: m.Transform.Offset}
	}
	for _, l := range m.Levels {
		out.Levels = append(out.Levels, &pb.Level{Material: l.Material, Reference: l.Reference, Sigma: l.Sigma})
	}
	if s := m.Spread; s != nil {
		out.Spread = &pb.DuplicateSpread{S0: s.S0, B: s.B, AbsoluteBelow: s.AbsoluteBelow, AbsoluteSigma: s.AbsoluteSigma}
		for _, b := range s.Bands {
			out.Spread.Bands = append(out.Spread.Bands, &pb.SpreadBand{From: b.From, Sigma: b.Sigma})
		}
	}
	return out
}

func emptyModel(m chart.Model) bool {
	return m.BetweenSigma == 0 && m.Inflation == 0 && m.CountMethod == chart.CountMethodDefault && m.Inspected == 0 &&
		m.Transform == chart.Transform{} && len(m.Levels) == 0 && m.Spread == nil
}

// original writes places of a trace in the chart's unit, by way of invert; a place that no reading has is absent.
func original(invert func(float64) (float64, bool), statistic *float64, l judge.Lines) *pb.OriginalScale {
	at := func(place *float64) *float64 {
		if place == nil {
			return nil
		}
		x, ok := invert(*place)
		if !ok {
			return nil
		}
		return &x
	}
	return &pb.OriginalScale{
		Statistic: at(statistic), Centre: at(l.Centre), LowerAction: at(l.LowerAction), UpperAction: at(l.UpperAction),
		LowerWarning: at(l.LowerWarning), UpperWarning: at(l.UpperWarning),
	}
}

// originalVerdict is original for a point of a judged trace; nil where the trace is judged in the chart's unit.
func originalVerdict(j *judge.Judge, role chart.Role, material string, statistic float64, l judge.Lines) *pb.OriginalScale {
	if j == nil {
		return nil
	}
	if _, own, _ := j.Original(role, material, statistic); !own {
		return nil
	}
	return original(func(y float64) (float64, bool) { x, _, ok := j.Original(role, material, y); return x, ok }, &statistic, l)
}

// originalTrace is original for the published lines of a location trace on a transformed scale.
func originalTrace(t chart.Trace, m *chart.Model) *pb.OriginalScale {
	if m == nil || m.Transform.Kind == chart.Identity {
		return nil
	}
	at := func(l chart.Line) *float64 {
		if l.Basis == chart.Absent {
			return nil
		}
		return &l.Value
	}
	return original(m.Transform.Invert, nil, judge.Lines{Centre: t.Centre, LowerAction: at(t.LowerAction), UpperAction: at(t.UpperAction),
		LowerWarning: at(t.LowerWarning), UpperWarning: at(t.UpperWarning)})
}
