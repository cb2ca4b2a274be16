package store_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/store"
)

// wantChains recomputes every audit chain from its payloads, with nothing of the store's own code, and compares heads,
// hashes, numbers and what the payloads say of themselves.
func (f *fixture) wantChains() map[int64][]string {
	f.tb.Helper()
	conn := f.owner()
	rows, err := conn.Query(f.tb.Context(), `SELECT chain_id, entry, kind, principal, payload, previous, hash, recorded_at FROM audit ORDER BY chain_id, entry`)
	if err != nil {
		f.tb.Fatal(err)
	}
	kinds := map[int64][]string{}
	hashes := map[int64][]byte{}
	var chain, entry int64
	var kind, principal string
	var payload, previous, hash []byte
	var at time.Time
	_, err = pgx.ForEachRow(rows, []any{&chain, &entry, &kind, &principal, &payload, &previous, &hash, &at}, func() error {
		kinds[chain] = append(kinds[chain], kind)
		if entry != int64(len(kinds[chain])) {
			f.tb.Errorf("chain %d: entry %d comes after %d", chain, entry, len(kinds[chain])-1)
		}
		if !bytes.Equal(previous, hashes[chain]) {
			f.tb.Errorf("chain %d, entry %d does not follow the one before it", chain, entry)
		}
		sum := sha256.Sum256(append(bytes.Clone(previous), payload...))
		if !bytes.Equal(hash, sum[:]) {
			f.tb.Errorf("chain %d, entry %d does not have its hash", chain, entry)
		}
		hashes[chain] = bytes.Clone(hash)
		var said struct {
			Chain, Entry    int64
			Kind, Principal string
			At              time.Time
		}
		if err := json.Unmarshal(payload, &said); err != nil {
			return err
		}
		if said.Chain != chain || said.Entry != entry || said.Kind != kind || said.Principal != principal || !said.At.Equal(at) {
			f.tb.Errorf("chain %d, entry %d says %+v of itself", chain, entry, said)
		}
		return nil
	})
	if err != nil {
		f.tb.Fatal(err)
	}
	rows, err = conn.Query(f.tb.Context(), `SELECT chain_id, entry, hash FROM chain_heads`)
	if err != nil {
		f.tb.Fatal(err)
	}
	_, err = pgx.ForEachRow(rows, []any{&chain, &entry, &hash}, func() error {
		if entry != int64(len(kinds[chain])) || !bytes.Equal(hash, hashes[chain]) {
			f.tb.Errorf("chain %d has its head at entry %d, and its last entry is %d", chain, entry, len(kinds[chain]))
		}
		return nil
	})
	if err != nil {
		f.tb.Fatal(err)
	}
	return kinds
}

func TestEveryWriteIsLaidInItsChain(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	ctx := t.Context()
	lotted := individuals("nitrate")
	lotted.LotsAreTracks = true
	c := f.mustChart(lotted)
	must := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	_, err := f.StartLot(ctx, f.ann, req(), c.Name, "A1")
	must(err)
	v := f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "A1", 0, "10.5", "10.5", "10.5", "14")
	_, _, err = f.AddMark(ctx, f.ann, req(), breakAt(c, day(9)), "", "")
	must(err)
	_, asked, err := f.AddMark(ctx, f.ann, req(), breakAt(c, day(2)), "SERVICE", "lamp")
	must(err)
	_, _, err = f.DecideChange(ctx, f.bob, req(), asked.ID, true, "", nil)
	must(err)
	s := f.mustSignals(c, "OPEN")[0]
	_, err = f.NoteSignal(ctx, f.cleo, req(), s.ID, "x")
	must(err)
	_, track, err := f.CloseOccurrence(ctx, f.cleo, req(), s.Occurrence, "NOT_FOUND", "", []int64{s.ID})
	must(err)
	_, err = f.ReleaseTrack(ctx, f.cleo, req(), c.Name, "A1", "x", track.HoldSince)
	must(err)
	f.mustWithdraw(c, v.Number, "x")
	_, err = f.RejectVersion(ctx, f.bob, req(), c.Name, f.mustPropose(limits{chart: c, from: day(0)}).Number, "x")
	must(err)
	_, err = f.UpdateChart(ctx, f.ann, req(), c.Name, 1, retitled("x"))
	must(err)
	_, err = f.ArchiveChart(ctx, f.ann, req(), c.Name, 2, "x")
	must(err)
	_, err = f.RevokeKey(ctx, f.admin, req(), f.ann.Key.ID)
	must(err)

	// What is refused leaves no trace.
	_, err = f.UpdateChart(ctx, f.ann, req(), c.Name, 1, retitled("y"))
	wantReason(t, err, "CHART_ARCHIVED")

	kinds := f.wantChains()
	want(t, "keys", kinds[0], "[CREATE_KEY CREATE_KEY CREATE_KEY REVOKE_KEY]")
	delete(kinds, 0)
	for _, got := range kinds {
		want(t, "chart", got, "[CREATE_CHART START_LOT PROPOSE_VERSION APPROVE_VERSION POST_RESULTS ADD_MARK ASK_CHANGE DECIDE_CHANGE NOTE_SIGNAL "+
			"CLOSE_OCCURRENCE RELEASE_TRACK ASK_CHANGE DECIDE_CHANGE PROPOSE_VERSION REJECT_VERSION UPDATE_CHART ARCHIVE_CHART]")
	}
	want(t, "charts", len(kinds), 1)
	f.mustRecheck()
}

// Every history row of a chart carries the number of an entry that there is.
func TestHistoryRowsBelongToEntries(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "10.5", "10.5", "10.5", "14")
	f.mustApprove(limits{chart: c, from: day(1), centre: 11})
	_, _, err := f.QuerySignals(t.Context(), f.ann, store.SignalFilter{}, store.Page{})
	if err != nil {
		t.Fatal(err)
	}
	conn := f.owner()
	for _, table := range []string{"chart_revisions", "versions", "version_decisions", "marks", "mark_voids", "results", "result_revisions", "verdicts",
		"signal_events", "signal_notes", "track_releases", "changes"} {
		var orphans int
		err := conn.QueryRow(t.Context(), fmt.Sprintf(`SELECT count(*) FROM %s h WHERE NOT EXISTS (SELECT FROM audit a
			WHERE a.chain_id = h.chart_id AND a.entry = h.entry AND a.recorded_at = h.recorded_at)`, table)).Scan(&orphans)
		if err != nil {
			t.Fatal(err)
		}
		if orphans != 0 {
			t.Errorf("%s: %d rows carry no entry of their chart and moment", table, orphans)
		}
	}
}
