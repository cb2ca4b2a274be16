package validation

import (
	"math"
	"slices"
	"strings"
	"testing"
)

// A print of few digits proves little, so every answer is also compared with its independent recomputation, which the
// file gives to 12 digits (computed). This needs the unexported solution, hence a test inside the package.
func TestWorkedExamplesEqualTheirRecomputation(t *testing.T) {
	var file workedFile
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
	if compared < 300 {
		t.Errorf("compared %d answers, want at least 300", compared)
	}
}

func TestUnknownQuantityIsAnError(t *testing.T) {
	e := example{Kind: "xbar_r", SubgroupSize: 2}
	e.Data.Subgroups = [][]float64{{1, 2}, {2, 4}, {3, 3}}
	s, err := e.solve()
	if err != nil {
		t.Fatal(err)
	}
	counts := example{Kind: "u", SubgroupSize: 1}
	counts.Data.Nonconformities, counts.Data.Units = []float64{3, 2, 4}, []float64{2, 1, 2}
	c, err := counts.solve()
	if err != nil {
		t.Fatal(err)
	}
	var series example
	series.Data.X, series.Parameters.Lambda, series.Parameters.KSigma, series.Parameters.Sigma, series.Parameters.H = []float64{1, 2}, 0.2, 3, 1, 4
	for _, tc := range []struct {
		s *solution
		q []quantity
	}{
		{s, []quantity{{Compute: "no such"}, {Compute: "location_of", Sample: 4}, {Compute: "upper_location", Size: 3}}},
		{c, []quantity{
			{Compute: "no such"}, {Compute: "no such", Sample: 1}, {Compute: "location_of", Sample: 4}, {Compute: "lower_location"},
			{Compute: "lower_location", Sample: 1}, {Compute: "centre", Without: []int{4}}, {Compute: "centre", Kind: "no such"},
		}},
		{&solution{example: &series}, []quantity{
			{Compute: "no such"}, {Compute: "average_of"}, {Compute: "average_of", Sample: 3}, {Compute: "upper_sum_of", Sample: -1}, {Compute: "anderson_darling"},
		}},
	} {
		for _, q := range tc.q {
			if got, err := tc.s.value(q, rounding{}); err == nil {
				t.Errorf("%+v: got %g, want an error", q, got)
			}
		}
	}
}

// An answer is computed or left out with a reason: none is passed over in silence, and none is made up for a method that
// the program does not have.
func TestEveryAnswerIsComputedOrLeftOutWithAReason(t *testing.T) {
	var file workedFile
	if err := readJSON(examplesFile, &file); err != nil {
		t.Fatal(err)
	}
	var leftOut []string
	for _, e := range file.Examples {
		for _, c := range e.Checks {
			if (c.Compute == "") == (c.LeftOut == "") {
				t.Errorf("%s, %s: compute %q, left out %q: want one of the two", e.ID, c.Quantity, c.Compute, c.LeftOut)
			}
			if c.LeftOut != "" {
				leftOut = append(leftOut, c.Quantity)
			}
		}
	}
	want := []string{"A2 case 0 (mu=200, sigma=35)", "D case 0", "W2 case 0", "D case 3", "W2 case 3"}
	if !slices.Equal(leftOut, want) {
		t.Errorf("left out: got %q, want %q", leftOut, want)
	}
}

// A wrong remark in the file is an error, not a check that passes.
func TestAnAnswerWithoutAKnownStatusIsAnError(t *testing.T) {
	for _, c := range []exampleCheck{{Published: "1", Status: "PERHAPS"}, {Published: "one", Status: "AGREES"}} {
		if got, err := c.wanted(); err == nil {
			t.Errorf("%+v: got %+v, want an error", c, got)
		}
	}
	c := exampleCheck{Published: "47.4115", Recomputed: 47.4115682619, Status: "DIFFERS_BY_ONE_UNIT", How: "the exact root"}
	got, err := c.wanted()
	if err != nil || got.Printed || got.Want != c.Recomputed || !strings.Contains(got.Note, "47.4115") || !strings.Contains(got.Note, "the exact root") {
		t.Errorf("got %+v, %v, want the computed value and what was printed", got, err)
	}
}
