package store_test

import (
	"strings"
	"sync"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/store"
)

func TestRepeatedRequestGetsTheFirstAnswerAndDoesNothing(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	first := req()
	c := individuals("nitrate")
	made, err := f.CreateChart(t.Context(), f.ann, first, c)
	if err != nil {
		t.Fatal(err)
	}
	again, err := f.CreateChart(t.Context(), f.ann, first, c)
	if err != nil {
		t.Fatalf("repeat: %v", err)
	}
	want(t, "repeat", again, made)
	r := req()
	if _, err := f.UpdateChart(t.Context(), f.ann, r, c.Name, 1, retitled("new title")); err != nil {
		t.Fatal(err)
	}
	got, err := f.UpdateChart(t.Context(), f.ann, r, c.Name, 1, func(*definition.Chart) error { panic("the change was run again") })
	if err != nil || got.Revision != 2 {
		t.Errorf("repeat of an update: revision %d, %v, want 2", got.Revision, err)
	}
}

func TestRequestIDOfAnotherRequestIsRefused(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := individuals("nitrate")
	if _, err := f.CreateChart(t.Context(), f.ann, reqOf("one", "body"), c); err != nil {
		t.Fatal(err)
	}
	_, err := f.CreateChart(t.Context(), f.ann, reqOf("one", "other body"), individuals("lead"))
	wantReason(t, err, definition.RequestIDReused)
	other := reqOf("one", "body")
	other.Method = "Other"
	_, err = f.CreateChart(t.Context(), f.ann, other, c)
	wantReason(t, err, definition.RequestIDReused)
	if _, err := f.CreateChart(t.Context(), f.bob, reqOf("one", "body"), individuals("lead")); err != nil {
		t.Errorf("the same id of another principal: %v", err)
	}
}

func TestRefusedRequestLeavesItsIDFree(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	r := req()
	_, err := f.UpdateChart(t.Context(), f.ann, r, c.Name, 7, retitled("x"))
	wantReason(t, err, definition.RevisionMismatch)
	if _, err := f.UpdateChart(t.Context(), f.ann, r, c.Name, 1, retitled("x")); err != nil {
		t.Errorf("the same id, put right: %v", err)
	}
}

func TestRequestIDIsCheckedAtItsLimit(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	for id, ok := range map[string]bool{"": false, strings.Repeat("x", 64): true, strings.Repeat("x", 65): false} {
		c := individuals("chart-" + map[bool]string{true: "yes", false: "no"}[ok])
		_, err := f.CreateChart(t.Context(), f.ann, reqOf(id, "body"), c)
		if ok && err != nil {
			t.Errorf("%d bytes: %v", len(id), err)
		}
		if !ok {
			if got := wantReason(t, err, definition.InvalidField); got.Field != "request_id" {
				t.Errorf("%d bytes: got field %q, want request_id", len(id), got.Field)
			}
		}
	}
}

// Two clients, or one that lost patience, send the same request to two replicas at once: one does it, all get its answer.
func TestRepeatsAtOnceDoItOnce(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	second := mustOpen(t, f.db.ServiceURL())
	for round := range 10 {
		c := individuals("chart-" + string(rune('a'+round)))
		r := req()
		made := make([]definition.Chart, 8)
		var all sync.WaitGroup
		for i := range made {
			s := []*store.Store{f.Store, second}[i%2]
			all.Go(func() {
				var err error
				if made[i], err = s.CreateChart(t.Context(), f.ann, r, c); err != nil {
					t.Errorf("round %d, call %d: %v", round, i, err)
				}
			})
		}
		all.Wait()
		for i := range made {
			want(t, "answer", made[i], made[0])
		}
	}
	var revisions int
	if err := f.owner().QueryRow(t.Context(), `SELECT count(*) FROM chart_revisions`).Scan(&revisions); err != nil {
		t.Fatal(err)
	}
	want(t, "charts made", revisions, 10)
}

// Whoever approves twice at once, by mistake and under two request ids, approves once.
func TestDecisionsAtOnceAreTakenOnce(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	v := f.mustPropose(limits{chart: c, from: day(0)})
	errs := make([]error, 6)
	var all sync.WaitGroup
	for i := range errs {
		all.Go(func() {
			if i%2 == 0 {
				_, _, errs[i] = f.ApproveVersion(t.Context(), f.bob, req(), c.Name, v.Number, v.Digest, false, "", nil)
			} else {
				_, errs[i] = f.RejectVersion(t.Context(), f.cleo, req(), c.Name, v.Number, "no")
			}
		})
	}
	all.Wait()
	taken := 0
	for _, err := range errs {
		if err == nil {
			taken++
			continue
		}
		wantReason(t, err, definition.WrongState)
	}
	want(t, "decisions taken", taken, 1)
}

func TestProposalsAtOnceAreNumberedWithoutHoles(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	const proposals = 24
	var all sync.WaitGroup
	for i := range proposals {
		all.Go(func() {
			l := limits{chart: c, from: day(i)}
			if i%3 == 2 {
				// A proposal that fails must not leave a hole.
				l.edit = func(content *definition.Content) { content.Location = nil }
			}
			_, err := f.ProposeVersion(t.Context(), f.ann, req(), c.Name, l.content("ann"))
			if (err != nil) != (i%3 == 2) {
				t.Errorf("proposal %d: %v", i, err)
			}
		})
	}
	all.Wait()
	list, _, err := f.ListVersions(t.Context(), f.bob, c.Name, store.Page{})
	if err != nil {
		t.Fatal(err)
	}
	want(t, "versions", len(list), proposals*2/3)
	var before time.Time
	for i := range list {
		v := list[len(list)-1-i]
		if v.Number != i+1 || !v.ProposedAt.After(before) {
			t.Errorf("got number %d at %v, want %d after %v", v.Number, v.ProposedAt, i+1, before)
		}
		before = v.ProposedAt
	}
}
