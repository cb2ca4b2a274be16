package validation

import (
	"math"
	"testing"
)

// A print of few digits proves little, so every answer is also compared with its independent recomputation, which the
// file gives to 12 digits (computed). This needs the unexported solution, hence a test inside the package.
func TestWorkedExamplesEqualTheirRecomputation(t *testing.T) {
	var file struct{ Examples []example }
	if err := readJSON(examplesFile, &file); err != nil {
		t.Fatal(err)
	}
	compared := 0
	for _, e := range file.Examples {
		s, err := e.solve()
		if err != nil {
			t.Fatalf("%s: %v", e.ID, err)
		}
		for _, c := range e.Checks {
			if c.Compute == "" {
				continue
			}
			got, err := s.value(c.quantity, c.PrintUsed)
			if err != nil {
				t.Errorf("%s, %s: %v", e.ID, c.Quantity, err)
			}
			if math.Abs(got-c.Recomputed) > recomputedDigits*math.Abs(c.Recomputed) {
				t.Errorf("%s, %s: got %.14g, want %.12g", e.ID, c.Quantity, got, c.Recomputed)
			}
			compared++
		}
	}
	if compared < 150 {
		t.Errorf("compared %d answers, want at least 150", compared)
	}
}

func TestUnknownQuantityIsAnError(t *testing.T) {
	e := example{Kind: "xbar_r", SubgroupSize: 2}
	e.Data.Subgroups = [][]float64{{1, 2}, {2, 4}, {3, 3}}
	s, err := e.solve()
	if err != nil {
		t.Fatal(err)
	}
	for _, q := range []quantity{{Compute: "no such"}, {Compute: "location_of", Sample: 4}, {Compute: "upper_location", Size: 3}} {
		if got, err := s.value(q, rounding{}); err == nil {
			t.Errorf("%+v: got %g, want an error", q, got)
		}
	}
}
