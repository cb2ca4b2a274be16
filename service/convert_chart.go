package service

import (
	"time"

	"google.golang.org/protobuf/types/known/durationpb"
	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// timeToProto writes a time; the zero time is absent.
func timeToProto(t time.Time) *timestamppb.Timestamp {
	if t.IsZero() {
		return nil
	}
	return timestamppb.New(t)
}

func durationFromProto(field string, d *durationpb.Duration) (time.Duration, error) {
	if d == nil {
		return 0, nil
	}
	if err := d.CheckValid(); err != nil {
		return 0, definition.Invalid(field, "is no duration: want whole seconds with an s, such as \"86400s\"")
	}
	return d.AsDuration(), nil
}

func durationToProto(d time.Duration) *durationpb.Duration {
	if d == 0 {
		return nil
	}
	return durationpb.New(d)
}

func chartFromProto(in *pb.Chart) (definition.Chart, error) {
	kind, err := kindFromProto("kind", in.GetKind())
	if err != nil {
		return definition.Chart{}, err
	}
	plan, err := durationFromProto("plan_interval", in.GetPlanInterval())
	if err != nil {
		return definition.Chart{}, err
	}
	gap, err := durationFromProto("longest_gap", in.GetLongestGap())
	if err != nil {
		return definition.Chart{}, err
	}
	c := definition.Chart{
		Name: in.GetName(), Title: in.GetTitle(), Kind: kind, SubgroupSize: int(in.GetSubgroupSize()), Unit: in.GetUnit(),
		Decimals: decimalsFromProto(in.GetDecimals(), in != nil && in.Decimals != nil), Labels: in.GetLabels(),
		DisplayZone: in.GetDisplayZone(), PlanInterval: plan, LongestGap: gap, RepeatRule: in.GetRepeatRule(), LotsAreTracks: in.GetLotsAreTracks(),
		Standardised: in.GetStandardised(), RelevantShiftSigmas: in.GetRelevantShiftSigmas(), RelevantSigmaRatio: in.GetRelevantSigmaRatio(),
	}
	if kind.SizeImplied() && c.SubgroupSize == 0 {
		c.SubgroupSize = 1
	}
	return c, c.Check()
}

func decimalsFromProto(d int32, there bool) *int {
	if !there {
		return nil
	}
	n := int(d)
	return &n
}

func chartToProto(c definition.Chart) *pb.Chart {
	out := &pb.Chart{
		Name: c.Name, Title: c.Title, Kind: kindToProto(c.Kind), SubgroupSize: int32(c.SubgroupSize), Unit: c.Unit, Labels: c.Labels,
		DisplayZone: c.DisplayZone, PlanInterval: durationToProto(c.PlanInterval), LongestGap: durationToProto(c.LongestGap),
		RepeatRule: c.RepeatRule, LotsAreTracks: c.LotsAreTracks, Revision: c.Revision, Archived: c.Archived, CreateTime: timeToProto(c.CreatedAt),
		Standardised: c.Standardised,
	}
	out.RelevantShiftSigmas, out.RelevantSigmaRatio = c.Relevance()
	if c.Decimals != nil {
		d := int32(*c.Decimals)
		out.Decimals = &d
	}
	return out
}

func trackStateToProto(s store.TrackState) pb.TrackState {
	return pb.TrackState(s) + pb.TrackState_TRACK_STATE_CLEAR
}

func trackToProto(t store.Track) *pb.TrackStatus {
	return &pb.TrackStatus{
		Chart: t.Chart, Lot: t.Lot, State: trackStateToProto(t.State()), HoldSince: timeToProto(t.HoldSince), OpenSignals: int32(t.OpenSignals),
		Version: int32(t.Version), Results: t.Results, LastMeasuredAt: timeToProto(t.LastMeasuredAt), Occurrence: t.Occurrence,
	}
}

func tracksToProto(in []store.Track) []*pb.TrackStatus {
	out := make([]*pb.TrackStatus, len(in))
	for i, t := range in {
		out[i] = trackToProto(t)
	}
	return out
}

// markToProto writes a mark; nil stays nil.
func markToProto(m *store.Mark) *pb.Mark {
	if m == nil {
		return nil
	}
	return &pb.Mark{
		Id: m.ID, Chart: m.Chart, Lot: m.Lot, At: timeToProto(m.At), Text: m.Text, Break: m.Break, Restart: m.Restart,
		Author: m.Author, RecordedAt: timeToProto(m.RecordedAt), Voided: m.Voided,
	}
}

// changeToProto writes a change request; nil stays nil.
func changeToProto(c *store.Change) *pb.ChangeRequest {
	if c == nil {
		return nil
	}
	fields := make([]*pb.FieldChange, len(c.Fields))
	for i, f := range c.Fields {
		fields[i] = &pb.FieldChange{Field: f.Field, From: f.From, To: f.To}
	}
	return &pb.ChangeRequest{
		Id: c.ID, Kind: pb.ChangeKind(pb.ChangeKind_value["CHANGE_KIND_"+c.Kind]), Status: pb.ChangeStatus(pb.ChangeStatus_value["CHANGE_STATUS_"+c.Status]),
		Chart: c.Chart, Source: c.Source, SourceId: c.SourceID, Mark: c.MarkID, Version: int32(c.Version), ReasonCode: c.ReasonCode, Reason: c.Reason,
		Author: c.Author, CreateTime: timeToProto(c.CreatedAt), DecidedBy: c.DecidedBy, DecideTime: timeToProto(c.DecidedAt), DecisionReason: c.DecisionReason,
		VerdictsChanged: int32(c.VerdictsChanged), SignalsEnded: c.SignalsEnded, FieldChanges: fields,
	}
}
