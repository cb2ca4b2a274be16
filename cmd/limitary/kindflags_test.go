package main

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/rules"
)

// Each call is refused, tells what would be right, and prints no result.
func TestFlagsThatDoNotFitAreRefused(t *testing.T) {
	counts := fileWith(t, "n,x\n10,2\n20,3\n15,1\n")
	for _, c := range []struct {
		args string
		code int
		want string
	}{
		{"--kind c --value x --bands 0,10", exitUsage, "--bands: fits charts of kind duplicate_range, relative_range, and this one is of kind c"},
		{"--kind individuals --value x --between-sigma 1", exitUsage, "--between-sigma: fits charts of kind run_means, and"},
		{"--kind p --value x --scale log", exitUsage, "--scale: fits charts of kind individuals, xbar_r, xbar_s, run_means, and"},
		{"--kind duplicate_range --value n,x --one-sided upper", exitUsage, "--one-sided: fits charts of kind individuals, xbar_r, xbar_s, run_means, p, np, c, u, and"},
		{"--kind relative_range --value n,x --spread-function", exitUsage, "--spread-function: fits charts of kind duplicate_range, and"},
		{"--kind duplicate_range --value n,x --absolute-below 4", exitUsage, "--absolute-below: fits charts of kind relative_range, and"},
		{"--kind individuals --value x --scale cube", exitUsage, `--scale "cube": want log or sqrt`},
		{"--kind individuals --value x --scale none", exitUsage, `--scale "none": want log or sqrt`},
		{"--kind individuals --value x --offset 1", exitUsage, "--offset 1: is added before a scale is taken"},
		{"--kind c --value x --count-method guess", exitUsage, `--count-method "guess": want normal or exact`},
		{"--kind c --value x --extra more", exitUsage, `--extra "more": want factor or between`},
		{"--kind c --value x --one-sided left", exitUsage, `--one-sided "left": want upper or lower`},
		{"--kind c --value x --one-sided upper --lower-action 0.5 --criterion target", exitUsage, "--lower-action 0.5: lies on the side that --one-sided upper does not watch"},
		{"--kind c --value x --dispersion-rules shewhart-1931", exitUsage, "fits charts of kind individuals, xbar_r, xbar_s, run_means, duplicate_range, relative_range, and"},
		{"--kind individuals --value x --inspected n", exitUsage, "--inspected: fits charts of kind p, np, c, u"},
		{"--kind p --value x", exitUsage, "--inspected: a chart of kind p needs to know how much was inspected for each count"},
		{"--kind p --value x --inspected 0", exitUsage, "--inspected 0: want more than 0"},
		{"--kind p --value x --inspected 2", exitFailure, "line 3: nonconforming 3: more than the 2 items inspected"},
		{"--kind np --value x", exitUsage, "--size: a chart of kind np has samples of one size"},
		{"--kind np --value x --inspected n", exitFailure, "line 3: inspected 20: an np chart has samples of one size, here 10"},
		{"--kind c --value n,x", exitFailure, "line 2: the result has 2 values, and a chart of kind c takes one count"},
		{"--kind c --value x --estimator pooled", exitUsage, "--estimator: POOLED: the sigma of counts follows from their mean"},
		{"--kind c --value x --estimator guess", exitUsage, "the sigma of counts follows from their mean, so a chart of kind c has none"},
		{"--kind individuals --value x --level low=2", exitUsage, "want MATERIAL=REFERENCE,SIGMA"},
		{"--kind individuals --value x --level low=2,0.1,3", exitUsage, "want MATERIAL=REFERENCE,SIGMA"},
		{"--kind individuals --value x --level low=2,s", exitUsage, `the sigma "s": want a finite number`},
		{"--kind individuals --value x --level low=2,1", exitUsage, "name the column that tells the levels"},
		{"--kind individuals --value x --level low=2,1 --material n", exitFailure, `line 2: "10": is no level of the standardised track`},
		{"--kind individuals --value x --scale log --offset -2", exitFailure, "line 2: 2: with the offset -2 it lies outside the domain of the log scale"},
		{"--kind duplicate_range --value n,x --bands 0,ten", exitUsage, "want numbers with a decimal point, separated by commas"},
		{"--kind individuals --value x --looks 2", exitUsage, "go with --in-force FILE"},
		{"--kind c --value x --in-force nosuch.json", exitFailure, "--in-force: open nosuch.json"},
		{"--kind individuals --value x --in-force nosuch.json", exitFailure, "--in-force: open nosuch.json"},
	} {
		t.Run(c.args, func(t *testing.T) {
			got := callProgram(t, "", append([]string{"compute", counts}, strings.Fields(c.args)...)...)
			if got.code != c.code || !strings.Contains(got.stderr, c.want) || got.stdout != "" {
				t.Errorf("code %d, want %d; said %q, want %q; out %q", got.code, c.code, got.stderr, c.want, got.stdout)
			}
		})
	}
}

func TestRunLengthsAreThoseOfPlainReadings(t *testing.T) {
	got := callProgram(t, "", "run-length", "--kind", "c")
	if want := "--kind c: run lengths are those of charts of kind individuals, xbar_r, xbar_s"; got.code != exitUsage || !strings.Contains(got.stderr, want) {
		t.Errorf("code %d, said %q, want %q", got.code, got.stderr, want)
	}
}

// A pattern rule stays off counts and duplicates unless it is asked for by name, and says so either way.
func TestPatternsAmongCountsAreLeftOutUnlessAskedFor(t *testing.T) {
	for _, c := range []struct {
		kind, file string
		columns    []string
	}{
		{"c", "blank-colonies.csv", []string{"--value", "colonies"}},
		{"duplicate_range", "nitrate-duplicates.csv", []string{"--value", "a_mg_per_L,b_mg_per_L"}},
	} {
		call := append([]string{"compute", "--kind", c.kind, filepath.Join(kindsDir, c.file)}, c.columns...)
		asked := []string{"--rules", "run-of-seven"}
		if c.kind != "c" {
			asked = []string{"--dispersion-rules", "run-of-seven"}
		}
		plain, run := mustRun(t, "", call...), mustRun(t, "", append(call, asked...)...)
		if !strings.Contains(plain, "- Not used") || !strings.Contains(plain, "action-warning/3;") {
			t.Errorf("%s: the pattern of the default set is not named as left out:\n%s", c.kind, plain)
		}
		if strings.Contains(run, "Not used: run-of-seven") {
			t.Errorf("%s: a set asked for is left out:\n%s", c.kind, run)
		}
		if c.kind == "c" && !strings.Contains(run, "Watching a chart of kind c: run-of-seven/") {
			t.Errorf("%s: a pattern that was asked for has no caution:\n%s", c.kind, run)
		}
	}
}

// A rule that looks for points on both sides has nothing to look for on one.
func TestOneSideRefusesRulesOfBoth(t *testing.T) {
	span := rules.Spec{ID: "own/1", Kind: rules.Span}
	beyond := rules.Spec{ID: "own/2", Kind: rules.BeyondLine}
	both := choice{specs: [chart.Roles][]rules.Spec{chart.Location: {beyond, span}}}
	if err := both.watchSide("lower"); err == nil || !strings.Contains(err.Error(), "own/1 looks for points on opposite sides") {
		t.Errorf("got %v", err)
	}
	one := choice{specs: [chart.Roles][]rules.Spec{chart.Location: {beyond}}}
	if err := one.watchSide("lower"); err != nil || one.specs[chart.Location][0].Sides != rules.LowerOnly || len(one.cautions) != 1 {
		t.Errorf("got %v, %+v", err, one)
	}
}

func TestCountsThatCannotBeAreRefusedByLine(t *testing.T) {
	for _, c := range []struct{ file, want string }{
		{"n,x\n10,1\n10,2.5\n", "line 3: nonconforming 2.5: want a whole number"},
		{"n,x\n10,1\n10,-1\n", "line 3: nonconforming -1: want a whole number"},
		{"n,x\n10,1\n10,<2\n", "line 3: the count is only a bound"},
		{"n,x\n10,1\n,2\n", `line 3, column "n": is empty, so it is not known how much was inspected`},
		{"n,x\n10,1\n<9,2\n", `line 3, column "n", value "<9": is only a bound`},
		{"n,x\n10,1\n-9,2\n", `line 3, column "n", value "-9": is not more than zero`},
		{"n,x\n10,1\n9.5,2\n", "line 3: inspected 9.5: want a whole number of items"},
		{"n,x\n10,1\nten,2\n", `line 3, column "n", value "ten": is not a number`},
		{"n,x\n10,0\n12,0\n", "all counts are zero"},
	} {
		got := callProgram(t, "", "compute", "--kind", "p", "--value", "x", "--inspected", "n", fileWith(t, c.file))
		if got.code != exitFailure || !strings.Contains(got.stderr, c.want) {
			t.Errorf("%q: code %d, said %q, want %q", c.file, got.code, got.stderr, c.want)
		}
	}
	// A sample without a count is no result, and an upper bound takes the place of a mean of zero.
	text := mustRun(t, "", "compute", "--kind", "p", "--value", "x", "--inspected", "n", "--mean-upper-bound", "0.05", fileWith(t, "n,x\n10,0\n12,\n,\n11,0\n"))
	for _, want := range []string{"2 samples used", "2 rows without a reading", "UPPER_BOUND_OF_MEAN"} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
}

// A number for --inspected holds for every row.
func TestInspectedCanBeOneNumber(t *testing.T) {
	column := fileWith(t, "n,x\n50,2\n50,3\n50,0\n50,4\n")
	args := []string{"compute", "--json", "--kind", "p", "--value", "x", column, "--inspected"}
	if a, b := mustRun(t, "", append(args, "n")...), mustRun(t, "", append(args, "50")...); a != b {
		t.Errorf("a column of 50 and the number 50 differ:\n%s\n%s", a, b)
	}
	np := mustRun(t, "", "compute", "--json", "--kind", "np", "--value", "x", column, "--inspected", "50")
	if size := mustRun(t, "", "compute", "--json", "--kind", "np", "--value", "x", column, "--size", "50"); size != np {
		t.Errorf("--size 50 and --inspected 50 differ:\n%s\n%s", size, np)
	}
}

// The new year lies 0.3 mg/L, 1.5 of its sigmas, above the old one. The difference is taken from both files here.
func TestComputeAgainstLimitsInForce(t *testing.T) {
	old, now := filepath.Join(kindsDir, "nitrate-2025.csv"), filepath.Join(kindsDir, "nitrate-2026.csv")
	inForce := mustRun(t, "", "compute", "--json", "--kind", "individuals", old)
	path := fileWith(t, inForce)
	before, sigma := movingRanges(numbers(t, kindRows(t, "nitrate-2025.csv")["nitrate_mg_per_L"]))
	after, _ := movingRanges(numbers(t, kindRows(t, "nitrate-2026.csv")["nitrate_mg_per_L"]))
	args := []string{"compute", "--kind", "individuals", now, "--in-force", path, "--after-signal", "--looks", "3"}
	var got pb.ComputeLimitsResponse
	if err := protojson.Unmarshal([]byte(mustRun(t, "", append(args, "--json")...)), &got); err != nil {
		t.Fatal(err)
	}
	c := got.ChangeTest
	if want := (after - before) / sigma; math.Abs(c.GetCentre().GetEstimate()-want) > 0.001 {
		t.Errorf("centre: got %v sigmas away, want %v", c.GetCentre().GetEstimate(), want)
	}
	if c.GetDecision() != pb.ChangeDecision_CHANGE_DECISION_CHANGE || c.GetLooks() != 3 || c.GetCentre().GetPValid() {
		t.Errorf("got %v, want CHANGE at look 3 with no valid p", c)
	}
	text := mustRun(t, "", args...)
	heading, decision := strings.Index(text, "Limits in force, results.csv: CHANGE"), strings.Index(text, "NOT VALID")
	if interval := strings.Index(text, "95 % interval"); heading < 0 || !(heading < interval && interval < decision) {
		t.Errorf("want the decision first, intervals after it and p last, marked:\n%s", text)
	}
	// A wide limit of relevance keeps the same centre.
	kept := mustRun(t, "", "compute", "--kind", "individuals", now, "--in-force", path, "--relevant-shift", "2.5", "--relevant-ratio", "2")
	if !strings.Contains(kept, "Limits in force, results.csv: KEEP") || strings.Contains(kept, "NOT VALID") {
		t.Errorf("with 2.5 sigmas and a ratio of 2 not mattering, want KEEP and a valid p:\n%s", kept)
	}
	for name, flags := range map[string][]string{"another scale": {"--scale", "log"}, "another kind": {"--kind", "xbar_r", "--size", "2"}} {
		if got := callProgram(t, "", append([]string{"compute", "--kind", "individuals", now, "--in-force", path}, flags...)...); got.code == exitOK {
			t.Errorf("%s: limits in force were taken", name)
		}
	}
}

// Judging by limits of other kinds needs the file that compute writes; and levels need the column of materials.
func TestJudgeSaysWhatItNeedsForOtherKinds(t *testing.T) {
	limits := fileWith(t, mustRun(t, "", "compute", "--json", "--kind", "individuals", "--value", "lead_ug_per_L", "--material", "material",
		"--level", "low=2.5,0.1", "--level", "mid=10,0.3", "--level", "high=40,1", filepath.Join(kindsDir, "lead-levels.csv")))
	results := fileWith(t, "m,x\nlow,2.5\nhigh,60\nother,3\nmid,\n")
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"--kind", "p", "--centre", "0.1", "--sigma", "1"}, `--kind p: centre and sigma do not say all of its limits; let "limitary compute --kind p --json" write them`},
		{[]string{"--limits", limits, "--value", "x"}, "--material: the limits standardise results by their material"},
	} {
		if got := callProgram(t, "", append([]string{"judge", results}, c.args...)...); got.code != exitUsage || !strings.Contains(got.stderr, c.want) {
			t.Errorf("%v: code %d, said %q, want %q", c.args, got.code, got.stderr, c.want)
		}
	}
	text := mustRun(t, "", "judge", results, "--limits", limits, "--value", "x", "--material", "m", "--detail", "full")
	for _, want := range []string{"2  low", "STOP", "NO_SCALE", "1 NO_RESULT", "1 NO_SCALE"} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
}

// Zero has no logarithm: all that is known is that it lies below, and a lower action line is then passed.
func TestAReadingOffTheScaleIsABound(t *testing.T) {
	limits := fileWith(t, mustRun(t, "", "compute", "--json", "--kind", "individuals", "--scale", "log", "--value", "turbidity_NTU", filepath.Join(kindsDir, "turbidity.csv")))
	results := fileWith(t, "x\n0.4\n0\n<0.5\n")
	picture := filepath.Join(t.TempDir(), "off.svg")
	text := mustRun(t, "", "judge", results, "--limits", limits, "--detail", "full", "--plot", picture)
	for _, want := range []string{"below the scale", "by bound", "BOUND_PROVES_NOTHING", "1 STOP"} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
	// Whole segments and single rows agree on what is not judged.
	for _, flags := range [][]string{nil, {"--detail", "full"}} {
		text := mustRun(t, "", append([]string{"judge", fileWith(t, "x\n0.4\n0\n0.5\n"), "--limits", limits, "--rules", "shewhart-1931"}, flags...)...)
		if !strings.Contains(text, "3 results judged (1 by a less-than or greater-than bound): 1 STOP, 0 ACT, 0 LOOK, 2 CLEAR") {
			t.Errorf("%v: got\n%s", flags, text)
		}
	}
}
