package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

func componentsOf(r limits.Result) []definition.Component {
	var out []definition.Component
	for _, c := range r.Components {
		d := definition.Component{Name: c.Name, Sigma: c.Sigma, DegreesOfFreedom: c.DegreesOfFreedom, Truncated: c.Truncated}
		if c.Interval != nil {
			d.Lower, d.Upper = finiteOnly(c.Interval.Lower), finiteOnly(c.Interval.Upper)
		}
		out = append(out, d)
	}
	return out
}

func componentsToProto(in []definition.Component) []*pb.VarianceComponent {
	var out []*pb.VarianceComponent
	for _, c := range in {
		out = append(out, &pb.VarianceComponent{Name: c.Name, Sigma: c.Sigma, DegreesOfFreedom: c.DegreesOfFreedom, Lower: c.Lower, Upper: c.Upper, Truncated: c.Truncated})
	}
	return out
}

func tailsOf(r limits.Result) []definition.Tail {
	var out []definition.Tail
	for _, t := range r.Tails {
		out = append(out, definition.Tail{Trace: t.Role.String(), Line: t.Line, Size: t.Size, Probability: t.Probability, Nominal: t.Nominal})
	}
	return out
}

func tailsToProto(in []definition.Tail) []*pb.TailFigure {
	var out []*pb.TailFigure
	for _, t := range in {
		role := chart.Location
		if t.Trace == chart.Dispersion.String() {
			role = chart.Dispersion
		}
		out = append(out, &pb.TailFigure{Trace: roleToProto(role), Line: contractNames.Replace(t.Line), Size: t.Size, Probability: t.Probability, Nominal: t.Nominal})
	}
	return out
}

func falseAlarmOf(r limits.Result) *definition.FalseAlarm {
	if f := r.FalseAlarm; f != nil {
		return &definition.FalseAlarm{Nominal: f.Nominal, Median: f.Median, P10: f.P10, P90: f.P90}
	}
	return nil
}

func falseAlarmToProto(f *definition.FalseAlarm) *pb.FalseAlarmRate {
	if f == nil {
		return nil
	}
	return &pb.FalseAlarmRate{Nominal: f.Nominal, Median: f.Median, P10: f.P10, P90: f.P90}
}

func partsOf(r limits.Result) []definition.Part {
	var out []definition.Part
	for _, p := range r.Parts {
		d := definition.Part{Name: p.Name, From: p.From, Groups: p.Groups, Sigma: p.Sigma, Given: p.Origin == limits.Target, DegreesOfFreedom: p.DegreesOfFreedom}
		if p.Interval != nil && finite(p.Interval.Lower) && finite(p.Interval.Upper) {
			d.Interval = &definition.Interval{Name: p.Name, Lower: p.Interval.Lower, Upper: p.Interval.Upper, Level: limits.Confidence}
		}
		out = append(out, d)
	}
	return out
}

func partsToProto(in []definition.Part) []*pb.SigmaPart {
	var out []*pb.SigmaPart
	for _, p := range in {
		part := &pb.SigmaPart{Name: p.Name, From: p.From, Groups: int32(p.Groups), Sigma: p.Sigma, Origin: originToProto(p.Given), DegreesOfFreedom: p.DegreesOfFreedom}
		if p.Interval != nil {
			part.Lower, part.Upper = &p.Interval.Lower, &p.Interval.Upper
		}
		out = append(out, part)
	}
	return out
}

// comparedOf gives what a target looks like beside the data; nil where nothing was a target, or there are no data.
func comparedOf(r limits.Result) *definition.Compared {
	if r.Bias == nil && r.SigmaRatio == nil && r.BetweenRatio == nil {
		return nil
	}
	estimated := func(c *limits.Comparison) *definition.Estimated {
		if c == nil {
			return nil
		}
		return &definition.Estimated{Estimate: c.Estimate, Lower: finiteOnly(c.Interval.Lower), Upper: finiteOnly(c.Interval.Upper)}
	}
	return &definition.Compared{Bias: estimated(r.Bias), Ratio: estimated(r.SigmaRatio), Between: estimated(r.BetweenRatio)}
}

func comparedToProto(c *definition.Compared) *pb.Compared {
	if c == nil {
		return nil
	}
	out := &pb.Compared{}
	set := func(e *definition.Estimated, estimate, lower, upper **float64) {
		if e != nil {
			*estimate, *lower, *upper = &e.Estimate, e.Lower, e.Upper
		}
	}
	set(c.Bias, &out.Bias, &out.BiasLower, &out.BiasUpper)
	set(c.Ratio, &out.Ratio, &out.RatioLower, &out.RatioUpper)
	set(c.Between, &out.BetweenRatio, &out.BetweenRatioLower, &out.BetweenRatioUpper)
	return out
}

// foundBy gives the findings of the diagnostics in the words a version keeps.
func foundBy(r diagnostics.Report) []definition.Finding { return asFound(r.Findings) }

func diagnosticsToProto(r diagnostics.Report) *pb.Diagnostics {
	out := &pb.Diagnostics{
		Groups: int32(r.Extent.Groups), Readings: int32(r.Extent.Readings), Days: optionalCount(r.Extent.Days), Runs: optionalCount(r.Extent.Runs),
		Step: r.Step, Tied: r.Tied, JointRate: r.JointRate, JointBound: r.JointBound,
	}
	for _, t := range r.Tests {
		out.Tests = append(out.Tests, &pb.DiagnosticTest{
			Code: t.Code, Name: t.Name, Subject: t.Subject, N: int32(t.N), Statistic: t.Statistic, P: t.PValue, Critical: t.Critical, Level: t.Level,
			Outcome: pb.DiagnosticOutcome(pb.DiagnosticOutcome_value["DIAGNOSTIC_OUTCOME_"+string(t.Outcome)]), Reason: t.Reason, CouldMiss: t.CouldMiss,
		})
	}
	for _, s := range r.Setup {
		out.Setup = append(out.Setup, &pb.SetupCount{Rule: s.Rule, Description: s.Description, Observed: int32(s.Observed), Expected: s.Expected})
	}
	for _, p := range []*diagnostics.Picture{r.Values, r.Means} {
		if p != nil {
			out.Pictures = append(out.Pictures, pictureToProto(p))
		}
	}
	return out
}

func optionalCount(n *int) *int32 {
	if n == nil {
		return nil
	}
	out := int32(*n)
	return &out
}

func pictureToProto(p *diagnostics.Picture) *pb.Picture {
	h := p.Histogram
	out := &pb.Picture{Subject: p.Subject, Histogram: &pb.Histogram{Lower: h.Lower, Width: h.Width, Step: h.Step, Rule: h.Rule}}
	for _, n := range h.Counts {
		out.Histogram.Counts = append(out.Histogram.Counts, int32(n))
	}
	for _, q := range p.NormalPlot {
		out.NormalQuantiles, out.OrderedValues = append(out.NormalQuantiles, q.Quantile), append(out.OrderedValues, q.Value)
	}
	return out
}
