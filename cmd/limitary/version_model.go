package main

import (
	"fmt"
	"io"
	"math"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/report"
)

// showModel prints what the scale of a point follows from, the figures about the lines, and the change test.
func showModel(out io.Writer, v *pb.Version) error {
	t := report.NewText(out)
	model := modelOf(v.Model)
	t.Scale(&model)
	t.Points(chart.Kind(v.Kind), int(v.SubgroupSize), &model)
	t.Tails(tailsOf(v.Tails))
	t.Parts(chart.Kind(v.Kind), partsOf(v.Parts))
	t.Components(chart.Kind(v.Kind), componentsOf(v.Components), int(v.PublishedDecimals))
	if f := v.FalseAlarm; f != nil {
		t.FalseAlarm(&limits.FalseAlarm{Median: f.Median, P10: f.P10, P90: f.P90, Nominal: f.Nominal})
	}
	t.Compared(comparisonOf(v.Compared.GetBias(), v.Compared.GetBiasLower(), v.Compared.GetBiasUpper(), v.GetCompared() != nil && v.Compared.Bias != nil),
		comparisonOf(v.Compared.GetRatio(), v.Compared.GetRatioLower(), v.Compared.GetRatioUpper(), v.GetCompared() != nil && v.Compared.Ratio != nil),
		comparisonOf(v.Compared.GetBetweenRatio(), v.Compared.GetBetweenRatioLower(), v.Compared.GetBetweenRatioUpper(), v.GetCompared() != nil && v.Compared.BetweenRatio != nil),
		int(v.PublishedDecimals))
	t.Change(changeOf(v.ChangeTest, fmt.Sprintf("version %d", v.ChangeTest.GetAgainst())))
	return t.Flush()
}

// sigmaUnit is the unit of process sigma: that of the chart, but for relative ranges and other scales.
func sigmaUnit(v *pb.Version) string {
	switch m := modelOf(v.Model); {
	case v.Kind == pb.ChartKind_CHART_KIND_RELATIVE_RANGE:
		return "% of the mean"
	case m.Scaled():
		return "on the scale that is judged"
	}
	return v.Unit
}

// modelOf reads a model of the contract.
func modelOf(in *pb.Model) chart.Model {
	var m chart.Model
	if in == nil {
		return m
	}
	m.BetweenSigma, m.Inflation, m.Inspected, m.CountMethod = in.BetweenSigma, in.Inflation, in.Inspected, chart.CountMethod(in.CountMethod)
	m.Transform = chart.Transform{Kind: chart.TransformKind(in.GetTransform().GetKind()), Offset: in.GetTransform().GetOffset()}
	for _, l := range in.Levels {
		m.Levels = append(m.Levels, chart.Level{Material: l.Material, Reference: l.Reference, Sigma: l.Sigma})
	}
	if s := in.Spread; s != nil {
		m.Spread = &chart.Spread{S0: s.S0, B: s.B, AbsoluteBelow: s.AbsoluteBelow, AbsoluteSigma: s.AbsoluteSigma}
		for _, b := range s.Bands {
			m.Spread.Bands = append(m.Spread.Bands, chart.Band{From: b.From, Sigma: b.Sigma})
		}
	}
	return m
}

func partsOf(in []*pb.SigmaPart) (out []limits.Part) {
	for _, p := range in {
		part := limits.Part{Name: p.Name, From: p.From, Groups: int(p.Groups), Sigma: p.Sigma, DegreesOfFreedom: p.DegreesOfFreedom}
		if p.Origin == pb.Origin_ORIGIN_GIVEN {
			part.Origin = limits.Target
		}
		if p.Lower != nil && p.Upper != nil {
			part.Interval = &limits.Interval{Lower: *p.Lower, Upper: *p.Upper}
		}
		out = append(out, part)
	}
	return out
}

func tailsOf(in []*pb.TailFigure) (out []limits.Tail) {
	names := map[string]string{"lower_action": "lowerAction", "upper_action": "upperAction", "lower_warning": "lowerWarning", "upper_warning": "upperWarning"}
	for _, f := range in {
		role := chart.Location
		if f.Trace == pb.TraceRole_TRACE_ROLE_DISPERSION {
			role = chart.Dispersion
		}
		out = append(out, limits.Tail{Role: role, Line: names[f.Line], Size: f.Size, Probability: f.Probability, Nominal: f.Nominal})
	}
	return out
}

func componentsOf(in []*pb.VarianceComponent) (out []limits.Component) {
	for _, c := range in {
		one := limits.Component{Name: c.Name, Sigma: c.Sigma, DegreesOfFreedom: c.DegreesOfFreedom, Truncated: c.Truncated}
		if c.Lower != nil || c.Upper != nil {
			one.Interval = &limits.Interval{Lower: c.GetLower(), Upper: math.Inf(1)}
			if c.Upper != nil {
				one.Interval.Upper = *c.Upper
			}
		}
		out = append(out, one)
	}
	return out
}

func comparisonOf(estimate, lower, upper float64, there bool) *limits.Comparison {
	if !there {
		return nil
	}
	return &limits.Comparison{Estimate: estimate, Interval: limits.Interval{Lower: lower, Upper: upper}}
}
