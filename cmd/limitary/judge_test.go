package main

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/service"
)

// The whole report of a small file, as it is pasted: 13.4 lies 3.4 sigma above 10, 12.1 and 13.4 are two of three beyond
// 2 sigma. <9 proves nothing about the lower lines.
func TestJudgeReport(t *testing.T) {
	path := fileWith(t, "id,when,x\nA1,2026-03-01,12.1\nA2,2026-03-02,<9\nA3,2026-03-03,13.4\nA4,2026-03-04,\nA5,2026-03-05,9.9\n")
	got := mustRun(t, "", "judge", "--centre", "10", "--sigma", "1", "--rules", "western-electric-1956", "--value", "x", "--id", "id", "--time", "when", path)
	got, _, _ = strings.Cut(got, "\nRules\n")
	got = strings.Replace(got, programNumber(), "PROGRAM", 1)
	want := `Control results judged, statistics plotted as given

file      results.csv
results   5 results from column "x", lines 2 to 6
read as   columns separated by comma, decimal point
limits    given: centre 10, sigma 1 of the statistic
rounding  nothing is rounded; decimals are compared exactly
judged    2026-03-02T08:30:00Z by limitary PROGRAM, judge number 1

Location trace: Statistic as given
----------------------------------
line           value  rests on
upper action      13  centre + 3 sigma
upper warning     12  centre + 2 sigma
centre            10
lower warning      8  centre - 2 sigma
lower action       7  centre - 3 sigma
sigma              1  of the plotted statistic

Rules: western-electric-1956/1, western-electric-1956/2, western-electric-1956/3,
western-electric-1956/4.

Summary
-------
3 results judged: 1 STOP, 0 ACT, 0 LOOK, 2 CLEAR. 2 NOT_JUDGED: 1 NO_RESULT, 1 BOUND_PROVES_NOTHING.
Worst standing: STOP. 2 hits in 2 signals.

Signals
-------
rule                     consequence  trace     side   from line  first hit  last hit  hits  id  time        looks for
western-electric-1956/1  STOP         location  upper          4          4         4     1  A3  2026-03-03  1 point beyond 3 sigma
western-electric-1956/2  ACT          location  upper          2          4         4     1  A3  2026-03-03  2 of 3 points beyond 2 sigma on one side, the newest among them

Lines are lines of the file. "From line": the first result that counts towards the pattern. Id and
time are those of the first hit.

- western-electric-1956/1: One result lies where sound results almost never do. Look first:
  Transcription, units and dilution; then this run's standard, blank and instrument log.
- western-electric-1956/2: The process may have moved, by an amount too small to pass the action
  line at once. Look first: What changed when the pattern began: calibration, reagent lot, analyst,
  column, temperature.

Hits, one for each rule that completes at a result
--------------------------------------------------
line  id  time        statistic  trace     rule                     consequence  side   window  first counting  looks for
   4  A3  2026-03-03       13.4  location  western-electric-1956/1  STOP         upper  4                    4  1 point beyond 3 sigma
   4  A3  2026-03-03       13.4  location  western-electric-1956/2  ACT          upper  2 to 4               2  2 of 3 points beyond 2 sigma on one side, the newest among them
`
	if got != want {
		t.Errorf("got\n%s\nwant\n%s", got, want)
	}
}

func TestJudgeExitCodes(t *testing.T) {
	looks := fileWith(t, "x\n10\n12.5\n9\n")  // beyond the warning line
	stops := fileWith(t, "x\n10\n13.5\n9\n")  // beyond the action line
	silent := fileWith(t, "x\n10\n11.9\n9\n") // on neither
	unjudged := fileWith(t, "x\n<10\n")
	for _, c := range []struct {
		name, file, failOn string
		want               int
	}{
		{"signals alone end well", stops, "", exitOK},
		{"stop is at least look", stops, "look", exitSignals},
		{"stop is at least stop", stops, "stop", exitSignals},
		{"look is at least look", looks, "look", exitSignals},
		{"look is less than act", looks, "act", exitOK},
		{"clear is less than look", silent, "look", exitOK},
		{"not judged asks for nothing", unjudged, "look", exitOK},
	} {
		t.Run(c.name, func(t *testing.T) {
			for _, form := range []string{"", "--json"} {
				args := []string{"judge", "--centre", "10", "--sigma", "1", "--fail-on", c.failOn, c.file}
				if form != "" {
					args = append(args, form)
				}
				if got := callProgram(t, "", args...); got.code != c.want {
					t.Errorf("%v: got %d, want %d\n%s", args, got.code, c.want, got.stderr)
				}
			}
		})
	}
}

// "<0.05" is not beyond an upper line at 0.1 whatever it is, and ">0.2" is beyond it whatever it is. One-sided, as for
// blanks.
func TestJudgeDecidesByBound(t *testing.T) {
	path := fileWith(t, "x\n<0.05\n0.08\n>0.2\n<0.15\n")
	text := mustRun(t, "", "judge", "--rules", "action-warning", "--centre", "0.05", "--sigma", "0.02", "--upper-action", "0.1", "--criterion", "method",
		"--lower-action", "none", "--lower-warning", "none", "--upper-warning", "none", "--detail", "full", path)
	for _, want := range []string{
		"upper action     0.1  method criterion",
		"   2     <0.05  CLEAR       by bound",
		"   4      >0.2  STOP        action-warning/2, by bound",
		"   5            NOT_JUDGED  BOUND_PROVES_NOTHING",
		"3 results judged (2 by a less-than or greater-than bound): 1 STOP",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
}

// A file judged with --json gives what the service answers for the same numbers, whether judged as a whole or with one
// verdict a point, with context and without.
func TestJudgeJSONIsTheServicesAnswer(t *testing.T) {
	rng := rand.New(rand.NewPCG(20260302, 1))
	var text strings.Builder
	text.WriteString("x\n")
	centre, sigma := 10.0, 0.5
	var values []float64
	for i := range 400 {
		x := math.Round((centre+sigma*(rng.NormFloat64()+float64(i)/400))*10) / 10 // drifting, with many ties
		fmt.Fprintf(&text, "%v\n", x)
		values = append(values, x)
	}
	path := fileWith(t, text.String())
	for _, c := range []struct {
		name  string
		args  []string
		kind  pb.ChartKind
		first int32
		full  bool
	}{
		{"hits", nil, 0, 0, false},
		{"context", []string{"--first-judged", "102"}, 0, 100, false},
		{"full", []string{"--detail", "full"}, 0, 0, true},
		{"individuals", []string{"--kind", "individuals", "--dispersion-rules", "run-of-seven"}, pb.ChartKind_CHART_KIND_INDIVIDUALS, 50, true},
	} {
		t.Run(c.name, func(t *testing.T) {
			inline := &pb.InlineLimits{Kind: c.kind, Location: &pb.TraceLimits{Centre: &centre, Sigma: &sigma, RuleSet: "nelson-1984"}}
			args := append([]string{"judge", "--json", "--centre", "10", "--sigma", "0.5", "--rules", "nelson-1984", path}, c.args...)
			if c.kind != 0 {
				// d2(2) = 2/√π and d3(2) = √(2 - 4/π).
				m, s := sigma*2/math.Sqrt(math.Pi), sigma*math.Sqrt(2-4/math.Pi)
				inline.Dispersion = &pb.TraceLimits{Centre: &m, Sigma: &s, RuleSet: "run-of-seven"}
				args = append(args, "--first-judged", "52", "--detail", "full")
			}
			ask := &pb.EvaluateBatchRequest{Evaluations: []*pb.Evaluation{{
				Limits: &pb.Evaluation_Inline{Inline: inline}, Data: &pb.Evaluation_Series{Series: &pb.Series{Values: values}}, FirstJudged: c.first}}}
			if c.full {
				ask.Detail = pb.Detail_DETAIL_FULL
			}
			want, err := (&service.EvaluationService{}).EvaluateBatch(context.Background(), ask)
			if err != nil {
				t.Fatal(err)
			}
			var got pb.EvaluateBatchResponse
			if err := protojson.Unmarshal([]byte(mustRun(t, "", args...)), &got); err != nil {
				t.Fatal(err)
			}
			if len(want.Evaluations[0].Hits) == 0 {
				t.Fatal("the series has no hits, so nothing is shown")
			}
			sameAnswer(t, &got, want)
		})
	}
}

// sameAnswer compares answers. Sigma and centre of the dispersion trace were computed in the test, by closed forms, and
// may differ in the last bits.
func sameAnswer(t *testing.T, got, want *pb.EvaluateBatchResponse) {
	t.Helper()
	for i, v := range got.Evaluations[0].Verdicts {
		if i >= len(want.Evaluations[0].Verdicts) {
			break
		}
		g, w := v.Dispersion, want.Evaluations[0].Verdicts[i].Dispersion
		if g == nil || w == nil {
			continue
		}
		for _, p := range [][2]**float64{{&g.Centre, &w.Centre}, {&g.Sigma, &w.Sigma}, {&g.UpperAction, &w.UpperAction}, {&g.UpperWarning, &w.UpperWarning}} {
			if *p[0] != nil && *p[1] != nil && math.Abs(**p[0]-**p[1]) < 1e-12 {
				*p[0] = *p[1]
			}
		}
	}
	if !proto.Equal(got, want) {
		t.Errorf("got  %v\nwant %v", got, want)
	}
}

// Limits computed from a file and read back judge the file as the computation itself did.
func TestLimitsMakeTheRoundTrip(t *testing.T) {
	for _, args := range [][]string{
		{"--kind", "individuals"},
		{"--kind", "individuals", "--lower-action", "none", "--upper-action", "300000.5", "--criterion", "method", "--dispersion-upper-action", "150"},
		{"--kind", "xbar_s", "--subgroup", "experiment"},
	} {
		t.Run(strings.Join(args, " "), func(t *testing.T) {
			base := append([]string{"--value", "speed_km_per_s", michelson}, args...)
			limits := filepath.Join(t.TempDir(), "limits.json")
			if err := os.WriteFile(limits, []byte(mustRun(t, "", append([]string{"compute", "--json"}, base...)...)), 0o600); err != nil {
				t.Fatal(err)
			}
			again := []string{"judge", "--limits", limits, "--value", "speed_km_per_s", michelson}
			if args[1] != "individuals" {
				again = append(again, args[2:]...)
			}
			got := section(t, mustRun(t, "", again...), "Signals")
			want := section(t, mustRun(t, "", append([]string{"compute"}, base...)...), "Signals of these results against these limits")
			if got != want || !strings.Contains(got, "STOP") {
				t.Errorf("got\n%s\nwant\n%s", got, want)
			}
		})
	}
}

// section gives what stands below a heading.
func section(t *testing.T, text, heading string) string {
	t.Helper()
	_, after, ok := strings.Cut(text, "\n"+heading+"\n"+strings.Repeat("-", len(heading))+"\n")
	if !ok {
		t.Fatalf("no section %q in\n%s", heading, text)
	}
	body, _, _ := strings.Cut(after, "\n---")
	lines := strings.Split(body, "\n")
	return strings.Join(lines[:len(lines)-2], "\n")
}

func TestLimitsEditedByHandAreRefused(t *testing.T) {
	text := mustRun(t, "", "compute", "--json", "--kind", "individuals", "--value", "speed_km_per_s", michelson)
	var m map[string]any
	if err := json.Unmarshal([]byte(text), &m); err != nil {
		t.Fatal(err)
	}
	m["location"].(map[string]any)["upperAction"].(map[string]any)["value"] = 300200
	raw, err := json.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "limits.json")
	if err := os.WriteFile(path, raw, 0o600); err != nil {
		t.Fatal(err)
	}
	got := callProgram(t, "", "judge", "--limits", path, "--value", "speed_km_per_s", michelson)
	if want := "location.upper_action.value: 300200"; got.code != exitFailure || !strings.Contains(got.stderr, want) {
		t.Errorf("got exit code %d and %q, want 1 and %q", got.code, got.stderr, want)
	}
}

func TestJudgeReadsStandardInput(t *testing.T) {
	text := mustRun(t, "x\n10\n14\n", "judge", "--centre", "10", "--sigma", "1", "-")
	if !strings.Contains(text, "standard input") || !strings.Contains(text, "1 STOP") {
		t.Errorf("got\n%s", text)
	}
}

// A file can hold anything; what reaches a terminal cannot steer it.
func TestForeignTextIsDisarmed(t *testing.T) {
	path := fileWith(t, "id,x\n\x1b[2J\u202eevil,14\n")
	text := mustRun(t, "", "judge", "--centre", "10", "--sigma", "1", "--value", "x", "--id", "id", "--title", "a\x07b", path)
	if strings.ContainsAny(text, "\x1b\x07\u202e") {
		t.Errorf("a control character came through: %q", text)
	}
}

// By hand: 10, 11 and 9 have mean 10 and s 1; 10 and 12 have mean 11 and s √2; one reading has no s. With sigma 1 the
// mean of two lies 1.41 of its sigmas above the centre.
func TestJudgeSubgroupsOfUnequalSize(t *testing.T) {
	path := fileWith(t, "g,x\n1,10\n1,11\n1,9\n2,10\n2,12\n3,10\n")
	text := mustRun(t, "", "judge", "--kind", "xbar_s", "--centre", "10", "--sigma", "1", "--subgroup", "g", "--value", "x", "--detail", "full", "--decimals", "3", path)
	for _, want := range []string{
		"   2  1     10.000       1.000  CLEAR", "   5  2     11.000       1.414  CLEAR", "   7  3     10.000              CLEAR",
		"subgroup size  3 readings; lines of smaller subgroups follow from process sigma, 1",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
	if got, want := figure(t, text, "upper action"), 11.732; got != want { // 10 + 3/√3
		t.Errorf("upper action line: got %v, want %v", got, want)
	}
}

func TestHelpGoesToStandardOutput(t *testing.T) {
	for _, command := range []string{"compute", "judge", "validate"} {
		got := callProgram(t, "", command, "--help")
		if got.code != exitOK || got.stderr != "" || !strings.HasPrefix(got.stdout, "usage: limitary "+command) || !strings.Contains(got.stdout, "-json") {
			t.Errorf("%s: got exit code %d, %q on standard error and %q", command, got.code, got.stderr, got.stdout)
		}
	}
}
