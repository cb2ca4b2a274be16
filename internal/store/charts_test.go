package store_test

import (
	"errors"
	"fmt"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/store"
)

func retitled(title string) func(*definition.Chart) error {
	return func(c *definition.Chart) error {
		c.Title = title
		return nil
	}
}

func TestChartIsReadBackAsMade(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	decimals := 3
	c := individuals("nitrate")
	c.Decimals, c.DisplayZone, c.RepeatRule = &decimals, "Europe/London", "Repeat once, then call."
	c.PlanInterval, c.LongestGap = 24*time.Hour, 72*time.Hour
	made := f.mustChart(c)
	got, err := f.GetChart(t.Context(), f.bob, c.Name)
	if err != nil {
		t.Fatal(err)
	}
	if *got.Decimals != decimals {
		t.Errorf("got %d decimals, want %d", *got.Decimals, decimals)
	}
	got.Decimals, made.Decimals = nil, nil
	want(t, "read back", got, made)
	c.Decimals, c.Revision, c.CreatedAt = nil, 1, got.CreatedAt
	want(t, "as asked for", got, c)
	t.Run("with its one track", func(t *testing.T) {
		tracks, _, err := f.ListTracks(t.Context(), f.bob, c.Name, store.Page{})
		if err != nil || len(tracks) != 1 || tracks[0].Lot != "" || tracks[0].State() != store.TrackClear {
			t.Errorf("got %+v, %v, want one clear track", tracks, err)
		}
	})
	t.Run("and its name is taken for good", func(t *testing.T) {
		_, err := f.CreateChart(t.Context(), f.bob, req(), individuals("nitrate"))
		wantReason(t, err, definition.AlreadyExists)
	})
	t.Run("unless it is unsound", func(t *testing.T) {
		bad := individuals("lead")
		bad.SubgroupSize = 2
		_, err := f.CreateChart(t.Context(), f.ann, req(), bad)
		wantReason(t, err, definition.InvalidField)
	})
}

func TestChartChangesOnlyAtTheRevisionThatWasRead(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	got, err := f.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, retitled("second"))
	if err != nil || got.Revision != 2 || got.Title != "second" {
		t.Fatalf("got %+v, %v", got, err)
	}
	_, err = f.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, retitled("third"))
	if refusal := wantReason(t, err, definition.RevisionMismatch); refusal.Meta["revision"] != "2" {
		t.Errorf("got meta %v, want the present revision", refusal.Meta)
	}
	_, err = f.ArchiveChart(t.Context(), f.ann, req(), c.Name, 1, "closed")
	wantReason(t, err, definition.RevisionMismatch)
}

func TestWhatAChartIsNeverChanges(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	for name, change := range map[string]func(*definition.Chart) error{
		"name": func(c *definition.Chart) error { c.Name = "lead"; return nil },
		"unit": func(c *definition.Chart) error { c.Unit = "µg/L"; return nil },
		"size": func(c *definition.Chart) error { c.SubgroupSize = 2; return nil },
		"lots": func(c *definition.Chart) error { c.LotsAreTracks = true; return nil },
		"gap":  func(c *definition.Chart) error { c.LongestGap = time.Hour; return nil },
		"bad":  func(c *definition.Chart) error { c.DisplayZone = "Nowhere/None"; return nil },
	} {
		_, err := f.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, change)
		if refusal := wantReason(t, err, definition.InvalidField); refusal == nil {
			t.Errorf("%s was changed", name)
		}
	}
	ownErr := errors.New("the caller's own")
	if _, err := f.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, func(*definition.Chart) error { return ownErr }); !errors.Is(err, ownErr) {
		t.Errorf("got %v, want the caller's own error", err)
	}
	got, err := f.GetChart(t.Context(), f.ann, c.Name)
	if err != nil {
		t.Fatal(err)
	}
	want(t, "chart after refusals", got, c)
}

func TestArchivedChartStaysReadableAndChangesNoMore(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	lotted := individuals("nitrate")
	lotted.LotsAreTracks = true
	c := f.mustChart(lotted)
	proposed := f.mustPropose(limits{chart: c, from: day(0)})
	mark, _, err := f.AddMark(t.Context(), f.ann, req(), store.Mark{Chart: c.Name, At: day(1), Text: "new lamp"}, "", "")
	if err != nil {
		t.Fatal(err)
	}
	r := req()
	if c, err = f.ArchiveChart(t.Context(), f.ann, r, c.Name, 1, "method withdrawn"); err != nil || !c.Archived {
		t.Fatalf("got %+v, %v", c, err)
	}
	if again, err := f.ArchiveChart(t.Context(), f.ann, r, c.Name, 1, "method withdrawn"); err != nil || !again.Archived {
		t.Errorf("repeat: %+v, %v", again, err)
	}
	refusals := map[string]error{}
	_, refusals["UpdateChart"] = f.UpdateChart(t.Context(), f.ann, req(), c.Name, 2, retitled("x"))
	_, refusals["ArchiveChart"] = f.ArchiveChart(t.Context(), f.ann, req(), c.Name, 2, "again")
	_, refusals["StartLot"] = f.StartLot(t.Context(), f.ann, req(), c.Name, "B2")
	_, refusals["ProposeVersion"] = f.ProposeVersion(t.Context(), f.ann, req(), c.Name, limits{chart: c, from: day(0)}.content("ann"))
	_, _, refusals["ApproveVersion"] = f.ApproveVersion(t.Context(), f.bob, req(), c.Name, 1, proposed.Digest, false, "", nil)
	_, _, refusals["AddMark"] = f.AddMark(t.Context(), f.ann, req(), store.Mark{Chart: c.Name, At: day(1), Text: "x"}, "", "")
	_, _, refusals["VoidMark"] = f.VoidMark(t.Context(), f.ann, req(), c.Name, mark.ID, "", "")
	for method, err := range refusals {
		if refusal := wantReason(t, err, definition.ChartArchived); refusal.Reason == "" {
			t.Errorf("%s was not refused", method)
		}
	}
	for archived, count := range map[bool]int{false: 0, true: 1} {
		list, _, err := f.ListCharts(t.Context(), f.bob, store.Page{}, nil, archived)
		if err != nil {
			t.Fatal(err)
		}
		want(t, "charts listed", len(list), count)
	}
	if _, err := f.GetChart(t.Context(), f.bob, c.Name); err != nil {
		t.Errorf("GetChart: %v", err)
	}
}

func TestLotIsStartedOnce(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	lotted := individuals("nitrate")
	lotted.LotsAreTracks = true
	c, plain := f.mustChart(lotted), f.mustChart(individuals("lead"))
	r := req()
	first, err := f.StartLot(t.Context(), f.ann, r, c.Name, "A1")
	if err != nil {
		t.Fatal(err)
	}
	again, err := f.StartLot(t.Context(), f.ann, r, c.Name, "A1")
	if err != nil {
		t.Fatal(err)
	}
	want(t, "repeat", again, first)
	_, err = f.StartLot(t.Context(), f.ann, req(), c.Name, "A1")
	wantReason(t, err, definition.AlreadyExists)
	_, err = f.StartLot(t.Context(), f.ann, req(), plain.Name, "A1")
	wantReason(t, err, definition.InvalidField)
	_, err = f.StartLot(t.Context(), f.ann, req(), c.Name, "")
	wantReason(t, err, definition.InvalidField)
}

// Whatever names a chart out of the key's labels is answered as if there were none.
func TestChartsOutsideTheKeysLabelsDoNotExist(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	v := f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10", "14")
	signals := f.mustSignals(c)
	if len(signals) != 1 {
		t.Fatalf("got %d signals, want 1", len(signals))
	}
	mark, _, err := f.AddMark(t.Context(), f.ann, req(), store.Mark{Chart: c.Name, At: day(9), Text: "x"}, "", "")
	if err != nil {
		t.Fatal(err)
	}
	track := f.mustTrack(c, "")
	far := f.mustActor("far", map[string]string{"site": "ostley"})
	ctx, name := t.Context(), c.Name
	refusals := map[string]error{}
	_, refusals["GetChart"] = f.GetChart(ctx, far, name)
	_, refusals["UpdateChart"] = f.UpdateChart(ctx, far, req(), name, 1, retitled("x"))
	_, refusals["ArchiveChart"] = f.ArchiveChart(ctx, far, req(), name, 1, "x")
	_, _, refusals["ListTracks"] = f.ListTracks(ctx, far, name, store.Page{})
	_, refusals["StartLot"] = f.StartLot(ctx, far, req(), name, "A1")
	_, _, refusals["AddMark"] = f.AddMark(ctx, far, req(), store.Mark{Chart: name, At: day(1), Text: "x"}, "", "")
	_, _, refusals["ListMarks"] = f.ListMarks(ctx, far, name, store.Page{}, true)
	_, _, refusals["VoidMark"] = f.VoidMark(ctx, far, req(), name, mark.ID, "", "")
	_, refusals["ProposeVersion"] = f.ProposeVersion(ctx, far, req(), name, limits{chart: c, from: day(0)}.content("far"))
	_, _, refusals["ApproveVersion"] = f.ApproveVersion(ctx, far, req(), name, 1, v.Digest, false, "", nil)
	_, refusals["RejectVersion"] = f.RejectVersion(ctx, far, req(), name, 1, "x")
	_, _, _, refusals["WithdrawVersion"] = f.WithdrawVersion(ctx, far, req(), name, 1, false, "x")
	_, _, _, refusals["GetVersion"] = f.GetVersion(ctx, far, name, 1)
	_, _, refusals["ListVersions"] = f.ListVersions(ctx, far, name, store.Page{})
	_, refusals["VersionInForce"] = f.VersionInForce(ctx, far, name, "", time.Time{})
	_, refusals["BasisResults"] = f.BasisResults(ctx, far, name, "", time.Time{}, time.Time{})
	_, _, refusals["QuerySignals"] = f.QuerySignals(ctx, far, store.SignalFilter{Chart: name}, store.Page{})
	_, _, _, refusals["GetSignal"] = f.GetSignal(ctx, far, signals[0].ID)
	_, refusals["NoteSignal"] = f.NoteSignal(ctx, far, req(), signals[0].ID, "x")
	_, _, refusals["CloseOccurrence"] = f.CloseOccurrence(ctx, far, req(), signals[0].Occurrence, "x", "", []int64{signals[0].ID})
	_, refusals["ReleaseTrack"] = f.ReleaseTrack(ctx, far, req(), name, "", "x", track.HoldSince)
	_, _, refusals["ListChanges"] = f.ListChanges(ctx, far, name, "", store.Page{})
	for method, err := range refusals {
		var got *definition.Error
		if !errors.As(err, &got) || got.Reason != definition.NotFound {
			t.Errorf("%s: got %v, want NOT_FOUND", method, err)
		}
	}
	charts, _, err := f.ListCharts(ctx, far, store.Page{}, nil, true)
	if err != nil {
		t.Fatal(err)
	}
	all, _, err := f.QuerySignals(ctx, far, store.SignalFilter{}, store.Page{})
	if err != nil {
		t.Fatal(err)
	}
	want(t, "charts and signals in sight", []int{len(charts), len(all)}, []int{0, 0})
	t.Run("and cannot be made or moved there", func(t *testing.T) {
		_, err := f.CreateChart(ctx, far, req(), individuals("lead"))
		wantReason(t, err, definition.InvalidField)
		near := individuals("lead")
		near.Labels = map[string]string{"site": "ostley"}
		if _, err := f.CreateChart(ctx, far, req(), near); err != nil {
			t.Fatal(err)
		}
		_, err = f.UpdateChart(ctx, far, req(), "lead", 1, func(c *definition.Chart) error { c.Labels = nil; return nil })
		wantReason(t, err, definition.InvalidField)
	})
}

func TestListsComeInPagesThatBelongTogether(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	for i := range 5 {
		c := individuals(fmt.Sprintf("chart-%d", i))
		c.Labels = map[string]string{"site": []string{"harwick", "ostley"}[i%2]}
		f.mustChart(c)
	}
	var names []string
	page := store.Page{Size: 2}
	for {
		list, next, err := f.ListCharts(t.Context(), f.ann, page, nil, false)
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range list {
			names = append(names, c.Name)
		}
		if len(names) == 2 {
			f.mustChart(individuals("chart-1a")) // behind the page given: it must not shift the next one
		}
		if next == "" {
			break
		}
		page.Token = next
	}
	want(t, "names", names, "[chart-0 chart-1 chart-1a chart-2 chart-3 chart-4]")

	_, token, err := f.ListCharts(t.Context(), f.ann, store.Page{Size: 2}, nil, false)
	if err != nil {
		t.Fatal(err)
	}
	for name, list := range map[string]func(store.Page) error{
		"another filter": func(p store.Page) error {
			_, _, err := f.ListCharts(t.Context(), f.ann, p, map[string]string{"site": "ostley"}, false)
			return err
		},
		"another list": func(p store.Page) error {
			_, _, err := f.ListKeys(t.Context(), f.ann, p, false)
			return err
		},
		"another key's sight": func(p store.Page) error {
			_, _, err := f.ListCharts(t.Context(), f.mustActor("dan", map[string]string{"site": "ostley"}), p, nil, false)
			return err
		},
		"a forged token": func(p store.Page) error {
			p.Token = "e30"
			_, _, err := f.ListCharts(t.Context(), f.ann, p, nil, false)
			return err
		},
		"no base64": func(p store.Page) error {
			p.Token = "!"
			_, _, err := f.ListCharts(t.Context(), f.ann, p, nil, false)
			return err
		},
	} {
		if refusal := wantReason(t, list(store.Page{Size: 2, Token: token}), definition.InvalidField); refusal.Field != "page_token" {
			t.Errorf("%s: got field %q, want page_token", name, refusal.Field)
		}
	}
	for size, ok := range map[int]bool{0: true, 1: true, store.PageSizeMax: true, store.PageSizeMax + 1: false, -1: false} {
		_, _, err := f.ListCharts(t.Context(), f.ann, store.Page{Size: size}, nil, false)
		if ok != (err == nil) {
			t.Errorf("size %d: %v", size, err)
		}
	}
}
