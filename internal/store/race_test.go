package store_test

import (
	"fmt"
	"sync"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/store"
)

// Posts over all tracks in every order, approvals, marks, lots and closings at once, on two services: the locks are taken
// in one order, so PostgreSQL finds no deadlock, and whatever came first, every result ends up judged by its version.
func TestWritersOfAllKindsAtOnceNeitherDeadlockNorMisjudge(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	services := []*store.Store{f.Store, mustOpen(t, f.db.ServiceURL())}
	lots := []string{"A1", "B2", "C3"}
	charts := make([]definition.Chart, 3)
	for i := range charts {
		lotted := individuals(fmt.Sprintf("chart-%d", i))
		lotted.LotsAreTracks = true
		charts[i] = f.mustChart(lotted)
		f.mustApprove(limits{chart: charts[i], from: day(0)})
	}
	const rounds = 12
	var all sync.WaitGroup
	for writer := range 4 {
		all.Go(func() {
			for round := range rounds {
				var batch []definition.Result
				for i := range 3 * len(lots) {
					at := (i*(1+writer%2) + writer) % (3 * len(lots)) // another order for each
					r := result(charts[at/3], 100*writer+round, []string{"10", "10.5", "14", "9.5"}[(i+round)%4])
					r.Lot, r.MeasuredAt = lots[at%3], day(round).Add(time.Duration(writer)*time.Hour)
					r.SourceID += r.Lot
					batch = append(batch, r)
				}
				answer, err := services[writer%2].PostResults(t.Context(), f.ann, batch, false, nil)
				if err != nil {
					t.Errorf("writer %d: %v", writer, err)
					return
				}
				for _, row := range answer.Rows {
					if row.Outcome != store.Accepted {
						t.Errorf("writer %d: outcome %d, %v", writer, row.Outcome, row.Problem)
					}
				}
			}
		})
	}
	for i, c := range charts {
		all.Go(func() {
			s := services[i%2]
			for round := range rounds {
				l := limits{chart: c, from: day(rounds - round), centre: 10 + float64(round%3)/2}
				v, err := s.ProposeVersion(t.Context(), f.ann, req(), c.Name, l.content("ann"))
				if err != nil {
					t.Error(err)
					return
				}
				f.approveWhatIsListed(s, c, v)
				if _, _, err := s.AddMark(t.Context(), f.ann, req(), breakAt(c, day(round).Add(time.Hour)), "SERVICE", "lamp"); err != nil {
					t.Error(err)
				}
				f.closeOne(s, c)
			}
		})
	}
	all.Wait()
	for _, s := range services {
		s.Close() // a connection that ends hands in its statistics
	}
	var deadlocks int
	if err := f.owner().QueryRow(t.Context(), `SELECT deadlocks FROM pg_stat_database WHERE datname = current_database()`).Scan(&deadlocks); err != nil {
		t.Fatal(err)
	}
	want(t, "deadlocks", deadlocks, 0)
	f.Store = mustOpen(t, f.db.ServiceURL())
	f.mustRecheck()
	f.wantChains()
}

// approveWhatIsListed approves, reading the patterns again where posts have changed them.
func (f *fixture) approveWhatIsListed(s *store.Store, c definition.Chart, v definition.Version) {
	for {
		_, patterns, _, err := s.GetVersion(f.tb.Context(), f.bob, c.Name, v.Number)
		if err != nil {
			f.tb.Error(err)
			return
		}
		var texts []string
		for _, p := range patterns {
			texts = append(texts, p.Text())
		}
		_, _, err = s.ApproveVersion(f.tb.Context(), f.bob, req(), c.Name, v.Number, v.Digest, true, "race", texts)
		if err == nil {
			return
		}
		if wantReason(f.tb, err, definition.PatternsNotAccepted).Reason == "" {
			return
		}
	}
}

// closeOne closes the occurrence of the newest open signal, if the signals are still as they were read.
func (f *fixture) closeOne(s *store.Store, c definition.Chart) {
	open, _, err := s.QuerySignals(f.tb.Context(), f.cleo, store.SignalFilter{Chart: c.Name, Statuses: []string{"OPEN"}}, store.Page{Size: store.PageSizeMax})
	if err != nil {
		f.tb.Error(err)
		return
	}
	if len(open) == 0 {
		return
	}
	var seen []int64
	for _, sig := range open {
		if sig.Occurrence == open[0].Occurrence {
			seen = append(seen, sig.ID)
		}
	}
	_, _, err = s.CloseOccurrence(f.tb.Context(), f.cleo, req(), open[0].Occurrence, "NOT_FOUND", "", seen)
	if err != nil && !isReason(err, definition.WrongState) && !isReason(err, definition.NothingToDo) {
		f.tb.Error(err)
	}
}
