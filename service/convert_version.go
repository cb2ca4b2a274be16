package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/store"
)

func versionToProto(v definition.Version) *pb.Version {
	out := &pb.Version{
		Chart: v.Chart, Number: int32(v.Number), Lot: v.Lot, State: pb.VersionState(pb.VersionState_value["VERSION_STATE_"+string(v.State)]),
		Kind: kindToProto(v.Kind), SubgroupSize: int32(v.SubgroupSize), Unit: v.Unit, PublishedDecimals: int32(v.Decimals),
		Location: versionTrace(v.Kind, v.Location, v.Model), Dispersion: versionTrace(v.Kind, v.Dispersion, nil), ProcessSigma: v.ProcessSigma,
		N: int32(v.Groups), Readings: int32(v.Readings), CentreOrigin: originToProto(v.CentreGiven), SigmaOrigin: originToProto(v.SigmaGiven),
		Estimator: v.Estimator, Provisional: v.Provisional,
		Estimates: estimatesToProto(v.Estimates), Intervals: intervalsToProto(v.Intervals), Findings: findingsToProto(v.Findings),
		Basis: v.Basis, ExcludedPoints: exclusionsToProto(v.ExcludedPoints),
		Author: v.Author, ProposeTime: timeToProto(v.ProposedAt), Reason: v.Reason,
		DecidedBy: v.DecidedBy, DecideTime: timeToProto(v.DecidedAt), DecisionReason: v.DecisionReason,
		WithdrawnBy: v.WithdrawnBy, WithdrawTime: timeToProto(v.WithdrawnAt), WithdrawnReason: v.WithdrawnReason,
		EffectiveFrom: timeToProto(v.EffectiveFrom), Digest: v.Digest, Judge: int32(v.Judge),
		Model: modelToProto(v.Model), Components: componentsToProto(v.Components), Tails: tailsToProto(v.Tails), Parts: partsToProto(v.Parts),
		FalseAlarm: falseAlarmToProto(v.FalseAlarm), Compared: comparedToProto(v.Compared), ChangeTest: changeTestToProto(v.ChangeTest),
		Instructions: &pb.Instructions{Look: v.Instructions.Look, Act: v.Instructions.Act, Stop: v.Instructions.Stop},
	}
	for _, e := range v.Excluded {
		out.ExcludedResults = append(out.ExcludedResults, &pb.StoredExclusion{Result: &pb.ResultKey{Source: e.Source, SourceId: e.SourceID}, Reason: e.Reason})
	}
	return out
}

// versionTrace writes a trace; the model tells the scale of a location trace.
func versionTrace(kind chart.Kind, t *definition.Trace, m *chart.Model) *pb.TraceLimits {
	if t == nil {
		return nil
	}
	out := traceToProto(t.Trace, t.Rules, t.RuleSet)
	out.Original = originalTrace(t.Trace, m)
	hideImpossible(kind, out)
	return out
}

func patternToProto(p store.Pattern) *pb.PatternEnded {
	return &pb.PatternEnded{
		Lot: p.Lot, Trace: roleToProto(p.Role), Rule: p.Rule, Side: sideToProto(p.Side), Have: int32(p.Have), Need: int32(p.Need), Text: p.Text(),
	}
}
