package service

import (
	"errors"
	"math"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
)

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
		if kind.Counts() && t != nil {
			t = showImpossible(t)
		}
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
	case l.Kind.Counts() && in.GetProcessSigma() == 0:
		return 0, nil // as ComputeLimits writes it
	case l.Kind.Counts():
		return 0, definition.Invalid("process_sigma", "%v is given, but a chart of kind %s has none", in.GetProcessSigma(), l.Kind)
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
