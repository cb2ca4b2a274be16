package validation_test

import (
	"context"
	"encoding/json"
	"errors"
	"maps"
	"math"
	"strings"
	"testing"

	"limitary/internal/validation"
	"limitary/testdata"
)

func TestEveryCheckPasses(t *testing.T) {
	for _, c := range validation.Run(context.Background()) {
		if !c.Pass {
			t.Errorf("%s, %s: got %.15g, want %.15g within %.2g (%s) %s", c.Group, c.Name, c.Got, c.Want, c.Tolerance, c.Source, c.Note)
		}
	}
}

// The numbers of checks follow from the files: 27 sizes of 14 factors, 24 printed; 5 series of 3 moments; one measured
// series in three kinds with two figures each.
func TestNoCheckIsLost(t *testing.T) {
	got := map[string]int{}
	for _, c := range validation.Run(context.Background()) {
		got[c.Group]++
	}
	want := map[string]int{
		"chart factors, computed": 27 * 14, "chart factors, printed": 24 * 14, "moments": 5 * 3,
		"limits of certified series": 3 * 2, "worked examples": exampleChecks(t),
	}
	for group, n := range want {
		if got[group] != n {
			t.Errorf("%s: got %d checks, want %d", group, got[group], n)
		}
	}
}

// exampleChecks counts, apart from the code under test, the answers that the file does not leave out.
func exampleChecks(t *testing.T) int {
	raw, err := testdata.Files.ReadFile("worked-examples.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Examples []struct {
			Kind         string
			Checks       []map[string]any
			ExactFactors []any `json:"exact_factors"`
		}
		P map[string]float64 `json:"ad_p_at_critical"`
	}
	if err := json.Unmarshal(raw, &file); err != nil {
		t.Fatal(err)
	}
	n, kinds := len(file.P), map[string]int{}
	for _, e := range file.Examples {
		kinds[e.Kind]++
		n += len(e.ExactFactors)
		for _, c := range e.Checks {
			if _, leftOut := c["left_out"]; !leftOut {
				n++
			}
		}
	}
	if want := map[string]int{"individuals": 2, "xbar_r": 1, "xbar_s": 2, "c": 3, "p": 1, "u": 1, "": 3}; !maps.Equal(kinds, want) {
		t.Errorf("examples by kind: got %v, want %v", kinds, want)
	}
	return n
}

func TestChecksCanFail(t *testing.T) {
	for _, c := range validation.Run(context.Background()) {
		off := math.Nextafter(c.Want+c.Tolerance, math.Inf(1)) + c.Tolerance
		if c.Compare(off).Pass {
			t.Errorf("%s, %s: passes at %.15g, outside %.15g within %.2g", c.Group, c.Name, off, c.Want, c.Tolerance)
		}
		if c.Compare(math.NaN()).Pass {
			t.Errorf("%s, %s: passes when nothing is computed", c.Group, c.Name)
		}
		if c.Source == "" || c.Name == "" {
			t.Errorf("%+v: has no source or no name", c)
		}
	}
}

func TestFurtherGroups(t *testing.T) {
	broken := errors.New("file is missing")
	given := validation.Check{Name: "one", Source: "identity", Want: 1}.Compare(1)
	group := func(name string, checks []validation.Check, err error) validation.Group {
		return validation.Group{Name: name, Checks: func(context.Context) ([]validation.Check, error) { return checks, err }}
	}
	all := validation.Run(context.Background(),
		group("good", []validation.Check{given}, nil), group("broken", []validation.Check{given}, broken), group("empty", nil, nil))
	got := map[string][]bool{}
	for _, c := range all {
		got[c.Group] = append(got[c.Group], c.Pass)
	}
	t.Run("are run after the built-in ones", func(t *testing.T) {
		if last := all[len(all)-1]; last.Group != "empty" {
			t.Errorf("last group: got %q, want %q", last.Group, "empty")
		}
		if len(got["good"]) != 1 || !got["good"][0] {
			t.Errorf("good: got %v, want one pass", got["good"])
		}
	})
	t.Run("an error is a failed check beside the others", func(t *testing.T) {
		if len(got["broken"]) != 2 || !got["broken"][0] || got["broken"][1] {
			t.Errorf("broken: got %v, want a pass and a failure", got["broken"])
		}
	})
	t.Run("a group without checks fails", func(t *testing.T) {
		if len(got["empty"]) != 1 || got["empty"][0] {
			t.Errorf("empty: got %v, want one failure", got["empty"])
		}
	})
	if validation.Passed(all) || validation.Passed(nil) {
		t.Error("Passed: got true with failures or with nothing, want false")
	}
}

func TestCancelledRunSaysSo(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	checks := validation.Run(ctx)
	if got, want := len(checks), len(validation.Groups()); got != want {
		t.Fatalf("got %d checks, want one failure for each of %d groups", got, want)
	}
	for _, c := range checks {
		if c.Pass || !strings.Contains(c.Note, "not run") {
			t.Errorf("got %+v, want a failure that was not run", c)
		}
	}
}
