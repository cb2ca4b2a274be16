package demo_test

import (
	"strings"
	"testing"

	pb "limitary/api/limitary/v1"
)

// testRevisions looks at proposals for charts that have limits: what the change test says, and what became of it.
func testRevisions(t *testing.T, s *served) {
	t.Run("a review that found no difference was rejected", func(t *testing.T) {
		v := s.version(t, "turbidity-1", 2)
		if v.State != pb.VersionState_VERSION_STATE_REJECTED || v.DecidedBy == v.Author || !containsAll(v.DecisionReason, "KEEP", "0.75", "1.5") {
			t.Errorf("got %s by %q with %q, want it rejected by another than %q", v.State, v.DecidedBy, v.DecisionReason, v.Author)
		}
		c := v.ChangeTest
		if c.GetDecision() != pb.ChangeDecision_CHANGE_DECISION_KEEP || c.Against != 1 || c.Results != 120 || c.InOldBasis != 0 {
			t.Fatalf("got change test %v, want KEEP from 120 results", c)
		}
		wantWithin(t, "centre", c.Centre, -0.75, 0.75)
		wantWithin(t, "spread", c.Spread, 1/1.5, 1.5)
		wantWithin(t, "means", c.Means, 1/1.5, 1.5)
		if tr := s.track(t, "turbidity-1", ""); tr.Version != 1 {
			t.Errorf("got %v, want version 1 in force still", tr)
		}
	})
	t.Run("the new column asks for a change", func(t *testing.T) {
		v := s.version(t, "nitrate-ic2-mid", 2)
		c := v.ChangeTest
		if c.GetDecision() != pb.ChangeDecision_CHANGE_DECISION_CHANGE || c.Centre.GetLower() <= 0.5 || c.Centre.PValid || !strings.Contains(v.Reason, "CHANGE") {
			t.Errorf("got change test %v for %q, want CHANGE of the centre by more than half a sigma, without a valid p", c, v.Reason)
		}
	})
}

func wantWithin(t *testing.T, name string, f *pb.ChangeFigure, lower, upper float64) {
	t.Helper()
	if f == nil || f.Lower == nil || f.Upper == nil || *f.Lower < lower || *f.Upper > upper || *f.Lower >= *f.Upper {
		t.Errorf("%s: got %v, want an interval within %v to %v", name, f, lower, upper)
	}
}
