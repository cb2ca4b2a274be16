package service

import (
	pb "limitary/api/limitary/v1"
	"limitary/internal/store"
)

func signalsToProto(in []store.Signal) []*pb.Signal {
	out := make([]*pb.Signal, len(in))
	for i, s := range in {
		out[i] = signalToProto(s)
	}
	return out
}

func signalToProto(s store.Signal) *pb.Signal {
	return &pb.Signal{
		Id: s.ID, Chart: s.Chart, Lot: s.Lot, Trace: roleToProto(s.Role), Rule: s.Rule, Description: s.Description, Side: sideToProto(s.Side),
		Consequence: consequenceToProto(s.Consequence), Version: int32(s.Version), Status: signalStatusToProto(s.Status), Occurrence: s.Occurrence,
		FirstPoint: keyOfResult(s.FirstPoint), FirstHit: keyOfResult(s.FirstHit), LastHit: keyOfResult(s.LastHit), MergedInto: s.MergedInto,
		ChangedAfterClosing: s.ChangedAfterClosing, OpenTime: timeToProto(s.OpenedAt), CloseTime: timeToProto(s.ClosedAt),
		ClosedBy: s.ClosedBy, Decision: s.Decision, Cause: s.Cause,
	}
}

func signalStatusToProto(s string) pb.SignalStatus {
	return pb.SignalStatus(pb.SignalStatus_value[signalStatusPrefix+s])
}

func signalChangeToProto(c string) pb.SignalChange {
	return pb.SignalChange(pb.SignalChange_value["SIGNAL_CHANGE_"+c])
}

func eventToProto(e store.SignalEvent) *pb.SignalEvent {
	return &pb.SignalEvent{
		Change: signalChangeToProto(e.Change), Status: signalStatusToProto(e.Status), Version: int32(e.Version),
		FirstPoint: keyOfResult(e.FirstPoint), FirstHit: keyOfResult(e.FirstHit), LastHit: keyOfResult(e.LastHit), MergedInto: e.MergedInto,
		By: e.Principal, RecordedAt: timeToProto(e.RecordedAt), Text: e.Text,
	}
}

func noteToProto(n store.Note) *pb.SignalNote {
	return &pb.SignalNote{Author: n.Author, Text: n.Text, RecordedAt: timeToProto(n.RecordedAt)}
}

// keyOfResult writes the key of a result; one that names none is absent.
func keyOfResult(k store.Key) *pb.StoredKey {
	if k.Source == "" && k.SourceID == "" {
		return nil
	}
	return &pb.StoredKey{Source: k.Source, SourceId: k.SourceID, MeasuredAt: timeToProto(k.MeasuredAt)}
}
