package store_test

import (
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/rules"
	"limitary/internal/store"
)

func TestSignalsAreFoundByWhatTheyAre(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	nitrate := f.mustChart(individuals("nitrate"))
	other := individuals("lead")
	other.Labels = map[string]string{"site": "ostley", "analyte": "lead"}
	lead := f.mustChart(other)
	for _, c := range []definition.Chart{nitrate, lead} {
		f.mustApprove(limits{chart: c, from: day(0)})
	}
	f.mustPost(nitrate, "", 0, "14", "10.5", "10.5", "10.5", "9", "6", "10") // STOP up at 0, ACT up at 3, STOP down at 5
	f.mustPost(lead, "", 0, "10", "14")
	found := func(filter store.SignalFilter) (words []string) {
		t.Helper()
		list, _, err := f.QuerySignals(t.Context(), f.cleo, filter, store.Page{})
		if err != nil {
			t.Fatal(err)
		}
		for _, s := range list {
			words = append(words, fmt.Sprintf("%s/%s/%v/%v", s.Chart, s.Rule, s.Side, s.LastHit.MeasuredAt.Sub(day(0)).Hours()/24))
		}
		return words
	}
	all := []string{"nitrate/lab/1/LOWER/5", "nitrate/lab/2/UPPER/3", "lead/lab/1/UPPER/1", "nitrate/lab/1/UPPER/0"}
	for name, row := range map[string]struct {
		filter store.SignalFilter
		want   []string
	}{
		"all":         {store.SignalFilter{}, all},
		"chart":       {store.SignalFilter{Chart: "lead"}, all[2:3]},
		"labels":      {store.SignalFilter{Labels: map[string]string{"analyte": "lead"}}, all[2:3]},
		"rule":        {store.SignalFilter{Rule: "lab/2"}, all[1:2]},
		"consequence": {store.SignalFilter{Consequence: rules.Act}, all[1:2]},
		"from":        {store.SignalFilter{From: day(3)}, all[:2]},
		"to":          {store.SignalFilter{To: day(3)}, all[2:]},
		"open":        {store.SignalFilter{Statuses: []string{"OPEN"}}, all},
		"closed":      {store.SignalFilter{Statuses: []string{"CLOSED", "RETRACTED"}}, nil},
		"changed":     {store.SignalFilter{ChangedAfterClosing: true}, nil},
		"lot":         {store.SignalFilter{Lot: "A1"}, nil},
	} {
		want(t, name, found(row.filter), row.want)
	}
	t.Run("page by page", func(t *testing.T) {
		var pages []string
		page := store.Page{Size: 1}
		for {
			list, next, err := f.QuerySignals(t.Context(), f.cleo, store.SignalFilter{}, page)
			if err != nil {
				t.Fatal(err)
			}
			pages = append(pages, fmt.Sprintf("%s/%v", list[0].Chart, list[0].LastHit.MeasuredAt.Sub(day(0)).Hours()/24))
			if page.Token = next; next == "" {
				break
			}
		}
		want(t, "pages", pages, "[nitrate/5 nitrate/3 lead/1 nitrate/0]")
	})
	t.Run("within the key's labels only", func(t *testing.T) {
		local := f.mustActor("dan", map[string]string{"site": "ostley"})
		list, _, err := f.QuerySignals(t.Context(), local, store.SignalFilter{}, store.Page{})
		if err != nil || len(list) != 1 || list[0].Chart != "lead" {
			t.Errorf("got %v, %v, want that of lead", list, err)
		}
	})
	t.Run("and nonsense is refused", func(t *testing.T) {
		for _, bad := range []store.SignalFilter{{Statuses: []string{"open"}}, {From: day(2), To: day(1)}, {Consequence: 9}} {
			_, _, err := f.QuerySignals(t.Context(), f.cleo, bad, store.Page{})
			wantReason(t, err, definition.InvalidField)
		}
	})
}

func TestSignalTellsWhereItIsAndWhatHappened(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "10.5")
	f.mustPost(c, "", 4, "10.5")
	id := f.mustSignals(c)[0].ID
	r := req()
	note, err := f.NoteSignal(t.Context(), f.cleo, r, id, "asked the bench")
	if err != nil {
		t.Fatal(err)
	}
	again, err := f.NoteSignal(t.Context(), f.cleo, r, id, "asked the bench")
	if err != nil {
		t.Fatal(err)
	}
	want(t, "repeat", again, note)
	s, events, notes, err := f.GetSignal(t.Context(), f.bob, id)
	if err != nil {
		t.Fatal(err)
	}
	want(t, "points", []string{s.FirstPoint.SourceID, s.FirstHit.SourceID, s.LastHit.SourceID}, "[r000 r003 r004]")
	want(t, "moments", []time.Time{s.FirstPoint.MeasuredAt, s.LastHit.MeasuredAt}, []time.Time{day(0), day(4)})
	want(t, "rule", []any{s.Rule, s.Description, s.Consequence, s.Version}, []any{"lab/2", rules.Spec{Kind: rules.SameSide, N: 4}.Describe(), rules.Act, 1})
	var story []string
	for _, e := range events {
		story = append(story, e.Change+" "+e.LastHit.SourceID+" "+e.Principal)
	}
	want(t, "events", story, "[OPENED r003 ann CHANGED r004 ann]")
	want(t, "notes", notes, []store.Note{note})
	_, _, _, err = f.GetSignal(t.Context(), f.bob, id+1)
	wantReason(t, err, definition.NotFound)
	_, err = f.NoteSignal(t.Context(), f.cleo, req(), id+1, "x")
	wantReason(t, err, definition.NotFound)
	for text, ok := range map[string]bool{"": false, strings.Repeat("x", 4000): true, strings.Repeat("x", 4001): false} {
		if _, err := f.NoteSignal(t.Context(), f.cleo, req(), id, text); (err == nil) != ok {
			t.Errorf("note of %d bytes: %v", len(text), err)
		}
	}
}

func TestOccurrenceIsClosedAsItWasSeen(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "14") // both rules
	open := f.mustSignals(c, "OPEN")
	if len(open) != 2 || open[0].Occurrence != open[1].Occurrence {
		t.Fatalf("got %+v, want two signals of one occurrence", open)
	}
	occurrence := open[0].Occurrence
	seen := []int64{open[0].ID, open[1].ID}
	slices.Sort(seen)
	closing := func(decision string, seen []int64) error {
		_, _, err := f.CloseOccurrence(t.Context(), f.cleo, req(), occurrence, decision, "", seen)
		return err
	}
	refusal := wantReason(t, closing("ASSIGNABLE_CAUSE", seen[:1]), definition.WrongState)
	want(t, "not seen", refusal.Meta["not_seen"], seen[1])
	refusal = wantReason(t, closing("ASSIGNABLE_CAUSE", append(slices.Clone(seen), 999)), definition.WrongState)
	want(t, "not open", refusal.Meta["not_open"], 999)
	wantReason(t, closing("", seen), definition.InvalidField)

	r := req()
	closed, track, err := f.CloseOccurrence(t.Context(), f.cleo, r, occurrence, "ASSIGNABLE_CAUSE", "wrong standard", seen)
	if err != nil || len(closed) != 2 {
		t.Fatalf("got %+v, %v", closed, err)
	}
	want(t, "closed", []any{closed[0].Status, closed[0].ClosedBy, closed[0].Decision, closed[0].Cause}, "[CLOSED cleo ASSIGNABLE_CAUSE wrong standard]")
	want(t, "track", []any{track.OpenSignals, track.Occurrence, track.State()}, []any{0, 0, store.TrackHold})
	again, trackAgain, err := f.CloseOccurrence(t.Context(), f.cleo, r, occurrence, "ASSIGNABLE_CAUSE", "wrong standard", seen)
	if err != nil {
		t.Fatal(err)
	}
	want(t, "repeat", []any{again, trackAgain}, []any{closed, track})
	wantReason(t, closing("ASSIGNABLE_CAUSE", seen), definition.NothingToDo)
	_, _, err = f.CloseOccurrence(t.Context(), f.cleo, req(), 999, "x", "", nil)
	wantReason(t, err, definition.NotFound)

	t.Run("a good point ends no hold, a person does", func(t *testing.T) {
		f.mustPost(c, "", 5, "10")
		track := f.mustTrack(c, "")
		want(t, "state", track.State(), store.TrackHold)
		_, err := f.ReleaseTrack(t.Context(), f.cleo, req(), c.Name, "", "new standard", track.HoldSince.Add(time.Microsecond))
		wantReason(t, err, definition.RevisionMismatch)
		_, err = f.ReleaseTrack(t.Context(), f.cleo, req(), c.Name, "", "", track.HoldSince)
		wantReason(t, err, definition.InvalidField)
		_, err = f.ReleaseTrack(t.Context(), f.cleo, req(), c.Name, "A1", "new standard", track.HoldSince)
		wantReason(t, err, definition.NotFound)
		r := req()
		released, err := f.ReleaseTrack(t.Context(), f.cleo, r, c.Name, "", "new standard", track.HoldSince)
		if err != nil || released.State() != store.TrackClear {
			t.Fatalf("got %+v, %v", released, err)
		}
		if again, err := f.ReleaseTrack(t.Context(), f.cleo, r, c.Name, "", "new standard", track.HoldSince); err != nil || again != released {
			t.Errorf("repeat: %+v, %v", again, err)
		}
		_, err = f.ReleaseTrack(t.Context(), f.cleo, req(), c.Name, "", "new standard", track.HoldSince)
		wantReason(t, err, definition.NothingToDo)
	})
	t.Run("a signal that goes on opens the next", func(t *testing.T) {
		f.mustPost(c, "", 6, "14")
		next := f.mustSignals(c, "OPEN")
		if len(next) != 1 || next[0].Occurrence == occurrence {
			t.Errorf("got %+v, want one signal of a new occurrence", next)
		}
	})
	f.mustRecheck()
}

// The query that people have on the wall: it must read the few open signals and not all there ever were.
func TestOpenSignalsAreReadByTheirOwnIndex(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "14")
	conn := f.owner()
	// Closed signals of fifty charts; only the plan matters, so the charts need not be there.
	mustExec(t, conn, `SET session_replication_role = replica`)
	mustExec(t, conn, `INSERT INTO signals SELECT signal_id + n, chart_id + n % 50, track_id, trace, rule, side, consequence, version, 'CLOSED', occurrence,
			first_point, first_point_result, first_hit, first_hit_result, last_hit, last_hit_result, last_hit_at - n * interval '1 hour', NULL, false,
			opened_at, now(), 'cleo', 'x', ''
		FROM signals, generate_series(1, 50000) n`)
	var chartID int64
	if err := conn.QueryRow(t.Context(), `SELECT chart_id FROM charts`).Scan(&chartID); err != nil {
		t.Fatal(err)
	}
	mustExec(t, conn, `ANALYZE signals`)
	for name, row := range map[string]struct {
		filter store.SignalFilter
		index  string
	}{
		"open":            {store.SignalFilter{Statuses: []string{"OPEN"}}, "signals_open"},
		"open and labels": {store.SignalFilter{Statuses: []string{"OPEN"}, Labels: map[string]string{"site": "harwick"}}, "signals_open"},
		"all":             {store.SignalFilter{}, "signals_all"},
		"one chart's":     {store.SignalFilter{Chart: "nitrate"}, "signals_chart"},
		"stops":           {store.SignalFilter{Consequence: rules.Stop}, "signals_all"},
	} {
		sql, args := store.SignalsSQL(row.filter, f.cleo, chartID, 100)
		var plan string
		if err := conn.QueryRow(t.Context(), `EXPLAIN (FORMAT JSON) `+sql, args...).Scan(&plan); err != nil {
			t.Fatal(err)
		}
		if !strings.Contains(plan, `"Index Name": "`+row.index+`"`) {
			t.Errorf("%s: the plan does not use %s:\n%s", name, row.index, plan)
		}
	}
}
