package main

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
)

// The figures are those of testdata/arl.csv, of other programs: 91.75077, 27.3..., and 132.8928 for the first three rules.
func TestRunLengthReport(t *testing.T) {
	got := mustRun(t, "", "run-length", "--rules", "western-electric-1956", "--shift", "0,1", "--within", "10", "--marginal", "--tracks", "10", "--per-day", "2")
	for _, want := range []string{
		"    0  91.751  88.145    13    65   207    0.07473  exact",
		"in standard errors",
		"shift 0: signal within n points\n",
		"         50 |################                        | 41.2 %\n",
		"western-electric-1956/3         132.893                  7.525  3.089",
		"points flagged per 1000  signals opened per 1000  signals a week",
		"Neither rate is 1000 over the ARL",
		"False alarms are expected",
	} {
		if !strings.Contains(got, want) {
			t.Errorf("no %q in\n%s", want, got)
		}
	}
}

func TestRunLengthJSONIsTheServices(t *testing.T) {
	flags := mustRun(t, "", "run-length", "--rules", "western-electric-1956", "--shift", "0,0.5", "--within", "10,50", "--json")
	request := `{"ruleSet": "western-electric-1956", "shifts": [0, 0.5], "horizonsPoints": [10, 50], "rates": true}`
	file := mustRun(t, request, "run-length", "--request", "-", "--json")
	if flags != file {
		t.Errorf("flags and request differ:\n%s\n%s", flags, file)
	}
	var m pb.RunLengthResponse
	if err := protojson.Unmarshal([]byte(flags), &m); err != nil {
		t.Fatal(err)
	}
	if len(m.Rows) != 2 || math.Abs(m.Rows[0].Arl-91.75077313) > 1e-7 || m.Rows[0].Computation != pb.Computation_COMPUTATION_EXACT {
		t.Errorf("got %v", &m)
	}
}

func TestRunLengthStudiesAreReported(t *testing.T) {
	got := mustRun(t, "", "run-length", "--rules", "western-electric-1956", "--shift", "0", "--budget", "150", "--limits-from", "30", "--power", "5")
	for _, want := range []string{
		"Subsets with an ARL in control of at least 150, by ARL at shift 1",
		"EWMA, lambda 0.2, limit",
		"CUSUM, reference 0.5, interval",
		"cannot be told apart with limits from 30 points",
		"power, 5 points",
		"With 90 % assurance,",
	} {
		if !strings.Contains(got, want) {
			t.Errorf("no %q in\n%s", want, got)
		}
	}
}

func TestRunLengthOfAWholeChartAndCUSUM(t *testing.T) {
	got := mustRun(t, "", "run-length", "--rules", "shewhart-1931", "--kind", "individuals", "--shift", "0")
	if !strings.Contains(got, "    0  105.331  104.159") || !strings.Contains(got, "quadrature") || !strings.Contains(got, "dispersion:shewhart-1931/1") {
		t.Errorf("no ARL of 105.331 in\n%s", got)
	}
	request := `{"rules": [{"id": "sum", "consequence": "CONSEQUENCE_ACT", "cusum": {"k": 0.5, "h": 4, "headStart": 2}}]}`
	got = mustRun(t, request, "run-length", "--request", "-")
	// 148.69565 in testdata/arl.csv.
	if !strings.Contains(got, "148.696") || !strings.Contains(got, "within 20 of the head start") || !strings.Contains(got, "integral equation") {
		t.Errorf("no ARL of 148.696 in\n%s", got)
	}
}

func TestRunLengthPicture(t *testing.T) {
	path := filepath.Join(t.TempDir(), "lengths.svg")
	mustRun(t, "", "run-length", "--rules", "nelson-1984", "--ends", "look", "--plot", path)
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	paths := 0
	for d := xml.NewDecoder(bytes.NewReader(raw)); ; {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		if e, ok := token.(xml.StartElement); ok && e.Name.Local == "path" {
			paths++
		}
	}
	if paths != 6 {
		t.Errorf("%d curves, want one a shift, 6", paths)
	}
}

func TestRunLengthIsCalledWrongly(t *testing.T) {
	for _, c := range []struct {
		args []string
		code int
		says string
	}{
		{[]string{"--rules", "house-rules"}, exitUsage, "house-rules"},
		{[]string{"--shift", "0,x"}, exitUsage, `"x" is not a finite number`},
		{[]string{"--ends", "never"}, exitUsage, "act, look, stop"},
		{[]string{"--plot", "a.png"}, exitUsage, ".svg"},
		{[]string{"--within", "2.5"}, exitUsage, "whole numbers"},
		{[]string{"--tracks", "3"}, exitUsage, "needs both"},
		{[]string{"--t", "4", "--gamma", "2"}, exitUsage, "one of the two"},
		{[]string{"--request", "no-such-file.json"}, exitUsage, "no-such-file.json"},
		{[]string{"--sigma-ratio", "-1"}, exitFailure, "sigma_ratio"},
		{[]string{"--rules", "western-electric-1956", "--limits-from", "2"}, exitFailure, "basis.points"},
		{[]string{"extra"}, exitUsage, "one argument too many"},
	} {
		got := callProgram(t, "", append([]string{"run-length"}, c.args...)...)
		if got.code != c.code || !strings.Contains(got.stderr, c.says) || got.stdout != "" {
			t.Errorf("%v: code %d, want %d; stderr %q, want %q in it; stdout %q", c.args, got.code, c.code, got.stderr, c.says, got.stdout)
		}
	}
	for request, says := range map[string]string{
		`{"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 4, "m": 3, "z": 1}}]}`:  "rules[0].beyond.k",
		`{"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "ewma": {"lambda": 2, "limit": 3}}]}`:   "lambda",
		`{"rules": [{"id": "a", "consequence": "CONSEQUENCE_LOOK", "beyond": {"k": 1, "m": 1, "z": 3}}]}`: "ACT",
		`{"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 1, "m": 1, "z": 70}}]}`: "can complete",
		`{"shifts": [0]}`: "no rules",
	} {
		got := callProgram(t, request, "run-length", "--request", "-")
		if got.code != exitFailure || !strings.Contains(got.stderr, says) {
			t.Errorf("%s: code %d, stderr %q; want %d and %q", request, got.code, got.stderr, exitFailure, says)
		}
	}
}

func TestRunLengthStopsOnInterruptAndShowsProgress(t *testing.T) {
	ended, cancel := context.WithCancel(context.Background())
	cancel()
	var out, errs bytes.Buffer
	env := &environment{Stdin: strings.NewReader(""), Stdout: &out, Stderr: &errs, Getenv: func(string) string { return "" }, Now: time.Now, Interactive: true}
	code := run(ended, env, []string{"run-length", "--rules", "nelson-1984", "--ends", "look", "--budget", "100"})
	if code != exitFailure || !strings.Contains(errs.String(), "interrupted") || out.Len() != 0 {
		t.Errorf("code %d, stderr %q, stdout %q; want a failure that says it was interrupted", code, errs.String(), out.String())
	}
	errs.Reset()
	code = run(context.Background(), env, []string{"run-length", "--rules", "western-electric-1956", "--budget", "100"})
	if code != exitOK || !strings.Contains(errs.String(), "subsets: 100 %") || !strings.HasSuffix(errs.String(), "\r") {
		t.Errorf("code %d, stderr %q; want progress, cleared at the end", code, errs.String())
	}
}
