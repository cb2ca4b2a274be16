package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// Each row is a call that cannot stand: what is wrong with the file ends with 1, what is wrong with the call with 2. The
// message names the line, the column or the flag, the value and what to say instead; nothing reaches standard output.
func TestBadInput(t *testing.T) {
	const good = "x\n10\n11\n9\n10.5\n"
	wide := "a,b\n1,2\n2,3\n3,5\n"
	compute := []string{"compute", "--kind", "individuals"}
	judged := []string{"judge", "--centre", "10", "--sigma", "1"}
	with := func(base []string, more ...string) []string { return append(append([]string{}, base...), more...) }
	for _, c := range []struct {
		name, file string
		args       []string
		code       int
		want       string
	}{
		// The file.
		{"empty", "", judged, 1, "results.csv: the file is empty; give a file with a header line and at least one result"},
		{"header alone", "x\n", judged, 1, "the file has a header and no results"},
		{"no header", "10.1\n10.2\n", judged, 1, `line 1, value "10.1": the first line must name the columns`},
		{"a word", "x\n10\nlost\n", judged, 1, `line 3, column "x", value "lost": is not a number; leave the field empty where there is no result`},
		{"not a number", "x\n10\nNaN\n", judged, 1, `line 3, column "x", value "NaN": is not a number`},
		{"infinite", "x\n10\n1e999\n", judged, 1, `line 3, column "x", value "1e999"`},
		{"a thousands separator", "x;y\n1.234,5;1\n", with(judged, "--value", "x"), 1, `line 2, column "x", value "1.234,5": has a thousands separator`},
		{"two readings of one text", "x;y\n1,234;a\n2,345;b\n", with(judged, "--value", "x"), 1, "--decimal"},
		{"ragged", "a,b\n1,2\n1,2,3\n", with(judged, "--value", "a"), 1, "line 3: has 3 fields, the header has 2"},
		{"a workbook", "PK\x03\x04rest", judged, 1, "a zip archive, as spreadsheet workbooks are; save the sheet as CSV in UTF-8"},
		{"UTF-16", "\xff\xfex\x00", judged, 1, "UTF-16"},
		{"two value columns", wide, judged, 1, `2 columns hold numbers: "a", "b"; choose the value column with --value NAME`},
		{"an unknown column", wide, with(judged, "--value", "aa"), 1, `no column has this name; there are "a", "b"; did you mean --value "a"?`},
		{"a subgroup that comes back", "g,x\n1,10\n2,11\n1,12\n", []string{"compute", "--kind", "xbar_r", "--subgroup", "g", "--value", "x"}, 1, "line 4, column \"g\", value \"1\": the subgroup that began in line 2 comes back"},
		{"an exclusion without a reason", "x,w\n10,yes\n11,\n", with(compute, "--value", "x", "--exclude", "w"), 1, `line 2, column "w", value "yes": is no reason for an exclusion`},
		{"a break that says neither", "x,b\n10,maybe\n", with(judged, "--value", "x", "--break", "b"), 1, `line 2, column "b", value "maybe": does not say whether a segment begins here`},
		{"more readings than the subgroup", "a,b,c\n1,2,3\n2,3,4\n", []string{"compute", "--kind", "xbar_r", "--size", "2", "--value", "a,b,c"}, 1, "line 2: the result has 3 readings, and the subgroup size is 2; is --size right?"},
		{"subgroups on a chart of single values", wide, with(compute, "--value", "a,b"), 1, "line 2: the result has 2 readings, and a chart of this kind takes one"},
		{"subgroups as statistics", wide, with(judged, "--value", "a,b"), 1, "line 2: the result has 2 readings, and a chart of this kind takes one"},
		{"single values on a chart of subgroups", good, []string{"compute", "--kind", "xbar_s"}, 1, "every result has one reading, and a chart of kind xbar_s takes subgroups"},
		{"one result", "x\n10\n", compute, 1, "sigma needs at least 2 results that are not excluded"},
		{"equal results", "x\n10\n10\n10\n", compute, 1, "the spread is zero"},
		{"everything excluded", "x\n10\n11\n", with(compute, "--exclude", "2=a", "--exclude", "3=b"), 1, "all are excluded"},
		{"a bound in the basis", "x\n10\n<5\n11\n", compute, 1, `line 3: "<5" is only a bound, which no estimate can take in; leave the result out with --exclude 3=REASON`},
		{"too large a result", "x\n10\n1e101\n", compute, 1, "line 3: 1e+101: is larger in size than the limit of 1e+100"},
		{"an exclusion of no result", good, with(compute, "--exclude", "9=late"), 1, "--exclude: line 9 holds no result; those of results.csv stand in lines 2 to 5"},
		{"a first line without a result", good, with(judged, "--first-judged", "77"), 1, "--first-judged: line 77 holds no result"},
		{"decimals that hide sigma", good, with(compute, "--decimals", "0", "--centre", "10", "--sigma", "0.2"), 1, "--decimals: 0: sigma is 0.2 and rounds to zero"},
		// The call.
		{"no kind", good, []string{"compute"}, 2, "--kind is not given; want one of individuals, xbar_r, xbar_s, run_means"},
		{"an unknown kind", good, []string{"compute", "--kind", "pie"}, 2, `--kind "pie": want one of individuals`},
		{"statistics as given have no limits", good, []string{"compute", "--kind", "given"}, 2, `--kind "given"`},
		{"an unknown set", good, with(judged, "--rules", "nelson"), 2, `--rules "nelson": there is no such set; want one or several of shewhart-1931`},
		{"a set twice", good, with(judged, "--rules", "nelson-1984,nelson-1984"), 2, "the set nelson-1984 is named twice"},
		{"no sigma for a rule that needs it", good, []string{"judge", "--centre", "10", "--rules", "shewhart-1931"}, 2, "sigma"},
		{"a decimal comma in a flag", good, []string{"judge", "--centre", "10,5", "--sigma", "1"}, 2, "want a number with a decimal point, 10.5"},
		{"a negative sigma", good, []string{"judge", "--centre", "10", "--sigma", "-1"}, 2, "--sigma -1: want more than 0"},
		{"an infinite centre", good, []string{"judge", "--centre", "Inf", "--sigma", "1"}, 2, "want a finite number"},
		{"too many decimals", good, with(judged, "--decimals", "16"), 2, "--decimals 16: want 0 to 15"},
		{"half a decimal", good, with(judged, "--decimals", "1.5"), 2, "want a whole number from 0"},
		{"a size of statistics", good, with(judged, "--size", "4"), 2, "--size: statistics as given have no size; name a --kind"},
		{"a size of single values", good, with(compute, "--size", "4"), 2, "--size 4: subgroup size 4: an individuals chart has size 1"},
		{"a huge size", good, []string{"compute", "--kind", "xbar_r", "--size", "101"}, 2, "--size 101: subgroup size 101: a chart of kind xbar_r has 2 to 100 readings"},
		{"a line on nothing", good, with(judged, "--upper-action", "12"), 2, "--upper-action 12: say what the line rests on with --criterion method or --criterion target"},
		{"a criterion of nothing", good, with(judged, "--criterion", "method"), 2, "--criterion method: no line is given"},
		{"an unknown criterion", good, with(judged, "--criterion", "habit", "--upper-action", "12"), 2, `--criterion "habit": want method or target`},
		{"a line nobody looks at", good, with(judged, "--upper-action", "12", "--criterion", "method", "--rules", "nelson-1984"), 2, "no rule of the location trace looks at this line, so it would not be judged"},
		{"lines that cross", good, with(judged, "--upper-action", "8", "--lower-action", "9", "--criterion", "method"), 2, "--lower-action 9: is not below the upper action line, 8"},
		{"computed lines that cross", good, with(compute, "--upper-action", "8", "--lower-action", "9", "--criterion", "method"), 2, "--lower-action: lower 9, upper 8"},
		{"a criterion finer than published", good, with(judged, "--decimals", "1", "--upper-action", "12.25", "--criterion", "method"), 2, "--upper-action 12.25: has more decimals than the 1 that are published"},
		{"a dispersion line without a kind", good, with(judged, "--dispersion-upper-action", "3", "--criterion", "method"), 2, "statistics as given make one trace"},
		{"dispersion rules without a kind", good, with(judged, "--dispersion-rules", "shewhart-1931"), 2, "statistics as given make one trace"},
		{"an unknown estimator", good, with(compute, "--estimator", "best"), 2, `--estimator "best": want one of [MEAN_MOVING_RANGE`},
		{"an estimator of another kind", good, with(compute, "--estimator", "pooled"), 2, "--estimator: POOLED: does not fit a chart of kind individuals"},
		{"an estimator beside sigma", good, with(compute, "--estimator", "overall", "--sigma", "1"), 2, "sigma is given, so there is nothing to estimate"},
		{"an unknown delimiter", good, with(judged, "--delimiter", "|"), 2, `delimiter "|": want comma, semicolon or tab`},
		{"an unknown decimal", good, with(judged, "--decimal", ";"), 2, `decimal ";": want point or comma`},
		{"an empty column name", good, with(judged, "--value", "a,,b"), 2, "--value: a column name is empty"},
		{"an exclusion without its reason", good, with(compute, "--exclude", "3= "), 2, "the reason is missing; write LINE=REASON"},
		{"two columns of exclusions", good, with(compute, "--exclude", "a", "--exclude", "b"), 2, `--exclude "b": a column is named already, "a"`},
		{"a picture that is no SVG", good, with(judged, "--plot", "chart.png"), 2, "name a file that ends in .svg"},
		{"an unknown standing", good, with(judged, "--fail-on", "warn"), 2, `--fail-on "warn": want look, act or stop`},
		{"an unknown detail", good, with(judged, "--detail", "some"), 2, `--detail "some": want full`},
		{"limits and a centre", good, []string{"judge", "--limits", "x.json", "--centre", "1"}, 2, "--centre: is given beside --limits"},
		{"no such limits", good, []string{"judge", "--limits", "nowhere.json"}, 1, "--limits: open nowhere.json"},
		{"an unknown flag", good, with(judged, "--colour", "red"), 2, "flag provided but not defined: -colour"},
		{"two files", good, with(judged, "one more"), 2, "is one argument too many"},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "results.csv")
			if err := os.WriteFile(path, []byte(c.file), 0o600); err != nil {
				t.Fatal(err)
			}
			got := callProgram(t, "", append(append([]string{}, c.args...), path)...)
			if got.code != c.code {
				t.Errorf("exit code: got %d, want %d", got.code, c.code)
			}
			if !strings.Contains(got.stderr, c.want) {
				t.Errorf("standard error: got %q, want %q", got.stderr, c.want)
			}
			if got.stdout != "" {
				t.Errorf("standard output: got %q, want nothing", got.stdout)
			}
		})
	}
}

func TestBadPaths(t *testing.T) {
	folder := t.TempDir()
	for _, c := range []struct {
		name string
		args []string
		code int
		want string
	}{
		{"no such file", []string{"judge", "--centre", "1", "--sigma", "1", filepath.Join(folder, "none.csv")}, 1, "none.csv: no such file or directory"},
		{"a folder", []string{"judge", "--centre", "1", "--sigma", "1", folder}, 1, "is a folder, want a file of results"},
		{"no file", []string{"judge", "--centre", "1", "--sigma", "1"}, 2, "an argument is missing"},
		{"validate takes none", []string{"validate", "x"}, 2, "is one argument too many"},
	} {
		t.Run(c.name, func(t *testing.T) {
			got := callProgram(t, "", c.args...)
			if got.code != c.code || !strings.Contains(got.stderr, c.want) {
				t.Errorf("got exit code %d and %q, want %d and %q", got.code, got.stderr, c.code, c.want)
			}
		})
	}
}

// A picture never lands on the file of results, and a place that cannot be written to is told of.
func TestPictureGoesWhereItMay(t *testing.T) {
	folder := t.TempDir()
	path := filepath.Join(folder, "results.svg")
	if err := os.WriteFile(path, []byte("x\n10\n11\n9\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	got := callProgram(t, "", "judge", "--centre", "10", "--sigma", "1", "--plot", path, path)
	if got.code != exitUsage || !strings.Contains(got.stderr, "is the file of results itself") {
		t.Errorf("got exit code %d and %q", got.code, got.stderr)
	}
	if raw, _ := os.ReadFile(path); string(raw) != "x\n10\n11\n9\n" {
		t.Errorf("the results were changed: %q", raw)
	}
	got = callProgram(t, "", "judge", "--centre", "10", "--sigma", "1", "--plot", filepath.Join(folder, "none", "c.svg"), path)
	if got.code != exitFailure || !strings.Contains(got.stderr, "--plot") {
		t.Errorf("got exit code %d and %q", got.code, got.stderr)
	}
}
