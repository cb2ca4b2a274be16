package service

import (
	"fmt"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// Bounds of a result that no chart is needed to check.
const (
	// readingBytesMax bounds the text of a reading: more digits than any instrument has.
	readingBytesMax = 64
)

// resultFromProto reads a control result. What depends on its chart is checked by definition.Result.Prepare.
func resultFromProto(in *pb.Result) (definition.Result, error) {
	r := definition.Result{
		Chart: in.GetChart(), Source: in.GetSource(), SourceID: in.GetSourceId(), MeasuredText: in.GetMeasuredAt(),
		Lot: in.GetLot(), RunID: in.GetRunId(), Position: in.GetPosition(), Replicate: in.GetReplicate(),
		RepeatOf: in.GetRepeatOf(), Readings: in.GetReadings(), Count: countFromProto(in.GetCount()), Unit: in.GetUnit(),
		Material: in.GetMaterial(), Analyst: in.GetAnalyst(), Instrument: in.GetInstrument(), Labels: in.GetLabels(),
	}
	err := first(definition.CheckSlug("chart", r.Chart), checkName("source", r.Source, 1), checkName("source_id", r.SourceID, 1))
	if err != nil {
		return r, err
	}
	if len(r.Readings) > chart.SubgroupSizeMax {
		return r, &definition.Error{Reason: definition.WrongReadingCount, Field: "readings",
			Text: fmt.Sprintf("%d readings: no subgroup holds more than %d", len(r.Readings), chart.SubgroupSizeMax)}
	}
	for i, text := range r.Readings {
		if len(text) > readingBytesMax {
			return r, definition.Invalid(fmt.Sprintf("readings[%d]", i), "%d bytes long, the limit is %d", len(text), readingBytesMax)
		}
	}
	if r.MeasuredAt, err = definition.ParseMeasuredAt(r.MeasuredText); err != nil {
		return r, err
	}
	if role := in.GetRole(); role < pb.ResultRole_RESULT_ROLE_UNSPECIFIED || role > pb.ResultRole_RESULT_ROLE_SETUP {
		return r, definition.Invalid("role", "%d: no such value", role)
	}
	r.Role = definition.Role(in.GetRole())
	return r, nil
}

func countFromProto(in *pb.Count) *chart.Count {
	if in == nil {
		return nil
	}
	return &chart.Count{Nonconforming: in.Nonconforming, Inspected: in.Inspected}
}

func resultToProto(r definition.Result) *pb.Result {
	measured := r.MeasuredText
	if measured == "" {
		measured = r.MeasuredAt.UTC().Format("2006-01-02T15:04:05.999999Z07:00")
	}
	var count *pb.Count
	if r.Count != nil {
		count = &pb.Count{Nonconforming: r.Count.Nonconforming, Inspected: r.Count.Inspected}
	}
	return &pb.Result{
		Count: count, Chart: r.Chart, Source: r.Source, SourceId: r.SourceID, MeasuredAt: measured, Lot: r.Lot, RunId: r.RunID,
		Position: r.Position, Replicate: r.Replicate, Role: pb.ResultRole(r.Role), RepeatOf: r.RepeatOf, Readings: r.Readings, Unit: r.Unit,
		Material: r.Material, Analyst: r.Analyst, Instrument: r.Instrument, Labels: r.Labels,
	}
}

// verdictToProto writes a verdict on a result of the material with the readings.
func verdictToProto(v store.Verdict, material string, readings []string) *pb.ResultVerdict {
	out := &pb.ResultVerdict{
		Standing: standingToProto(v.Standing), Reason: notJudgedToProto(v.Reason), ByBound: v.ByBound, Version: int32(v.Version), Judge: int32(v.Judge),
		Instruction: v.Instruction, RecordedAt: timeToProto(v.RecordedAt),
	}
	for role, t := range v.Traces {
		if !t.Point {
			continue
		}
		trace := traceVerdictToProto(t.Statistic, t.Scale, t.Lines)
		trace.Original = originalVerdict(v.By, chart.Role(role), material, t.Statistic, t.Lines)
		if chart.Role(role) == chart.Location {
			asMeasured(trace.Original, readings)
		}
		if chart.Role(role) == chart.Location {
			out.Location = trace
		} else {
			out.Dispersion = trace
		}
	}
	for _, h := range v.Hits {
		out.Hits = append(out.Hits, &pb.ResultHit{
			Trace: roleToProto(h.Role), Rule: h.Rule, Side: sideToProto(h.Side), Consequence: consequenceToProto(h.Consequence),
			WindowFirst: keyOfResult(h.WindowFirst), FirstCounting: keyOfResult(h.FirstCounting),
		})
	}
	return out
}

// asMeasured gives a single reading as it was measured: what is judged was rounded on another scale, and back in the unit
// it would be another figure.
func asMeasured(o *pb.OriginalScale, readings []string) {
	if o == nil || len(readings) != 1 {
		return
	}
	if r, err := decimal.ParseReading(readings[0]); err == nil && r.Bound == decimal.Measured {
		o.Statistic = &r.Value
	}
}

func storedToProto(s store.StoredResult) *pb.StoredResult {
	return &pb.StoredResult{
		Result: resultToProto(s.Result), Revision: int32(s.Revision), Voided: s.Voided, Poster: s.Poster,
		RecordedAt: timeToProto(s.RecordedAt), Verdict: verdictToProto(s.Verdict, s.Result.Material, s.Result.Readings),
	}
}

func storedAllToProto(in []store.StoredResult) []*pb.StoredResult {
	out := make([]*pb.StoredResult, len(in))
	for i, s := range in {
		out[i] = storedToProto(s)
	}
	return out
}

func revisionToProto(r store.Revision) *pb.ResultRevision {
	out := &pb.ResultRevision{
		Revision: int32(r.Number), Result: resultToProto(r.Result), Voided: r.Voided, Author: r.Author, ConfirmedBy: r.ConfirmedBy,
		ReasonCode: r.ReasonCode, Reason: r.ReasonText, RecordedAt: timeToProto(r.RecordedAt),
	}
	for _, v := range r.Verdicts {
		out.Verdicts = append(out.Verdicts, verdictToProto(v, r.Result.Material, r.Result.Readings))
	}
	return out
}

// postedToProto answers row i of a post.
func postedToProto(i int, row *pb.Result, p store.Posted) *pb.PostedResult {
	out := &pb.PostedResult{Outcome: pb.PostOutcome(p.Outcome), Chart: row.GetChart(), Source: row.GetSource(), SourceId: row.GetSourceId()}
	if e := p.Problem; e != nil {
		out.Reason, out.Field = reasonToProto(e.Reason), rowField(i, e.Field)
		out.Message = e.Text
		if out.Field != "" {
			out.Message = out.Field + ": " + e.Text
		}
	}
	switch p.Outcome {
	case store.Accepted:
		out.Verdict = verdictToProto(p.First, row.GetMaterial(), row.GetReadings())
	case store.Duplicate:
		out.Verdict, out.CurrentVerdict = verdictToProto(p.First, row.GetMaterial(), row.GetReadings()), verdictToProto(p.Current, row.GetMaterial(), row.GetReadings())
	case store.Conflict:
		out.Stored, out.CurrentVerdict = resultToProto(p.Stored), verdictToProto(p.Current, row.GetMaterial(), row.GetReadings())
	}
	if p.HasTrack {
		out.TrackState = trackStateToProto(p.TrackState)
	}
	return out
}

// rowField gives the path of a field of row i; what is already a path stays as it is.
func rowField(i int, field string) string {
	if field == "" || strings.HasPrefix(field, "results[") {
		return field
	}
	return fmt.Sprintf("results[%d].%s", i, field)
}

func updatesToProto(in []store.TrackUpdate) []*pb.TrackUpdate {
	out := make([]*pb.TrackUpdate, len(in))
	for i, u := range in {
		t := &pb.TrackUpdate{
			Chart: u.Track.Chart, Lot: u.Track.Lot, State: trackStateToProto(u.Track.State()), OpenSignals: int32(u.Track.OpenSignals),
			ResultsRejudged: int64(u.Rejudged),
		}
		for _, c := range u.Signals {
			t.Signals = append(t.Signals, &pb.SignalUpdate{
				Signal: c.SignalID, Change: signalChangeToProto(c.Change), Trace: roleToProto(c.Role), Rule: c.Rule,
				Side: sideToProto(c.Side), Consequence: consequenceToProto(c.Consequence),
			})
		}
		if u.OrderNotKnown {
			t.Findings = append(t.Findings, orderNotKnown())
		}
		out[i] = t
	}
	return out
}

func orderNotKnown() *pb.Finding {
	return &pb.Finding{
		Code:      "ORDER_NOT_KNOWN",
		Text:      "Results of this track have equal times and no position, so their order is that of their source and id.",
		Advice:    "Post positions, or times fine enough to tell results apart.",
		CouldMiss: "A pattern among results whose true order differs, and one that is there only in this order.",
	}
}
