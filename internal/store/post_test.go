package store_test

import (
	"fmt"
	"slices"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/store"
)

// lotted is a chart whose lots are tracks.
func (f *fixture) mustLotted(name string) definition.Chart {
	f.tb.Helper()
	c := individuals(name)
	c.LotsAreTracks = true
	return f.mustChart(c)
}

func ofLot(c definition.Chart, lot string, n int, reading string) definition.Result {
	r := result(c, n, reading)
	r.Lot = lot
	return r
}

func (f *fixture) lots(c definition.Chart) (lots []string) {
	f.tb.Helper()
	tracks, _, err := f.ListTracks(f.tb.Context(), f.ann, c.Name, store.Page{})
	if err != nil {
		f.tb.Fatal(err)
	}
	for _, t := range tracks {
		lots = append(lots, t.Lot)
	}
	return lots
}

// posted posts and gives the outcomes, with the reasons of those that were not stored.
func (f *fixture) posted(s *store.Store, a store.Actor, all bool, batch ...definition.Result) (rows []store.Posted, said []string) {
	f.tb.Helper()
	answer, err := s.PostResults(f.tb.Context(), a, batch, all, nil)
	if err != nil {
		f.tb.Fatal(err)
	}
	names := map[store.Outcome]string{store.Accepted: "accepted", store.Duplicate: "duplicate", store.Conflict: "conflict", store.Refused: "refused", store.NotStored: "not stored"}
	for _, row := range answer.Rows {
		text := names[row.Outcome]
		if row.Outcome == store.Refused {
			text = string(row.Problem.Reason)
		}
		said = append(said, text)
	}
	return answer.Rows, said
}

// A poster learns nothing of charts out of sight, and opens nothing there: every row is answered as one of no chart.
func TestPostToAChartOutOfSightIsAsToNone(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c, gone := f.mustLotted("nitrate"), f.mustLotted("lead")
	f.mustPost(c, "A1", 0, "10")
	if _, err := f.ArchiveChart(t.Context(), f.ann, req(), gone.Name, 1, "closed"); err != nil {
		t.Fatal(err)
	}
	far := f.mustActor("far", map[string]string{"site": "ostley"})
	wrongUnit, noLot, many, early := ofLot(c, "B2", 1, "10"), ofLot(c, "", 1, "10"), ofLot(c, "B2", 1, "10"), ofLot(c, "B2", 1, "10")
	wrongUnit.Unit, many.Readings, early.MeasuredAt = "ug/L", []string{"1", "2"}, time.Now().AddDate(1, 0, 0)
	for name, row := range map[string]definition.Result{
		"new lot": ofLot(c, "B2", 1, "10"), "known lot": ofLot(c, "A1", 1, "10"), "stored": ofLot(c, "A1", 0, "10"), "wrong unit": wrongUnit,
		"no lot": noLot, "too many readings": many, "in the future": early, "archived": ofLot(gone, "A1", 1, "10"),
	} {
		for _, all := range []bool{false, true} {
			rows, _ := f.posted(f.Store, far, all, row)
			absent := row
			absent.Chart = "absent"
			as, _ := f.posted(f.Store, far, all, absent)
			as[0].Problem.Text = fmt.Sprintf("there is no chart %q", row.Chart)
			if got, want := fmt.Sprintf("%+v %+v", rows[0].Outcome, *rows[0].Problem), fmt.Sprintf("%+v %+v", as[0].Outcome, *as[0].Problem); got != want {
				t.Errorf("%s, all %v: got %s, want %s", name, all, got, want)
			}
		}
	}
	want(t, "lots", f.lots(c), "[A1]")
	want(t, "lots of the archived", f.lots(gone), "[]")
}

func TestALotIsOpenedByASoundRowOnly(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustLotted("nitrate")
	f.mustPost(c, "A1", 0, "10")
	stored := ofLot(c, "A1", 0, "10")
	stored.SourceID += "-A1"

	t.Run("not by one in the future", func(t *testing.T) {
		r := ofLot(c, "B2", 1, "10")
		r.MeasuredAt = time.Now().AddDate(0, 0, 3)
		_, said := f.posted(f.Store, f.ann, false, r)
		want(t, "said", said, "[TIME_IN_FUTURE]")
	})
	t.Run("not by one whose key is stored", func(t *testing.T) {
		r := stored
		r.Lot = "B2"
		rows, said := f.posted(f.Store, f.ann, false, r)
		want(t, "said", said, "[conflict]")
		want(t, "stored", rows[0].Stored.Lot, "A1")
	})
	t.Run("not by a twin of an earlier row", func(t *testing.T) {
		rows, said := f.posted(f.Store, f.ann, false, ofLot(c, "A1", 1, "10"), ofLot(c, "B2", 1, "10"), ofLot(c, "A1", 1, "10"))
		want(t, "said", said, "[accepted conflict duplicate]")
		want(t, "first", rows[2].First.Standing, rows[0].First.Standing)
	})
	for name, bad := range map[string]definition.Result{"no number": ofLot(c, "A1", 2, "ten"), "no chart": {Chart: "absent", Source: "lims", SourceID: "x", MeasuredAt: day(0), Readings: []string{"1"}},
		"a conflict": func() definition.Result { r := stored; r.Analyst = "other"; return r }()} {
		t.Run("not in an all-or-nothing post with "+name, func(t *testing.T) {
			_, said := f.posted(f.Store, f.ann, true, ofLot(c, "B2", 2, "10"), bad, ofLot(c, "C3", 3, "10"), ofLot(c, "C3", 3, "10"))
			want(t, "said", []string{said[0], said[2], said[3]}, "[not stored not stored not stored]")
		})
	}
	want(t, "lots", f.lots(c), "[A1]")
	t.Run("not on an archived chart, whose stored rows are answered", func(t *testing.T) {
		second := mustOpen(t, f.db.ServiceURL())
		gone := f.mustLotted("lead")
		f.posted(second, f.ann, false, ofLot(gone, "A1", 0, "10")) // its cache knows only this lot
		f.posted(f.Store, f.ann, false, ofLot(gone, "B2", 1, "10"))
		if _, err := f.ArchiveChart(t.Context(), f.ann, req(), gone.Name, 1, "closed"); err != nil {
			t.Fatal(err)
		}
		_, said := f.posted(second, f.ann, false, ofLot(gone, "C3", 3, "10"), ofLot(gone, "B2", 1, "10"), ofLot(gone, "B2", 4, "10"))
		want(t, "said", said, "[CHART_ARCHIVED duplicate CHART_ARCHIVED]")
		want(t, "lots", f.lots(gone), "[A1 B2]")
	})
	t.Run("and its start is in the audit chain", func(t *testing.T) {
		_, said := f.posted(f.Store, f.ann, true, ofLot(c, "B2", 5, "10"), ofLot(c, "C3", 6, "10"), ofLot(c, "B2", 7, "10"))
		want(t, "said", said, "[accepted accepted accepted]")
		for _, kinds := range f.wantChains() {
			if slices.Contains(kinds, "POST_RESULTS") && len(kinds) > 6 {
				want(t, "kinds", kinds, "[CREATE_CHART START_LOT POST_RESULTS POST_RESULTS START_LOT START_LOT POST_RESULTS]")
			}
		}
	})
	f.mustRecheck()
}

// A conflict shows what is stored at present, after an amendment.
func TestConflictShowsThePresentContent(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustPost(c, "", 0, "10")
	amended := result(c, 0, "10.4")
	_, ch, err := f.AmendResult(t.Context(), f.ann, req(), amended, 1, "TYPO", "typing error")
	if err != nil {
		t.Fatal(err)
	}
	if ch != nil {
		if _, _, err := f.DecideChange(t.Context(), f.bob, req(), ch.ID, true, "", ch.SignalsEnded); err != nil {
			t.Fatal(err)
		}
	}
	rows, said := f.posted(f.Store, f.ann, false, result(c, 0, "10.8"), result(c, 0, "10"), result(c, 0, "10.4"))
	want(t, "said", said, "[conflict duplicate duplicate]")
	want(t, "stored", rows[0].Stored.Readings, "[10.4]")
}

// Ten thousand names of no chart, and as many twins, are answered without a query or a search for each.
func TestManyUnknownChartsAndTwinsArePosted(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	var batch []definition.Result
	for i := range 5000 {
		r := result(c, 0, "10")
		batch = append(batch, r)
		r.Chart = fmt.Sprintf("absent-%d", i)
		batch = append(batch, r)
	}
	_, said := f.posted(f.Store, f.ann, false, batch...)
	counts := map[string]int{}
	for _, s := range said {
		counts[s]++
	}
	want(t, "said", counts, map[string]int{"accepted": 1, "duplicate": 4999, "NOT_FOUND": 5000})
}
