package service

import (
	"fmt"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/rules"
)

// specsFromProto reads the rules of a trace; paths in errors begin at field.
func specsFromProto(field string, in []*pb.RuleSpec) ([]rules.Spec, error) {
	if err := tooMany(field, len(in), rules.RulesMax, "rules"); err != nil {
		return nil, err
	}
	out := make([]rules.Spec, len(in))
	for i, r := range in {
		s, err := specFromProto(r)
		if err == nil {
			err = checkSpec(s)
		}
		if err != nil {
			return nil, under(fmt.Sprintf("%s[%d]", field, i), err)
		}
		out[i] = s
	}
	return out, nil
}

func checkSpec(s rules.Spec) error {
	if err := s.Check(); err != nil {
		e := err.(*rules.SpecError)
		return definition.Invalid(e.Field, "%s", e.Problem)
	}
	return nil
}

func specFromProto(in *pb.RuleSpec) (rules.Spec, error) {
	s := rules.Spec{ID: in.GetId()}
	switch c := in.GetConsequence(); c {
	case pb.Consequence_CONSEQUENCE_UNSPECIFIED, pb.Consequence_CONSEQUENCE_LOOK, pb.Consequence_CONSEQUENCE_ACT, pb.Consequence_CONSEQUENCE_STOP:
		s.Consequence = rules.Consequence(c)
	default:
		return s, definition.Invalid("consequence", "%d: no such value", c)
	}
	switch sides := in.GetSides(); sides {
	case pb.Sides_SIDES_UNSPECIFIED, pb.Sides_SIDES_BOTH:
		s.Sides = rules.BothSides
	case pb.Sides_SIDES_UPPER:
		s.Sides = rules.UpperOnly
	case pb.Sides_SIDES_LOWER:
		s.Sides = rules.LowerOnly
	default:
		return s, definition.Invalid("sides", "%d: no such value", sides)
	}
	switch r := in.GetRule().(type) {
	case *pb.RuleSpec_Beyond_:
		s.Kind, s.K, s.M, s.Z = rules.Beyond, int(r.Beyond.GetK()), int(r.Beyond.GetM()), r.Beyond.GetZ()
	case *pb.RuleSpec_BeyondLine_:
		s.Kind = rules.BeyondLine
		switch l := r.BeyondLine.GetLine(); l {
		case pb.LineKind_LINE_KIND_ACTION:
			s.Line = rules.ActionLine
		case pb.LineKind_LINE_KIND_WARNING:
			s.Line = rules.WarningLine
		case pb.LineKind_LINE_KIND_UNSPECIFIED:
		default:
			return s, definition.Invalid("beyond_line.line", "%d: no such value", l)
		}
	case *pb.RuleSpec_SameSide_:
		s.Kind, s.N = rules.SameSide, int(r.SameSide.GetN())
	case *pb.RuleSpec_Trend_:
		s.Kind, s.N = rules.Trend, int(r.Trend.GetN())
	case *pb.RuleSpec_Alternating_:
		s.Kind, s.N = rules.Alternating, int(r.Alternating.GetN())
	case *pb.RuleSpec_Within_:
		s.Kind, s.N, s.Z = rules.Within, int(r.Within.GetN()), r.Within.GetZ()
	case *pb.RuleSpec_Outside_:
		s.Kind, s.N, s.Z, s.OneSideOK = rules.Outside, int(r.Outside.GetN()), r.Outside.GetZ(), r.Outside.GetOneSideOk()
	case *pb.RuleSpec_Span_:
		s.Kind, s.Z = rules.Span, r.Span.GetZ()
	case *pb.RuleSpec_Ewma_:
		s.Kind, s.Lambda, s.Limit, s.Asymptotic = rules.EWMA, r.Ewma.GetLambda(), r.Ewma.GetLimit(), r.Ewma.GetAsymptotic()
	case *pb.RuleSpec_Cusum_:
		s.Kind, s.Reference, s.Interval, s.HeadStart = rules.CUSUM, r.Cusum.GetK(), r.Cusum.GetH(), r.Cusum.GetHeadStart()
	}
	return s, nil
}

func specToProto(s rules.Spec) *pb.RuleSpec {
	out := &pb.RuleSpec{Id: s.ID, Consequence: consequenceToProto(s.Consequence), Sides: pb.Sides(s.Sides) + pb.Sides_SIDES_BOTH}
	switch s.Kind {
	case rules.Beyond:
		out.Rule = &pb.RuleSpec_Beyond_{Beyond: &pb.RuleSpec_Beyond{K: int32(s.K), M: int32(s.M), Z: s.Z}}
	case rules.BeyondLine:
		out.Rule = &pb.RuleSpec_BeyondLine_{BeyondLine: &pb.RuleSpec_BeyondLine{Line: pb.LineKind(s.Line)}}
	case rules.SameSide:
		out.Rule = &pb.RuleSpec_SameSide_{SameSide: &pb.RuleSpec_SameSide{N: int32(s.N)}}
	case rules.Trend:
		out.Rule = &pb.RuleSpec_Trend_{Trend: &pb.RuleSpec_Trend{N: int32(s.N)}}
	case rules.Alternating:
		out.Rule = &pb.RuleSpec_Alternating_{Alternating: &pb.RuleSpec_Alternating{N: int32(s.N)}}
	case rules.Within:
		out.Rule = &pb.RuleSpec_Within_{Within: &pb.RuleSpec_Within{N: int32(s.N), Z: s.Z}}
	case rules.Outside:
		out.Rule = &pb.RuleSpec_Outside_{Outside: &pb.RuleSpec_Outside{N: int32(s.N), Z: s.Z, OneSideOk: s.OneSideOK}}
	case rules.Span:
		out.Rule = &pb.RuleSpec_Span_{Span: &pb.RuleSpec_Span{Z: s.Z}}
	case rules.EWMA:
		out.Rule = &pb.RuleSpec_Ewma_{Ewma: &pb.RuleSpec_Ewma{Lambda: s.Lambda, Limit: s.Limit, Asymptotic: s.Asymptotic}}
	case rules.CUSUM:
		out.Rule = &pb.RuleSpec_Cusum_{Cusum: &pb.RuleSpec_Cusum{K: s.Reference, H: s.Interval, HeadStart: s.HeadStart}}
	}
	return out
}

func specsToProto(in []rules.Spec) []*pb.RuleSpec {
	out := make([]*pb.RuleSpec, len(in))
	for i, s := range in {
		out[i] = specToProto(s)
	}
	return out
}

// The numbers of these enums on the wire follow those of the domain, which canonical bytes fix; tests hold them together.

func consequenceToProto(c rules.Consequence) pb.Consequence { return pb.Consequence(c) }

func sideToProto(s rules.Side) pb.Side {
	if s == rules.NoSide {
		return pb.Side_SIDE_NONE
	}
	return pb.Side(s)
}

func roleToProto(r chart.Role) pb.TraceRole {
	return pb.TraceRole(r) + pb.TraceRole_TRACE_ROLE_LOCATION
}
