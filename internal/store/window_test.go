package store_test

import (
	"fmt"
	"testing"

	"limitary/internal/definition"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// window gives the source ids of what lies before a result, the result itself last.
func (f *fixture) window(c definition.Chart, sourceID string, points int) (ids []string) {
	f.tb.Helper()
	found, before, err := f.Window(f.tb.Context(), f.cleo, c.Name, "lims", sourceID, points)
	if err != nil {
		f.tb.Fatal(err)
	}
	for _, r := range append(before, found) {
		ids = append(ids, r.Result.SourceID)
	}
	return ids
}

func TestAWindowEndsWhereTheSegmentBegins(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	ids := func(from, to int) (ids []string) {
		for n := from; n <= to; n++ {
			ids = append(ids, fmt.Sprintf("r%03d", n))
		}
		return ids
	}
	t.Run("at a break", func(t *testing.T) {
		c := f.mustChart(individuals("broken"))
		f.mustApprove(limits{chart: c, from: day(0)})
		f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "10.5", "10.5", "10.5", "10.5", "10.5") // eight above the centre
		if mark, _, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(8)), "", ""); err != nil || mark == nil {
			t.Fatal(mark, err)
		}
		f.mustPost(c, "", 8, "10.5", "10.5")
		want(t, "the last before the break", f.window(c, "r007", 64), ids(0, 7))
		want(t, "the first after it", f.window(c, "r008", 64), ids(8, 8))
		want(t, "the second after it", f.window(c, "r009", 64), ids(8, 9))
		want(t, "of a limited length", f.window(c, "r007", 2), ids(5, 7))
	})
	t.Run("at a version of other numbers, not at one of the same", func(t *testing.T) {
		c := f.mustChart(individuals("versions"))
		f.mustApprove(limits{chart: c, from: day(0)})
		f.mustApprove(limits{chart: c, from: day(3)})
		f.mustApprove(limits{chart: c, from: day(6), centre: 11})
		f.mustPost(c, "", 0, "10", "10.1", "9.9", "10", "10.1", "9.9", "11", "11.1")
		want(t, "by the second version", f.window(c, "r005", 64), ids(0, 5))
		want(t, "by the third", f.window(c, "r007", 64), ids(6, 7))
	})
	t.Run("at a break of its own lot only", func(t *testing.T) {
		lotted := individuals("lotted")
		lotted.LotsAreTracks = true
		c := f.mustChart(lotted)
		for _, lot := range []string{"A1", "B2"} {
			if _, err := f.StartLot(t.Context(), f.ann, req(), c.Name, lot); err != nil {
				t.Fatal(err)
			}
		}
		f.mustApprove(limits{chart: c, from: day(0)})
		mark := breakAt(c, day(1))
		mark.Lot = "A1"
		if placed, _, err := f.AddMark(t.Context(), f.ann, req(), mark, "", ""); err != nil || placed == nil {
			t.Fatal(placed, err)
		}
		f.mustPost(c, "A1", 0, "10", "10.1")
		f.mustPost(c, "B2", 0, "10", "10.1")
		want(t, "lot A1", f.window(c, "r001-A1", 64), []string{"r001-A1"})
		want(t, "lot B2", f.window(c, "r001-B2", 64), []string{"r000-B2", "r001-B2"})
	})
}

// TestAnOccurrenceOfManySignalsIsFoundByItsID also looks for one that is not there.
func TestAnOccurrenceOfManySignalsIsFoundByItsID(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0), edit: func(v *definition.Content) {
		v.Location.Rules = []rules.Spec{{ID: "lab/1", Kind: rules.Beyond, Consequence: rules.Act, K: 1, M: 1, Z: 3}}
	}})
	f.mustPost(c, "", 0, "14", "10", "14", "10", "14")
	first := f.mustTrack(c, "").Occurrence
	found := func(occurrence int64) (ids []int64) {
		list, _, err := f.QuerySignals(t.Context(), f.cleo, store.SignalFilter{Occurrence: occurrence}, store.Page{})
		if err != nil {
			t.Fatal(err)
		}
		for _, s := range list {
			ids = append(ids, s.ID)
		}
		return ids
	}
	seen := found(first)
	want(t, "signals of the first occurrence", len(seen), 3)
	if _, track, err := f.CloseOccurrence(t.Context(), f.cleo, req(), first, "FALSE_ALARM", "", seen); err != nil || track.Occurrence != 0 {
		t.Fatal(track, err)
	}
	f.mustPost(c, "", 5, "10", "14")
	second := f.mustTrack(c, "").Occurrence
	if second == first || second == 0 {
		t.Fatalf("got occurrence %d after %d was closed, want another", second, first)
	}
	want(t, "signals of the second", len(found(second)), 1)
	want(t, "signals of one that is not there", len(found(second+1)), 0)
}

func TestPrincipalsThatDifferByCaseAreOne(t *testing.T) {
	t.Parallel()
	f := newFixture(t) // it has ann
	_, _, err := f.CreateKey(t.Context(), f.admin, req(), key("Ann", nil), keyHash("x"))
	if e := wantReason(t, err, definition.AlreadyExists); e.Field != "principal" {
		t.Errorf("got field %q, want principal", e.Field)
	}
	if _, fresh, err := f.CreateKey(t.Context(), f.admin, req(), key("ann", nil), keyHash("y")); err != nil || !fresh {
		t.Errorf("a second key of ann: fresh %t, %v", fresh, err)
	}
	if _, err := f.owner().Exec(t.Context(), `INSERT INTO principals (name) VALUES ('ANN')`); err == nil {
		t.Error("the schema takes ANN beside ann")
	} else {
		wantCode(t, err, "23505")
	}
}
