package store_test

import (
	"strings"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/store"
)

func breakAt(c definition.Chart, at time.Time) store.Mark {
	return store.Mark{Chart: c.Name, At: at, Text: "column changed", Break: true}
}

func (f *fixture) mustMarks(c definition.Chart, includeVoided bool) []store.Mark {
	f.tb.Helper()
	list, _, err := f.ListMarks(f.tb.Context(), f.cleo, c.Name, store.Page{}, includeVoided)
	if err != nil {
		f.tb.Fatal(err)
	}
	return list
}

func TestMarkThatAltersNothingEarlierTakesEffectAtOnce(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5")
	r := req()
	mark, asked, err := f.AddMark(t.Context(), f.ann, r, breakAt(c, day(3)), "", "")
	if err != nil || asked != nil || mark == nil {
		t.Fatalf("got %+v, %+v, %v, want a mark", mark, asked, err)
	}
	again, _, err := f.AddMark(t.Context(), f.ann, r, breakAt(c, day(3)), "", "")
	if err != nil {
		t.Fatal(err)
	}
	want(t, "repeat", *again, *mark)
	want(t, "marks", len(f.mustMarks(c, true)), 1)
	f.mustPost(c, "", 3, "10.5", "10.5")
	want(t, "a run does not reach across", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 CLEAR/1 CLEAR/1")

	t.Run("its void would let the run complete, so it is asked for", func(t *testing.T) {
		_, _, err := f.VoidMark(t.Context(), f.ann, req(), c.Name, mark.ID, "", "")
		wantReason(t, err, definition.InvalidField)
		void, asked, err := f.VoidMark(t.Context(), f.ann, req(), c.Name, mark.ID, "MISTAKE", "no column was changed")
		if err != nil || void != nil || asked == nil {
			t.Fatalf("got %+v, %+v, %v, want a change", void, asked, err)
		}
		want(t, "change", []any{asked.Kind, asked.Status, asked.MarkID, asked.VerdictsChanged}, []any{"VOID_MARK", "PENDING", mark.ID, 2})
		want(t, "meanwhile", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 CLEAR/1 CLEAR/1")
		_, _, err = f.DecideChange(t.Context(), f.ann, req(), asked.ID, true, "", nil)
		wantReason(t, err, definition.SamePrincipal)
		if _, _, err := f.DecideChange(t.Context(), f.bob, req(), asked.ID, true, "", nil); err != nil {
			t.Fatal(err)
		}
		want(t, "confirmed", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 ACT/1 ACT/1")
		want(t, "marks not void", len(f.mustMarks(c, false)), 0)
		want(t, "marks", len(f.mustMarks(c, true)), 1)
		_, _, err = f.VoidMark(t.Context(), f.ann, req(), c.Name, mark.ID, "MISTAKE", "again")
		wantReason(t, err, definition.WrongState)
	})
	f.mustRecheck()
}

// A break laid under a signal by the person it troubles is the oldest trick; it changes nothing until another confirms.
func TestBreakThatWouldEndASignalIsAskedFor(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "10.5")
	signal := f.mustSignals(c, "OPEN")[0]
	_, _, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(2)), "SERVICE", "")
	if refusal := wantReason(t, err, definition.InvalidField); refusal.Field != "reason" || !strings.Contains(refusal.Text, "another principal") {
		t.Errorf("got %v, want the reason asked for and why", refusal)
	}
	r := req()
	mark, asked, err := f.AddMark(t.Context(), f.ann, r, breakAt(c, day(2)), "SERVICE", "lamp exchanged at noon")
	if err != nil || mark != nil || asked == nil {
		t.Fatalf("got %+v, %+v, %v, want a change", mark, asked, err)
	}
	want(t, "change", []any{asked.Kind, asked.Status, asked.Author, asked.VerdictsChanged, asked.SignalsEnded},
		[]any{"ADD_MARK", "PENDING", "ann", 1, []int64{signal.ID}})
	_, again, err := f.AddMark(t.Context(), f.ann, r, breakAt(c, day(2)), "SERVICE", "lamp exchanged at noon")
	if err != nil {
		t.Fatal(err)
	}
	want(t, "repeat", again, asked)
	unchanged := func() {
		t.Helper()
		want(t, "verdicts", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 ACT/1")
		want(t, "open signals", f.mustTrack(c, "").OpenSignals, 1)
		want(t, "marks", len(f.mustMarks(c, true)), 0)
		f.mustRecheck()
	}
	unchanged()

	t.Run("and nothing comes of it when rejected", func(t *testing.T) {
		decided, _, err := f.DecideChange(t.Context(), f.bob, req(), asked.ID, false, "no service is on record", nil)
		if err != nil {
			t.Fatal(err)
		}
		want(t, "status", []string{decided.Status, decided.DecidedBy, decided.DecisionReason}, "[REJECTED bob no service is on record]")
		_, _, err = f.DecideChange(t.Context(), f.cleo, req(), asked.ID, true, "", nil)
		wantReason(t, err, definition.WrongState)
		unchanged()
	})
	t.Run("and it is carried out when confirmed", func(t *testing.T) {
		_, asked, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(2)), "SERVICE", "lamp exchanged at noon")
		if err != nil {
			t.Fatal(err)
		}
		_, updates, err := f.DecideChange(t.Context(), f.bob, req(), asked.ID, true, "seen in the log book", nil)
		if err != nil || len(updates) != 1 || updates[0].Rejudged != 1 {
			t.Fatalf("got %+v, %v, want one result rejudged", updates, err)
		}
		want(t, "verdicts", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 CLEAR/1")
		want(t, "author of the mark", f.mustMarks(c, false)[0].Author, "ann")
		retracted := f.mustSignals(c, "RETRACTED")
		want(t, "retracted and still listed", []any{len(retracted), retracted[0].ID}, []any{1, signal.ID})
	})
	t.Run("and all of it is listed", func(t *testing.T) {
		for status, count := range map[string]int{"": 2, "CONFIRMED": 1, "REJECTED": 1, "PENDING": 0} {
			list, _, err := f.ListChanges(t.Context(), f.cleo, c.Name, status, store.Page{})
			if err != nil {
				t.Fatal(err)
			}
			want(t, "changes "+status, len(list), count)
		}
		_, _, err := f.ListChanges(t.Context(), f.cleo, "", "DONE", store.Page{})
		wantReason(t, err, definition.InvalidField)
	})
	f.mustRecheck()
}

// A break inside a signal whose every hit stands by itself changes no verdict, but it would part the signal in two.
func TestBreakThatWouldPartASignalIsAskedFor(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "14", "14", "14")
	_, asked, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(1)), "SERVICE", "lamp")
	if err != nil || asked == nil {
		t.Fatalf("got %+v, %v, want a change", asked, err)
	}
	want(t, "verdicts changed", asked.VerdictsChanged, 0)
	if _, _, err := f.DecideChange(t.Context(), f.bob, req(), asked.ID, true, "", nil); err != nil {
		t.Fatal(err)
	}
	want(t, "signals", len(f.mustSignals(c, "OPEN")), 2)
	f.mustRecheck()
}

// What was tried and rolled back must not be remembered: not even by the number it had.
func TestBreakThatWasOnlyAskedForLeavesNothingBehind(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "10.5")
	if _, asked, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(2)), "SERVICE", "lamp"); err != nil || asked == nil {
		t.Fatalf("got %+v, %v, want a change", asked, err)
	}
	if mark, _, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(4)), "", ""); err != nil || mark == nil {
		t.Fatalf("got %+v, %v, want a mark", mark, err)
	}
	f.mustPost(c, "", 4, "10.5", "10.5", "10.5", "10.5")
	want(t, "verdicts", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 ACT/1 CLEAR/1 CLEAR/1 CLEAR/1 ACT/1")
	f.mustRecheck()
}

func TestMarkWithoutBreakIsOnlyANote(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "10.5")
	note := breakAt(c, day(2))
	note.Break = false
	mark, _, err := f.AddMark(t.Context(), f.ann, req(), note, "", "")
	if err != nil || mark == nil {
		t.Fatal(mark, err)
	}
	if void, _, err := f.VoidMark(t.Context(), f.bob, req(), c.Name, mark.ID, "", ""); err != nil || void == nil || !void.Voided {
		t.Errorf("void: %+v, %v", void, err)
	}
	want(t, "verdicts", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/1 ACT/1")
	f.mustRecheck()
}

func TestMarkOfOneLotLeavesTheOthers(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	lotted := individuals("nitrate")
	lotted.LotsAreTracks = true
	c := f.mustChart(lotted)
	f.mustApprove(limits{chart: c, from: day(0)})
	for _, lot := range []string{"A1", "B2"} {
		f.mustPost(c, lot, 0, "10.5", "10.5", "10.5", "10.5")
	}
	m := breakAt(c, day(2))
	m.Lot = "B2"
	_, asked, err := f.AddMark(t.Context(), f.ann, req(), m, "SERVICE", "lamp")
	if err != nil || asked == nil {
		t.Fatalf("got %+v, %v, want a change", asked, err)
	}
	if _, _, err := f.DecideChange(t.Context(), f.bob, req(), asked.ID, true, "", nil); err != nil {
		t.Fatal(err)
	}
	want(t, "A1", f.verdicts(c, "A1"), "CLEAR/1 CLEAR/1 CLEAR/1 ACT/1")
	want(t, "B2", f.verdicts(c, "B2"), "CLEAR/1 CLEAR/1 CLEAR/1 CLEAR/1")
	m.Lot = "C3"
	_, _, err = f.AddMark(t.Context(), f.ann, req(), m, "", "")
	wantReason(t, err, definition.NotFound)
	f.mustRecheck()
}

func TestUnsoundMarksAreRefused(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	for field, m := range map[string]store.Mark{
		"mark.at":   {Chart: c.Name, Text: "x"},
		"mark.text": {Chart: c.Name, At: day(0)},
		"mark.lot":  {Chart: c.Name, At: day(0), Text: "x", Lot: "A1"},
	} {
		_, _, err := f.AddMark(t.Context(), f.ann, req(), m, "", "")
		if refusal := wantReason(t, err, definition.InvalidField); refusal.Field != field {
			t.Errorf("got field %q, want %q", refusal.Field, field)
		}
	}
	_, _, err := f.VoidMark(t.Context(), f.ann, req(), c.Name, 99, "", "")
	wantReason(t, err, definition.NotFound)
}

func TestMarksComeInTheOrderOfTheirMoments(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	for _, n := range []int{3, 1, 2, 1} {
		if _, _, err := f.AddMark(t.Context(), f.ann, req(), breakAt(c, day(n)), "", ""); err != nil {
			t.Fatal(err)
		}
	}
	var got []string
	page := store.Page{Size: 1}
	for {
		list, next, err := f.ListMarks(t.Context(), f.cleo, c.Name, page, true)
		if err != nil {
			t.Fatal(err)
		}
		got = append(got, list[0].At.Format("02"))
		if page.Token = next; next == "" {
			break
		}
	}
	want(t, "days", got, "[04 04 05 06]")
}
