package main

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"regexp"
	"strings"
	"testing"
	"time"

	"limitary/internal/validation"
)

func TestValidatePrintsADatedPassList(t *testing.T) {
	text := mustRun(t, "", "validate")
	for _, want := range []string{
		"date          2026-03-02T08:30:00Z", "program       " + programNumber(), "judge number  1", "result        PASSED: ",
		"worked examples: ", "signals of worked examples: 24 of 24 passed", "evaluation by the service's contract: 2 of 2 passed",
		"Michelson: standard deviation", "pass  d2(2) ", "  printed ", "  computed ",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("the list does not say %q", want)
		}
	}
	// As many rows as the first lines count, and each with its source.
	counted := regexp.MustCompile(`PASSED: (\d+) of (\d+) checks passed`).FindStringSubmatch(text)
	rows := regexp.MustCompile(`(?m)^pass  `).FindAllString(text, -1)
	if counted == nil || counted[1] != counted[2] || counted[2] != jsonNumber(len(rows)) {
		t.Errorf("counted %v, listed %d rows", counted, len(rows))
	}
	if strings.Contains(text, "FAIL") {
		t.Error("a check is listed as failed")
	}
}

func jsonNumber(n int) string { b, _ := json.Marshal(n); return string(b) }

func TestValidateJSON(t *testing.T) {
	var list passListJSON
	if err := json.Unmarshal([]byte(mustRun(t, "", "validate", "--json")), &list); err != nil {
		t.Fatal(err)
	}
	if !list.Passed || list.Judge != 1 || list.At.IsZero() || len(list.Checks) < 900 {
		t.Errorf("got passed %v, judge %d, at %v, %d checks", list.Passed, list.Judge, list.At, len(list.Checks))
	}
	for _, c := range list.Checks {
		if c.Got == nil || c.Source == "" || math.Abs(*c.Got-c.Want) > c.Tolerance {
			t.Errorf("%s, %s: got %v, want %v within %v, source %q", c.Group, c.Name, c.Got, c.Want, c.Tolerance, c.Source)
		}
	}
}

// A check that fails is shown, as text and as JSON, and the program says not to rely on it.
func TestValidateFailsWithACheck(t *testing.T) {
	wrong := validation.Group{Name: "invented", Checks: func(context.Context) ([]validation.Check, error) {
		return []validation.Check{
			validation.Check{Name: "a wrong figure", Source: "none", Want: 1, Tolerance: 0.5}.Compare(2),
			validation.Check{Name: "no figure", Source: "none", Want: 1, Tolerance: 0.5}.Compare(math.NaN()),
		}, nil
	}}
	for _, asJSON := range []bool{false, true} {
		var out, errs bytes.Buffer
		env := &environment{Stdout: &out, Stderr: &errs, Now: time.Now}
		if got := validateWith(context.Background(), env, asJSON, wrong); got != exitFailure {
			t.Errorf("JSON %v: exit code: got %d, want %d", asJSON, got, exitFailure)
		}
		if !strings.Contains(errs.String(), "2 of ") || !strings.Contains(errs.String(), "do not rely on this program here") {
			t.Errorf("JSON %v: standard error: got %q", asJSON, errs.String())
		}
		want := []string{"FAILED: ", "FAIL  a wrong figure", "invented: 0 of 2 passed"}
		if asJSON {
			want = []string{`"passed": false`, `"got": null`}
		}
		for _, w := range want {
			if !strings.Contains(out.String(), w) {
				t.Errorf("JSON %v: the list does not say %q", asJSON, w)
			}
		}
	}
}

func TestValidateInterruptedFails(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	var out, errs bytes.Buffer
	if got := run(ctx, &environment{Stdout: &out, Stderr: &errs, Now: time.Now}, []string{"validate"}); got != exitFailure {
		t.Errorf("exit code: got %d, want %d", got, exitFailure)
	}
}
