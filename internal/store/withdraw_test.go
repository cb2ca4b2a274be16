package store_test

import (
	"testing"

	"limitary/internal/definition"
	"limitary/internal/store"
)

// mustWithdraw has bob withdraw a version that judged results, and cleo confirm it; it gives the number of verdicts changed.
func (f *fixture) mustWithdraw(c definition.Chart, number int, reason string) (rejudged int) {
	f.tb.Helper()
	_, _, ch, err := f.WithdrawVersion(f.tb.Context(), f.bob, req(), c.Name, number, true, reason)
	if err != nil || ch == nil {
		f.tb.Fatalf("got change %v, %v, want one to confirm", ch, err)
	}
	_, updates, err := f.DecideChange(f.tb.Context(), f.cleo, req(), ch.ID, true, "", ch.SignalsEnded)
	if err != nil {
		f.tb.Fatal(err)
	}
	for _, u := range updates {
		rejudged += u.Rejudged
	}
	return rejudged
}

// Nobody takes a version and all its signals away alone.
func TestWithdrawalOfWhatJudgedIsForAnotherToConfirm(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	ctx := t.Context()
	c := f.mustChart(individuals("nitrate"))
	v := f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10", "14", "10.5")
	signal := f.mustSignals(c, "OPEN")[0].ID
	for _, ask := range []struct {
		rejudge bool
		reason  string
	}{{false, "wrong data"}, {true, ""}} {
		_, _, _, err := f.WithdrawVersion(ctx, f.bob, req(), c.Name, v.Number, ask.rejudge, ask.reason)
		want(t, "results", wantReason(t, err, definition.Retroactive).Meta["results"], "3")
	}
	once := req()
	var ch *store.Change
	for range 2 { // the repeat finds the same
		still, n, asked, err := f.WithdrawVersion(ctx, f.bob, once, c.Name, v.Number, true, "wrong data")
		if err != nil || asked == nil {
			t.Fatalf("got %v, %v, want a change", asked, err)
		}
		want(t, "state and rejudged", []any{still.State, n}, []any{definition.Approved, 0})
		if ch != nil {
			want(t, "change of the repeat", asked.ID, ch.ID)
		}
		ch = asked
	}
	want(t, "change", []any{ch.Kind, ch.Status, ch.Version, ch.Author, ch.VerdictsChanged, ch.SignalsEnded},
		[]any{"WITHDRAW_VERSION", "PENDING", v.Number, "bob", 3, []int64{signal}})
	want(t, "judged while it waits", f.verdicts(c, ""), "CLEAR/1 STOP/1 CLEAR/1")
	want(t, "signals while it waits", len(f.mustSignals(c, "OPEN")), 1)

	_, _, err := f.DecideChange(ctx, f.bob, req(), ch.ID, true, "", nil)
	wantReason(t, err, definition.SamePrincipal)
	_, _, second, err := f.WithdrawVersion(ctx, f.bob, req(), c.Name, v.Number, true, "wrong data, again")
	if err != nil || second == nil {
		t.Fatalf("got %v, %v", second, err)
	}
	decided, updates, err := f.DecideChange(ctx, f.cleo, req(), ch.ID, true, "", nil)
	if err != nil || len(updates) != 1 || updates[0].Rejudged != 3 {
		t.Fatalf("got updates %v, %v, want 3 judged anew", updates, err)
	}
	want(t, "asked and decided by", []string{decided.Author, decided.DecidedBy, decided.Status}, []string{"bob", "cleo", "CONFIRMED"})
	gone, _, _, err := f.GetVersion(ctx, f.ann, c.Name, v.Number)
	if err != nil {
		t.Fatal(err)
	}
	want(t, "version", []any{gone.State, gone.WithdrawnBy, gone.WithdrawnReason}, []any{definition.Withdrawn, "cleo", "wrong data"})
	want(t, "judged", f.verdicts(c, ""), "NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0")
	want(t, "signals retracted", len(f.mustSignals(c, "RETRACTED")), 1)
	_, _, err = f.DecideChange(ctx, f.cleo, req(), second.ID, true, "", nil)
	wantReason(t, err, definition.WrongState) // it is withdrawn already
	f.wantChains()
	f.mustRecheck()
}

func TestWithdrawalThatTouchesNothing(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	ctx := t.Context()
	c := f.mustChart(individuals("nitrate"))
	v := f.mustApprove(limits{chart: c, from: day(0)})
	t.Run("is for another to confirm where the author asks", func(t *testing.T) {
		still, _, ch, err := f.WithdrawVersion(ctx, f.ann, req(), c.Name, v.Number, false, "wrong data")
		if err != nil || ch == nil {
			t.Fatalf("got %v, %v, want a change", ch, err)
		}
		want(t, "state", still.State, definition.Approved)
		want(t, "effect", []any{ch.VerdictsChanged, len(ch.SignalsEnded)}, []any{0, 0})
		_, _, err = f.DecideChange(ctx, f.ann, req(), ch.ID, true, "", nil)
		wantReason(t, err, definition.SamePrincipal)
		rejected, _, err := f.DecideChange(ctx, f.cleo, req(), ch.ID, false, "keep it", nil)
		if err != nil {
			t.Fatal(err)
		}
		want(t, "status", rejected.Status, "REJECTED")
	})
	t.Run("takes effect at once where another does", func(t *testing.T) {
		gone, n, ch, err := f.WithdrawVersion(ctx, f.bob, req(), c.Name, v.Number, false, "wrong data")
		if err != nil || ch != nil || n != 0 {
			t.Fatalf("got change %v, %d rejudged, %v, want none", ch, n, err)
		}
		want(t, "version", []any{gone.State, gone.WithdrawnBy}, []any{definition.Withdrawn, "bob"})
	})
	f.wantChains()
	f.mustRecheck()
}
