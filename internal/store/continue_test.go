package store_test

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/pgtest"
	"limitary/internal/store"
)

// continuedWorlds is how many random histories values are tried on, trials how many moments of each.
const (
	continuedWorlds = 24
	trials          = 8
)

// continued counts what the comparison saw, so that it cannot pass by having compared nothing.
type continued struct{ values, hits, reachBack, unjudged, bounds, noVersion int }

// TestContinueIsWhatPostingFinds tries values on random histories of marks, lots, versions, corrections, late results,
// counts, levels, bounds and CUSUMs with a head start, at any moment of them, and then posts the same values.
func TestContinueIsWhatPostingFinds(t *testing.T) {
	db := pgtest.New(t)
	s := newSite(t, db)
	owner, err := pgx.Connect(t.Context(), db.OwnerURL())
	if err != nil {
		t.Fatal(err)
	}
	defer owner.Close(context.Background())
	var seen continued
	for seed := range uint64(continuedWorlds) {
		w, name := newWorld(seed), fmt.Sprint("continued-", seed)
		if err := s.found(t.Context(), w, name); err != nil {
			t.Fatal(err)
		}
		for _, o := range s.ops(w, name) {
			if err := o.do(t.Context(), s.stores[0]); err != nil {
				t.Fatalf("seed %d: %s: %v", seed, o.name, err)
			}
		}
		r := rand.New(rand.NewPCG(seed, 13))
		for k := range trials {
			if err := s.tryThenPost(t.Context(), owner, w, name, k, r, &seen); err != nil {
				t.Fatalf("seed %d, trial %d: %v", seed, k, err)
			}
		}
	}
	t.Logf("%+v", seen)
	if seen.values < 500 || seen.hits < 400 || seen.reachBack < 150 || seen.unjudged < 20 || seen.bounds < 20 || seen.noVersion < 5 {
		t.Errorf("too little was compared: %+v", seen)
	}
	report, err := s.stores[1].Recheck(t.Context(), nil)
	if err != nil || len(report.Differences) > 0 {
		t.Errorf("recheck: %v, %v", err, report.Differences)
	}
}

// tryThenPost judges up to six values as the next ones at a moment, which changes nothing, and compares with posting them.
func (s *site) tryThenPost(ctx context.Context, owner *pgx.Conn, w *world, name string, k int, r *rand.Rand, seen *continued) error {
	at := epoch.Add(time.Duration(r.IntN(len(w.results)+8)-3)*time.Hour + 30*time.Minute + time.Duration(r.IntN(1000)*trials+k)*time.Millisecond)
	asked := at
	if k == trials-1 {
		at, asked = time.Now().UTC().Truncate(time.Microsecond), time.Time{} // absent: now
	}
	values := w.nextValues(r, name, at, k)
	before, err := dump(ctx, owner, name)
	if err != nil {
		return err
	}
	c, err := s.stores[0].Continue(ctx, s.poster, name, values[0].Lot, asked)
	nothing := isReason(err, definition.NoVersionInForce)
	if err != nil && !nothing {
		return err
	}
	said, err := judgeAll(c, w, values)
	if err != nil {
		return err
	}
	after, err := dump(ctx, owner, name)
	if err != nil || !slices.Equal(before, after) {
		return fmt.Errorf("trying values changed what is stored: %v", err)
	}
	answer, err := s.stores[1].PostResults(ctx, s.poster, values, true, nil)
	if err != nil {
		return err
	}
	for i, row := range answer.Rows {
		if row.Outcome != store.Accepted {
			return fmt.Errorf("value %d: outcome %d, %v", i, row.Outcome, row.Problem)
		}
		posted := row.First
		seen.values++
		if nothing {
			seen.noVersion++
			if posted.Standing != judge.NotJudged || posted.Reason != judge.NoVersion {
				return fmt.Errorf("value %d: no version is in force, and posting gives %s (%s)", i, posted.Standing, posted.Reason)
			}
			continue
		}
		count(seen, posted, name, k)
		if got, want := said[i], described(posted, name, k); got != want {
			return fmt.Errorf("at %s, value %d:\ntried  %s\nposted %s", at, i, got, want)
		}
	}
	return nil
}

func (w *world) nextValues(r *rand.Rand, name string, at time.Time, k int) (values []definition.Result) {
	lot := ""
	for i := range 1 + r.IntN(6) {
		v := w.result(r, i)
		v.Chart, v.Role, v.RepeatOf, v.RunID = name, definition.Routine, "", ""
		v.MeasuredAt = at.Add(time.Duration(i) * time.Microsecond)
		v.MeasuredText = v.MeasuredAt.Format(time.RFC3339Nano)
		if w.kind != chart.P && r.IntN(5) == 0 {
			v.Readings[0] = []string{">13.5", "<6.5"}[r.IntN(2)] // beyond any line, so that the bound proves it
		}
		v.SourceID = fmt.Sprintf("%s%d", tried(name, k), i+1)
		if i == 0 {
			lot = v.Lot
		}
		v.Lot = lot
		values = append(values, v)
	}
	return values
}

func tried(name string, k int) string { return fmt.Sprintf("%s/%d/", name, k) }

// judgeAll describes what a continuation says of values.
func judgeAll(c *store.Continuation, w *world, values []definition.Result) (said []string, err error) {
	for i := range values {
		if c == nil {
			return nil, nil
		}
		pt, err := values[i].Point(definition.Chart{Kind: w.kind, SubgroupSize: 1, Standardised: w.standardised})
		if err != nil {
			return nil, err
		}
		o, err := c.Judge(pt)
		if err != nil {
			return nil, err
		}
		text := fmt.Sprintf("%s %s %v version %d", o.Standing, o.Reason, o.ByBound, o.Version)
		for role, t := range o.Traces {
			if t.Point {
				text += trace(chart.Role(role), t.Statistic, t.Scale, c.By.Lines(chart.Role(role), t.Scale))
			}
		}
		for _, h := range o.Hits {
			text += fmt.Sprintf("; %s %s %s %s from %d counting from %d", h.Role, h.Rule, h.Side, h.Consequence, h.WindowFirst.ID, h.FirstCounting.ID)
		}
		said = append(said, text)
	}
	return said, nil
}

// described puts a posted verdict in the same words.
func described(v store.Verdict, name string, k int) string {
	text := fmt.Sprintf("%s %s %v version %d", v.Standing, v.Reason, v.ByBound, v.Version)
	for role, t := range v.Traces {
		if t.Point {
			text += trace(chart.Role(role), t.Statistic, t.Scale, t.Lines)
		}
	}
	for _, h := range v.Hits {
		text += fmt.Sprintf("; %s %s %s %s from %d counting from %d", h.Role, h.Rule, h.Side, h.Consequence, numbered(h.WindowFirst, name, k), numbered(h.FirstCounting, name, k))
	}
	return text
}

func trace(role chart.Role, statistic float64, scale any, lines judge.Lines) string {
	text := fmt.Sprintf(" %s %v %+v", role, statistic, scale)
	all := reflect.ValueOf(lines)
	for i := range all.NumField() {
		if p := all.Field(i).Interface().(*float64); p != nil {
			text += fmt.Sprintf(" %s %v", all.Type().Field(i).Name, *p)
		}
	}
	return text
}

// numbered gives the number of a value that was tried, 0 for any other result.
func numbered(key store.Key, name string, k int) (n int) {
	_, _ = fmt.Sscanf(key.SourceID, tried(name, k)+"%d", &n)
	return n
}

func count(seen *continued, v store.Verdict, name string, k int) {
	seen.hits += len(v.Hits)
	for _, h := range v.Hits {
		if numbered(h.WindowFirst, name, k) == 0 {
			seen.reachBack++
		}
	}
	if v.Standing == judge.NotJudged {
		seen.unjudged++
	}
	if v.ByBound {
		seen.bounds++
	}
}

// TestContinueNamesWhatIsMissing covers charts, lots and moments that there are not, and what nothing was posted to.
func TestContinueNamesWhatIsMissing(t *testing.T) {
	f := newFixture(t)
	c := individuals("fresh")
	f.mustChart(c)
	_, err := f.Continue(t.Context(), f.cleo, "none", "", time.Time{})
	wantReason(t, err, definition.NotFound)
	_, err = f.Continue(t.Context(), f.cleo, c.Name, "", time.Time{})
	wantReason(t, err, definition.NoVersionInForce)
	f.mustApprove(limits{chart: c, from: day(1)})
	_, err = f.Continue(t.Context(), f.cleo, c.Name, "", day(1).Add(-time.Microsecond))
	wantReason(t, err, definition.NoVersionInForce)
	got, err := f.Continue(t.Context(), f.cleo, c.Name, "any", day(1))
	if err != nil || got.Version != 1 || !got.After.IsZero() || got.Track.State() != store.TrackClear {
		t.Errorf("a track without results: %+v, %v", got, err)
	}
	o, err := got.Judge(judge.Point{Readings: []float64{13.5}})
	if err != nil || o.Standing != judge.StopAt {
		t.Errorf("13.5 is 3.5 sigma from the centre: %+v, %v", o, err)
	}
	f.mustPost(c, "", 2, "10", "20")
	for at, after := range map[time.Time]time.Time{day(2).Add(-time.Microsecond): {}, day(2): day(2), day(3).Add(-time.Microsecond): day(2), day(3): day(3), {}: day(3)} {
		if got, err = f.Continue(t.Context(), f.cleo, c.Name, "", at); err != nil || !got.After.Equal(after) || got.Track.State() != store.TrackHold {
			t.Errorf("at %s: after %s, %v, want %s", at, got.After, err, after)
		}
	}
	far := f.mustActor("far", map[string]string{"site": "elsewhere"})
	_, err = f.Continue(t.Context(), far, c.Name, "", time.Time{})
	wantReason(t, err, definition.NotFound)
	lots := individuals("lots")
	lots.LotsAreTracks = true
	f.mustChart(lots)
	_, err = f.Continue(t.Context(), f.cleo, lots.Name, "", day(1))
	if got := wantReason(t, err, definition.InvalidField); got.Field != "lot" {
		t.Errorf("without a lot: field %s", got.Field)
	}
	_, err = f.Continue(t.Context(), f.cleo, lots.Name, "A", day(1))
	wantReason(t, err, definition.NotFound)
	ended, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err = f.Continue(ended, f.cleo, c.Name, "", day(1)); !errors.Is(err, context.Canceled) {
		t.Errorf("an ended call: %v", err)
	}
}

// TestJudgeInForceIsTheVersionInForce compares the two ways to it at every moment of the random histories' versions.
func TestJudgeInForceIsTheVersionInForce(t *testing.T) {
	s := newSite(t, pgtest.New(t))
	compared := 0
	for seed := range uint64(12) {
		w, name := newWorld(seed), fmt.Sprint("in-force-", seed)
		if err := s.found(t.Context(), w, name); err != nil {
			t.Fatal(err)
		}
		for i := range w.versions {
			if err := s.approve(t.Context(), s.stores[0], w, name, i); err != nil {
				t.Fatal(err)
			}
		}
		for h := -4; h < 70; h += 3 {
			at := epoch.Add(time.Duration(h) * time.Hour)
			v, err1 := s.stores[1].VersionInForce(t.Context(), s.poster, name, "", at)
			n, j, err2 := s.stores[1].JudgeInForce(t.Context(), s.poster, name, "", at)
			if n != v.Number || (j == nil) != (n == 0) || fmt.Sprint(err1) != fmt.Sprint(err2) {
				t.Errorf("%s at %s: version %d, %v; judge of %d, %v", name, at, v.Number, err1, n, err2)
			}
			compared += min(n, 1)
		}
	}
	if compared < 100 {
		t.Errorf("a version was in force at %d moments only", compared)
	}
}

// TestContinueWhileVersionsChange approves versions of other rules one after the other while values are tried through another
// service, whose state is always read together with the version it belongs to.
func TestContinueWhileVersionsChange(t *testing.T) {
	f := newFixture(t)
	other := mustOpen(t, f.db.ServiceURL())
	c := individuals("moving")
	f.mustChart(c)
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 1, "10", "10.5", "11", "10.5")
	for range 2 { // once from the database, once from the cache
		if moved, err := store.PlaceMoves(t.Context(), other, f.cleo, c.Name, day(9), func() {}); moved || err != nil {
			t.Errorf("nothing changed: moved %t, %v", moved, err)
		}
	}
	third := mustOpen(t, f.db.ServiceURL()) // which has nothing in its cache
	moved, err := store.PlaceMoves(t.Context(), third, f.cleo, c.Name, day(9), func() { f.mustApprove(limits{chart: c, from: day(0).Add(time.Second)}) })
	if !moved {
		t.Errorf("a version was approved in between: %v", err)
	}
	const versions = 24
	done := make(chan struct{})
	go func() {
		defer close(done)
		for i := range versions {
			// The number of rules, and with it the size of the state, differs from each version to the next.
			f.mustApprove(limits{chart: c, from: day(0).Add(time.Duration(i+1) * time.Minute), edit: func(v *definition.Content) { v.Location.Rules = v.Location.Rules[:2-i%2] }})
		}
	}()
	tried := 0
	for open := true; open; tried++ {
		select {
		case <-done:
			open = false
		default:
		}
		got, err := other.Continue(t.Context(), f.cleo, c.Name, "", day(9))
		if err != nil {
			t.Fatal(err)
		}
		o, err := got.Judge(judge.Point{Readings: []float64{10.5}})
		if err != nil || (o.Standing == judge.ActOn) != (got.Version == 2 || got.Version%2 == 1) {
			t.Fatalf("version %d, where the odd ones and the second look at four on one side: %+v, %v", got.Version, o, err)
		}
	}
	if got, err := other.Continue(t.Context(), f.cleo, c.Name, "", day(9)); err != nil || got.Version != versions+2 || tried < versions {
		t.Errorf("at last: %+v, %v after %d tries", got, err, tried)
	}
}
