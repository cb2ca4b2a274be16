package validation_test

import (
	"context"
	"testing"

	"limitary/internal/validation"
)

// Eleven examples name their signals, one of them by two limits and one in two arms: thirteen numbers of points. Points
// that signal: 24; 15, 23; 15, 21, 23; 6, 20; 29, 30. One point lies on the line.
func TestSignalsOfWorkedExamples(t *testing.T) {
	checks, err := validation.Signals().Checks(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range checks {
		if !c.Pass {
			t.Errorf("%s: got %v, want %v (%s)", c.Name, c.Got, c.Want, c.Source)
		}
		if c.Compare(c.Want + 1).Pass {
			t.Errorf("%s: passes with one too many", c.Name)
		}
	}
	if got, want := len(checks), 13+10+1; got != want {
		t.Errorf("got %d checks, want %d", got, want)
	}
}
