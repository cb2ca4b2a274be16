package demo_test

import (
	"context"
	"errors"
	"slices"
	"testing"
	"time"

	"google.golang.org/grpc"

	pb "limitary/api/limitary/v1"
	"limitary/internal/demo"
)

// wanted is what the demo comes to. The counts of charts, results, versions and requests follow from the stories; those
// of signals were computed by the service when the demo was made, and recheck agrees with them.
func wanted(already bool) demo.Summary {
	return demo.Summary{
		Already: already, Base: base,
		Charts: 17, Archived: 1, Tracks: 18, Results: 3197, VersionsApproved: 18, VersionsProposed: 1, VersionsRejected: 1,
		SignalsOpen: 13, SignalsClosed: 36, TracksHeld: 1, RequestsPending: 1, RequestsConfirmed: 1, Marked: 1,
	}
}

func (s *served) load(t *testing.T, now time.Time) demo.Summary {
	t.Helper()
	sum, err := demo.Load(t.Context(), s.conn, s.tokens, now, nil)
	if err != nil {
		t.Fatal(err)
	}
	return sum
}

// recheck recomputes the whole database and compares.
func (s *served) recheck(t *testing.T) {
	t.Helper()
	report, err := s.store.Recheck(t.Context(), nil)
	if err != nil {
		t.Fatal(err)
	}
	if len(report.Differences) != 0 || report.Results == 0 {
		t.Errorf("recheck of %d results: got differences %q, want none", report.Results, report.Differences)
	}
}

func TestLoadOnceAndAgain(t *testing.T) {
	s := serve(t)
	var steps []int
	sum, err := demo.Load(t.Context(), s.conn, s.tokens, base, func(done, total int) {
		if total != 3196 || done > total {
			t.Errorf("progress: got %d of %d, want up to 3196 of 3196", done, total)
		}
		steps = append(steps, done)
	})
	if err != nil {
		t.Fatal(err)
	}
	if want := wanted(false); sum != want {
		t.Errorf("got %+v\nwant %+v", sum, want)
	}
	if !slices.IsSorted(steps) || steps[len(steps)-1] != 3196 {
		t.Errorf("progress: got %v, want it to rise to 3196", steps)
	}
	s.recheck(t)
	t.Run("a second load days later changes nothing", func(t *testing.T) {
		if got, want := s.load(t, base.Add(80*time.Hour)), wanted(true); got != want {
			t.Errorf("got %+v\nwant %+v", got, want)
		}
	})
	t.Run("a third load finds the user's own work left alone", func(t *testing.T) {
		_, err := pb.NewSignalServiceClient(s.conn).ReleaseTrack(as(t, s.tokens.Reviewer), &pb.ReleaseTrackRequest{
			Chart: "lead-icpms-low", RequestId: "user", Reason: "Looked into.", HoldSince: s.track(t, "lead-icpms-low", "").HoldSince,
		})
		if err != nil {
			t.Fatal(err)
		}
		want := wanted(true)
		want.TracksHeld = 0
		if got := s.load(t, base.Add(100*time.Hour)); got != want {
			t.Errorf("got %+v\nwant %+v", got, want)
		}
	})
}

var errCut = errors.New("the connection was cut")

// cutConn is a connection that is cut at its n-th call, before the service hears of it or after it has answered.
type cutConn struct {
	grpc.ClientConnInterface
	left  int
	after bool
}

func (c *cutConn) Invoke(ctx context.Context, method string, args, reply any, opts ...grpc.CallOption) error {
	c.left--
	if c.left > 0 {
		return c.ClientConnInterface.Invoke(ctx, method, args, reply, opts...)
	}
	if c.after {
		if err := c.ClientConnInterface.Invoke(ctx, method, args, reply, opts...); err != nil {
			return err
		}
	}
	return errCut
}

// A load that is cut off again and again, each time a little later and with another clock, ends as one that was not.
func TestLoadGoesOnWhereItWasCut(t *testing.T) {
	s := serve(t)
	const each = 3 // calls more in each attempt, so that cuts fall on steps of every kind
	cuts := 0
	for n := each; ; n += each {
		conn := &cutConn{ClientConnInterface: s.conn, left: n, after: cuts%2 == 1}
		sum, err := demo.Load(t.Context(), conn, s.tokens, base.Add(time.Duration(cuts)*time.Hour), nil)
		if err == nil {
			sum.Already = false // the last cut may have fallen after the last post
			if want := wanted(false); sum != want {
				t.Errorf("after %d cuts: got %+v\nwant %+v", cuts, sum, want)
			}
			break
		}
		if !errors.Is(err, errCut) {
			t.Fatalf("attempt of %d calls: %v", n, err)
		}
		cuts++
	}
	if cuts < 20 {
		t.Errorf("got %d cuts, want more: the load takes far more calls", cuts)
	}
	s.recheck(t)
}

func TestLoadRefusedSaysWhichChart(t *testing.T) {
	s := serve(t)
	s.tokens.Approver = s.tokens.Author
	_, err := demo.Load(t.Context(), s.conn, s.tokens, base, nil)
	if err == nil || !containsAll(err.Error(), "nitrate-ic2-mid", "approver") {
		t.Errorf("got %v, want an error that names the chart and the missing role", err)
	}
}
