package sheet

import (
	"strconv"
	"time"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/grid"
)

// resultsOf makes the table of results, with as many columns of readings as the largest of them needs.
func resultsOf(all []*pb.StoredResult) *grid.Table {
	most, counts := 0, false
	for _, r := range all {
		most, counts = max(most, len(r.Result.Readings)), counts || r.Result.Count != nil
	}
	if most == 0 && !counts {
		most = 1
	}
	t := &grid.Table{Name: "Results", Columns: []string{"chart", "lot", "source", "source_id", "measured_at", "measured_at_utc"}}
	for i := range most {
		t.Columns = append(t.Columns, "reading_"+strconv.Itoa(i+1))
	}
	if counts {
		t.Columns = append(t.Columns, "nonconforming", "inspected")
	}
	t.Columns = append(t.Columns, "unit", "run_id", "position", "replicate", "role", "repeat_of", "material", "analyst", "instrument",
		"revision", "voided", "poster", "recorded_at", "standing", "version")
	for _, s := range all {
		r := s.Result
		row := append(keyCells(r), make([]grid.Value, most)...)
		for i, text := range r.Readings {
			row[len(row)-most+i] = typed(text)
		}
		if counts {
			row = append(row, countCells(r.Count)...)
		}
		t.Rows = append(t.Rows, append(row, grid.Of(r.Unit), grid.Of(r.RunId), grid.Int(r.Position), grid.Int(r.Replicate),
			grid.Of(word(r.Role.String(), "RESULT_ROLE_")), grid.Of(r.RepeatOf), grid.Of(r.Material), grid.Of(r.Analyst), grid.Of(r.Instrument),
			grid.Int(s.Revision), grid.Yes(s.Voided), grid.Of(s.Poster), grid.Moment(s.RecordedAt.AsTime()),
			grid.Of(standingWord(s.Verdict.GetStanding(), s.Verdict.GetReason())), versionCell(s.Verdict.GetVersion())))
	}
	return t
}

func countCells(c *pb.Count) []grid.Value {
	if c == nil {
		return make([]grid.Value, 2)
	}
	return []grid.Value{grid.Float(c.Nonconforming), grid.Float(c.Inspected)}
}

func keyCells(r *pb.Result) []grid.Value {
	at := grid.Value{}
	if t, err := time.Parse(time.RFC3339Nano, r.MeasuredAt); err == nil {
		at = grid.Moment(t)
	}
	return []grid.Value{grid.Of(r.Chart), grid.Of(r.Lot), grid.Of(r.Source), grid.Of(r.SourceId), grid.Of(r.MeasuredAt), at}
}

func versionCell(n int32) grid.Value {
	if n == 0 {
		return grid.Value{}
	}
	return grid.Int(n)
}

var traceColumns = []string{"statistic", "centre", "sigma", "lower_action", "lower_warning", "upper_warning", "upper_action"}

func verdictsOf(all []*pb.StoredResult) *grid.Table {
	t := &grid.Table{Name: "Verdicts", Columns: []string{"chart", "lot", "source", "source_id", "measured_at", "measured_at_utc",
		"standing", "by_bound", "version", "judge", "instruction", "rules"}}
	t.Columns = append(t.Columns, traceColumns...)
	for _, c := range traceColumns {
		t.Columns = append(t.Columns, ofDispersion+c)
	}
	for _, c := range originalColumns {
		t.Columns = append(t.Columns, inUnit+c)
	}
	for _, s := range all {
		v := s.Verdict
		row := append(keyCells(s.Result), grid.Of(standingWord(v.GetStanding(), v.GetReason())), grid.Yes(v.GetByBound()), versionCell(v.GetVersion()),
			versionCell(v.GetJudge()), grid.Of(v.GetInstruction()), grid.Of(storedRules(v)))
		row = append(append(row, traceCells(v.GetLocation())...), traceCells(v.GetDispersion())...)
		t.Rows = append(t.Rows, append(row, originalCells(v.GetLocation().GetOriginal())...))
	}
	return t
}

// originalColumns are the location trace in the chart's unit, where it is judged on another scale; blank elsewhere.
var originalColumns = []string{"statistic", "centre", "lower_action", "lower_warning", "upper_warning", "upper_action"}

func originalCells(o *pb.OriginalScale) []grid.Value {
	if o == nil {
		return make([]grid.Value, len(originalColumns))
	}
	return []grid.Value{grid.Optional(o.Statistic), grid.Optional(o.Centre), grid.Optional(o.LowerAction), grid.Optional(o.LowerWarning),
		grid.Optional(o.UpperWarning), grid.Optional(o.UpperAction)}
}

func traceCells(t *pb.TraceVerdict) []grid.Value {
	if t == nil {
		return make([]grid.Value, len(traceColumns))
	}
	return []grid.Value{grid.Optional(t.Statistic), grid.Optional(t.Centre), grid.Optional(t.Sigma), grid.Optional(t.LowerAction),
		grid.Optional(t.LowerWarning), grid.Optional(t.UpperWarning), grid.Optional(t.UpperAction)}
}

func signalsOf(all []*pb.Signal) *grid.Table {
	t := &grid.Table{Name: "Signals", Columns: []string{"signal", "chart", "lot", "trace", "rule", "description", "side", "consequence", "version", "status",
		"occurrence", "first_hit", "first_hit_at", "last_hit", "last_hit_at", "open_time", "close_time", "closed_by", "decision", "cause", "changed_after_closing"}}
	for _, s := range all {
		row := []grid.Value{grid.Int(s.Id), grid.Of(s.Chart), grid.Of(s.Lot), grid.Of(word(s.Trace.String(), "TRACE_ROLE_")), grid.Of(s.Rule),
			grid.Of(s.Description), grid.Of(word(s.Side.String(), "SIDE_")), grid.Of(word(s.Consequence.String(), "CONSEQUENCE_")), versionCell(s.Version),
			grid.Of(word(s.Status.String(), "SIGNAL_STATUS_")), grid.Int(s.Occurrence)}
		row = append(append(row, pointCells(s.FirstHit)...), pointCells(s.LastHit)...)
		closed := grid.Value{}
		if s.CloseTime != nil {
			closed = grid.Moment(s.CloseTime.AsTime())
		}
		t.Rows = append(t.Rows, append(row, grid.Moment(s.OpenTime.AsTime()), closed, grid.Of(s.ClosedBy), grid.Of(s.Decision), grid.Of(s.Cause), grid.Yes(s.ChangedAfterClosing)))
	}
	return t
}

func pointCells(k *pb.StoredKey) []grid.Value {
	if k == nil {
		return make([]grid.Value, 2)
	}
	return []grid.Value{grid.Of(k.Source + "/" + k.SourceId), grid.Moment(k.MeasuredAt.AsTime())}
}
