package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
)

func computedToProto(c computed) *pb.ComputeLimitsResponse {
	r := &c.result
	out := &pb.ComputeLimitsResponse{
		Kind: kindToProto(r.Kind), SubgroupSize: int32(r.SubgroupSize), PublishedDecimals: int32(r.PublishedDecimals),
		ProcessSigma: r.ProcessSigma,
		N:            int32(r.N), Readings: int32(r.Readings),
		CentreOrigin: originToProto(r.CentreOrigin == limits.Target), SigmaOrigin: originToProto(r.SigmaOrigin == limits.Target),
		Provisional: r.Provisional, AdvisedMinimum: int32(r.AdvisedMinimum),
		Estimates:  estimatesToProto(estimatesOf(*r)),
		Intervals:  intervalsToProto(intervalsOf(*r)),
		Exclusions: exclusionsToProto(excludedOf(*r)),
		Model:      modelToProto(&r.Model),
		Components: componentsToProto(componentsOf(*r)), Tails: tailsToProto(tailsOf(*r)), Parts: partsToProto(partsOf(*r)),
		FalseAlarm: falseAlarmToProto(falseAlarmOf(*r)), Compared: comparedToProto(comparedOf(*r)),
		Diagnostics: diagnosticsToProto(c.diagnostics),
	}
	if r.Kind.Has(chart.Location) {
		out.Location = traceToProto(r.Location, nil, "")
		hideImpossible(r.Kind, out.Location)
		out.Location.Original = originalTrace(r.Location, &r.Model)
	}
	if r.Kind.Has(chart.Dispersion) {
		out.Dispersion = traceToProto(r.Dispersion, nil, "")
	}
	for _, f := range append(findingsOf(*r), foundBy(c.diagnostics)...) {
		out.Findings = append(out.Findings, findingToProto(f))
	}
	return out
}

func originToProto(given bool) pb.Origin {
	if given {
		return pb.Origin_ORIGIN_GIVEN
	}
	return pb.Origin_ORIGIN_ESTIMATED
}

// The functions named ...Of turn a computation into the words a version keeps.

func estimatesOf(r limits.Result) []definition.Estimate {
	out := make([]definition.Estimate, len(r.Estimates))
	for i, e := range r.Estimates {
		out[i] = definition.Estimate{Name: e.Name.String(), Sigma: e.Sigma, DegreesOfFreedom: e.DegreesOfFreedom, N: e.N, Chosen: e.Chosen}
	}
	return out
}

func intervalsOf(r limits.Result) []definition.Interval {
	out := []definition.Interval{}
	add := func(name string, in *limits.Interval) {
		if in != nil && finite(in.Lower) && finite(in.Upper) {
			out = append(out, definition.Interval{Name: name, Lower: in.Lower, Upper: in.Upper, Level: limits.Confidence})
		}
	}
	add("process_sigma", r.Intervals.Sigma)
	add("location.centre", r.Intervals.Centre)
	add("dispersion.centre", r.Intervals.DispersionCentre)
	for role := range chart.Roles {
		add(role.String()+".lower_action", r.Intervals.LowerAction[role])
		add(role.String()+".upper_action", r.Intervals.UpperAction[role])
		add(role.String()+".lower_warning", r.Intervals.LowerWarning[role])
		add(role.String()+".upper_warning", r.Intervals.UpperWarning[role])
	}
	return out
}

func findingsOf(r limits.Result) []definition.Finding { return asFound(r.Findings) }

func asFound(in []limits.Finding) []definition.Finding {
	out := make([]definition.Finding, len(in))
	for i, f := range in {
		out[i] = definition.Finding{Code: f.Code, Figure: f.Figure, Threshold: f.Threshold, Text: f.Text, Advice: f.Advice, CouldMiss: f.CouldMiss}
	}
	return out
}

func excludedOf(r limits.Result) []definition.Excluded {
	out := make([]definition.Excluded, len(r.Excluded))
	for i, e := range r.Excluded {
		out[i] = definition.Excluded{Point: e.Group, Reason: e.Reason}
	}
	return out
}

func estimatesToProto(in []definition.Estimate) []*pb.SigmaEstimate {
	out := make([]*pb.SigmaEstimate, len(in))
	for i, e := range in {
		out[i] = &pb.SigmaEstimate{Name: e.Name, Sigma: e.Sigma, DegreesOfFreedom: e.DegreesOfFreedom, N: int32(e.N), Chosen: e.Chosen}
	}
	return out
}

func intervalsToProto(in []definition.Interval) []*pb.Interval {
	out := make([]*pb.Interval, len(in))
	for i, e := range in {
		out[i] = &pb.Interval{Name: e.Name, Lower: e.Lower, Upper: e.Upper, Level: e.Level}
	}
	return out
}

func findingsToProto(in []definition.Finding) []*pb.Finding {
	out := make([]*pb.Finding, len(in))
	for i, f := range in {
		out[i] = findingToProto(f)
	}
	return out
}

func findingToProto(f definition.Finding) *pb.Finding {
	return &pb.Finding{Code: f.Code, Figure: f.Figure, Threshold: f.Threshold, Text: f.Text, Advice: f.Advice, CouldMiss: f.CouldMiss}
}

func exclusionsToProto(in []definition.Excluded) []*pb.Exclusion {
	out := make([]*pb.Exclusion, len(in))
	for i, e := range in {
		out[i] = &pb.Exclusion{Point: int32(e.Point), Reason: e.Reason}
	}
	return out
}
