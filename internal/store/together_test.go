package store_test

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/pgtest"
	"limitary/internal/store"
)

// TestPostsMadeTogetherAreAnsweredApart has 32 callers of one key post at once, sound rows, bad rows and the same row
// twice among them. Each gets the answer to its own rows, and is told of the tracks it posted to and no other.
func TestPostsMadeTogetherAreAnsweredApart(t *testing.T) {
	s := newSite(t, pgtest.New(t))
	w := newWorld(3)
	w.lots = false
	for _, name := range []string{"together-0", "together-1"} {
		if err := s.found(t.Context(), w, name); err != nil {
			t.Fatal(err)
		}
	}
	const callers = 32
	answers := make([]store.PostAnswer, callers)
	var wg sync.WaitGroup
	start := make(chan struct{})
	for i := range callers {
		wg.Go(func() {
			<-start
			var err error
			if answers[i], err = s.stores[0].PostResults(t.Context(), s.poster, togetherRows(w, i), false, nil); err != nil {
				t.Error(err)
			}
		})
	}
	close(start)
	wg.Wait()
	shared := map[store.Outcome]int{}
	for i, answer := range answers {
		if len(answer.Rows) != 3 {
			t.Fatalf("caller %d got %d answers, want 3", i, len(answer.Rows))
		}
		if got := answer.Rows[0]; got.Outcome != store.Accepted || got.First.RecordedAt.IsZero() {
			t.Errorf("caller %d: own row has outcome %d, recorded at %v", i, got.Outcome, got.First.RecordedAt)
		}
		if got := answer.Rows[1]; got.Outcome != store.Refused || got.Problem.Reason != definition.WrongUnit {
			t.Errorf("caller %d: bad row has outcome %d: %v", i, got.Outcome, got.Problem)
		}
		shared[answer.Rows[2].Outcome]++
		for _, u := range answer.Tracks {
			if want := fmt.Sprint("together-", i%2); u.Track.Chart != want && answer.Rows[2].Outcome != store.Accepted {
				t.Errorf("caller %d posted to %s and is told of %s", i, want, u.Track.Chart)
			}
		}
	}
	if shared[store.Accepted] != 1 || shared[store.Duplicate] != callers-1 {
		t.Errorf("the row all posted has outcomes %v, want it accepted once and a duplicate else", shared)
	}
	if n := s.count(t, "together-0") + s.count(t, "together-1"); n != callers+1 {
		t.Errorf("%d results are stored, want %d", n, callers+1)
	}
	s.recheck(t)
}

// togetherRows are a caller's own sound row, a row in another unit, and one that all callers post.
func togetherRows(w *world, i int) []definition.Result {
	own := w.results[0]
	own.Chart, own.Lot, own.SourceID = fmt.Sprint("together-", i%2), "", fmt.Sprint("own-", i)
	own.MeasuredAt = epoch.Add(time.Duration(i) * time.Minute)
	bad := own
	bad.SourceID, bad.Unit = fmt.Sprint("bad-", i), "furlong"
	all := own
	all.Chart, all.SourceID, all.MeasuredAt = "together-0", "shared", epoch
	return []definition.Result{own, bad, all}
}

// TestCallerWhoGivesUpIsNotWaitedFor cancels a post; the others go on.
func TestCallerWhoGivesUpIsNotWaitedFor(t *testing.T) {
	s := newSite(t, pgtest.New(t))
	w := newWorld(3)
	w.lots = false
	for _, name := range []string{"together-0", "together-1"} {
		if err := s.found(t.Context(), w, name); err != nil {
			t.Fatal(err)
		}
	}
	gone, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := s.stores[0].PostResults(gone, s.poster, togetherRows(w, 0), false, nil); !errors.Is(err, context.Canceled) {
		t.Errorf("a cancelled post answers %v", err)
	}
	answer, err := s.stores[0].PostResults(t.Context(), s.poster, togetherRows(w, 1), false, nil)
	if err != nil || answer.Rows[0].Outcome != store.Accepted {
		t.Errorf("the next post: %v", err)
	}
	s.recheck(t)
}
