package main

import (
	"bytes"
	"context"
	"encoding/csv"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/service"
)

const michelson = "../../testdata/michelson-1879.csv"

// callResult is what a call of the program left behind.
type callResult struct {
	code           int
	stdout, stderr string
}

// callProgram runs the program's own path from the command's name on, with the given standard input.
func callProgram(t testing.TB, stdin string, args ...string) callResult {
	t.Helper()
	var out, errs bytes.Buffer
	env := &environment{
		Stdin: strings.NewReader(stdin), Stdout: &out, Stderr: &errs, Getenv: func(string) string { return "" },
		Now: func() time.Time { return time.Date(2026, 3, 2, 8, 30, 0, 0, time.UTC) },
	}
	code := run(context.Background(), env, args)
	return callResult{code, out.String(), errs.String()}
}

// mustRun is callProgram where the call must go well.
func mustRun(t testing.TB, stdin string, args ...string) string {
	t.Helper()
	got := callProgram(t, stdin, args...)
	if got.code != exitOK {
		t.Fatalf("limitary %s: exit code %d, want 0\n%s", strings.Join(args, " "), got.code, got.stderr)
	}
	return got.stdout
}

// fileWith writes a file of results.
func fileWith(t testing.TB, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "results.csv")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// figure finds the number behind a label in a report.
func figure(t testing.TB, text, label string) float64 {
	t.Helper()
	m := regexp.MustCompile(`(?m)^` + regexp.QuoteMeta(label) + `\s+(-?[0-9.]+)`).FindStringSubmatch(text)
	if m == nil {
		t.Fatalf("no figure behind %q in\n%s", label, text)
	}
	x, err := strconv.ParseFloat(m[1], 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// michelsonSpeeds reads the series apart from the code under test.
func michelsonSpeeds(t testing.TB) []float64 {
	t.Helper()
	file, err := os.Open(michelson)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var xs []float64
	for _, r := range rows[1:] {
		x, err := strconv.ParseFloat(r[2], 64)
		if err != nil {
			t.Fatal(err)
		}
		xs = append(xs, x)
	}
	return xs
}

// Certified by the NIST Statistical Reference Datasets (univariate, Michelson): mean 299.8524 and standard deviation
// 0.0790105478190518 in thousands of km/s; the file has km/s.
const (
	certifiedMean = 299852.4
	certifiedS    = 79.0105478190518
)

func TestComputeReproducesMichelson(t *testing.T) {
	for _, args := range [][]string{
		{"--kind", "individuals"},
		{"--kind", "xbar_r", "--subgroup", "experiment"},
		{"--kind", "xbar_s", "--subgroup", "experiment"},
	} {
		t.Run(strings.Join(args, " "), func(t *testing.T) {
			text := mustRun(t, "", append([]string{"compute", "--value", "speed_km_per_s", michelson}, args...)...)
			if got := figure(t, text, "mean"); got != certifiedMean {
				t.Errorf("mean: got %v, want %v", got, certifiedMean)
			}
			if got := figure(t, text, "standard deviation"); math.Abs(got/certifiedS-1) > 1e-12 {
				t.Errorf("standard deviation: got %.15g, want %.15g to 12 digits", got, certifiedS)
			}
			if provisional := strings.Contains(text, "PROVISIONAL"); provisional != (len(args) > 2) {
				t.Errorf("marked as provisional: got %v; five experiments are fewer than twenty subgroups", provisional)
			}
		})
	}
}

// The limits of single values are the mean plus and minus 3/d2 times the mean moving range, d2(2) = 2/√π; each is
// computed here in one line from the file, and the points beyond them are found by comparing.
func TestComputeIndividualsSignals(t *testing.T) {
	xs := michelsonSpeeds(t)
	sum, ranges := 0.0, 0.0
	for i, x := range xs {
		sum += x
		if i > 0 {
			ranges += math.Abs(x - xs[i-1])
		}
	}
	mean := sum / float64(len(xs))
	reach := 3 * ranges / float64(len(xs)-1) * math.Sqrt(math.Pi) / 2
	text := mustRun(t, "", "compute", "--kind", "individuals", "--value", "speed_km_per_s", "--rules", "shewhart-1931", "--dispersion-rules", "none", michelson)
	if got := figure(t, text, "upper action"); math.Abs(got-(mean+reach)) > 0.02 {
		t.Errorf("upper action line: got %v, want %v within what rounding sigma to 2 decimals moves it", got, mean+reach)
	}
	var want, got []string
	for i, x := range xs {
		if math.Abs(x-mean) > reach {
			want = append(want, strconv.Itoa(i+2))
		}
	}
	for _, m := range regexp.MustCompile(`(?m)^shewhart-1931/1 .*?(\d+)\s+(\d+)\s+(\d+)\s+(\d+)  1 point`).FindAllStringSubmatch(text, -1) {
		first, _ := strconv.Atoi(m[2])
		last, _ := strconv.Atoi(m[3])
		for line := first; line <= last; line++ {
			got = append(got, strconv.Itoa(line))
		}
	}
	if len(want) == 0 || strings.Join(got, " ") != strings.Join(want, " ") {
		t.Errorf("lines beyond three sigmas: got %v, want %v", got, want)
	}
}

func TestComputeJSONIsTheServicesAnswer(t *testing.T) {
	xs := michelsonSpeeds(t)
	points := &pb.Points{}
	for i := 0; i < len(xs); i += 20 {
		points.Points = append(points.Points, &pb.Point{Value: &pb.Point_Readings{Readings: &pb.Readings{Values: xs[i : i+20]}}})
	}
	lower, excluded := 299700.0, []*pb.Exclusion{{Point: 2, Reason: "mirror, realigned"}}
	line := &pb.FixedLines{LowerAction: &pb.Line{Value: &lower, Basis: pb.Basis_BASIS_METHOD_CRITERION}}
	for name, c := range map[string]struct {
		args []string
		ask  *pb.ComputeLimitsRequest
	}{
		"series": {[]string{"--kind", "individuals"},
			&pb.ComputeLimitsRequest{Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, Data: &pb.ComputeLimitsRequest_Series{Series: &pb.Series{Values: xs}}}},
		"subgroups, a criterion and an exclusion": {
			[]string{"--kind", "xbar_s", "--subgroup", "experiment", "--exclude", "42=mirror, realigned", "--lower-action", "299700", "--criterion", "method"},
			&pb.ComputeLimitsRequest{Kind: pb.ChartKind_CHART_KIND_XBAR_S, SubgroupSize: 20, Data: &pb.ComputeLimitsRequest_Points{Points: points},
				Exclusions: excluded, LocationLines: line}},
	} {
		t.Run(name, func(t *testing.T) {
			want, err := (&service.LimitService{}).ComputeLimits(context.Background(), c.ask)
			if err != nil {
				t.Fatal(err)
			}
			var got pb.ComputeLimitsResponse
			text := mustRun(t, "", append([]string{"compute", "--json", "--value", "speed_km_per_s", michelson}, c.args...)...)
			if err := protojson.Unmarshal([]byte(text), &got); err != nil {
				t.Fatal(err)
			}
			if !proto.Equal(&got, want) {
				t.Errorf("got  %v\nwant %v", &got, want)
			}
		})
	}
}

func TestComputeNamesWhatWasLeftOut(t *testing.T) {
	path := fileWith(t, "id;NO3;why\nA1;10,1;\nA2;9,8;\nA3;25,0;pipette broke\nA4;<0,5;\nA5;;\nA6;10,3;\nA7;9,9;\nA8;10,0;\n")
	text := mustRun(t, "", "compute", "--kind", "individuals", "--id", "id", "--value", "NO3", "--exclude", "why", "--exclude", "5=a bound only", path)
	for _, want := range []string{
		"8 results from column \"NO3\", lines 2 to 9", "decimal comma", "5 results used, 5 readings, 2 excluded", "PROVISIONAL",
		"   4  A3  25.0      pipette broke", "   5  A4  <0.5      a bound only", "1 row without a reading",
		// Moving ranges bridge neither the exclusions nor the empty row: 0.3, 0.4 and 0.1 remain.
		"3  moving ranges",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
	// (0.3 + 0.4 + 0.1)/3 over d2(2) = 2/√π, to the four decimals that give sigma four digits.
	want := fmt.Sprintf("published  %.4f", 0.8/3*math.Sqrt(math.Pi)/2)
	if !strings.Contains(text, want) {
		t.Errorf("the report does not say %q:\n%s", want, text)
	}
}

func TestComputeWithTargetsSaysSo(t *testing.T) {
	text := mustRun(t, "", "compute", "--kind", "individuals", "--centre", "299852.4", "--sigma", "79", "--upper-warning", "none", "--upper-action", "300100",
		"--criterion", "target", "--value", "speed_km_per_s", michelson)
	for _, want := range []string{"targets: centre and sigma are given", "upper action   300100.00  target", "upper warning       none  no such line: left out", "None is used: sigma is a target"} {
		if !strings.Contains(text, want) {
			t.Errorf("the report does not say %q:\n%s", want, text)
		}
	}
	if strings.Contains(text, "PROVISIONAL") {
		t.Error("targets are marked as provisional")
	}
}

func TestComputeDrawsThePicture(t *testing.T) {
	path := filepath.Join(t.TempDir(), "chart.svg")
	mustRun(t, "", "compute", "--kind", "individuals", "--value", "speed_km_per_s", "--rules", "nelson-1984", "--exclude", "15=late lamp", "--title", "Speed <1>", "--plot", path, michelson)
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	for d := xml.NewDecoder(bytes.NewReader(raw)); ; {
		if _, err := d.Token(); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatalf("the picture is no XML: %v", err)
		}
	}
	for _, want := range []string{"Speed &lt;1&gt;", "nelson-1984/1", "Moving range", "1 excluded", "Numbers below the axis are lines of the file"} {
		if !strings.Contains(string(raw), want) {
			t.Errorf("the picture does not say %q", want)
		}
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(path), ".plot-*")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}

// reading tells when it is first read from, and then says nothing until it is closed.
type silent struct {
	*io.PipeReader
	asked chan struct{}
}

func (s silent) Read(p []byte) (int, error) {
	select {
	case <-s.asked:
	default:
		close(s.asked)
	}
	return s.PipeReader.Read(p)
}

func TestInterruptEndsAReadThatWaits(t *testing.T) {
	r, w := io.Pipe()
	defer w.Close()
	in := silent{r, make(chan struct{})}
	ctx, cancel := context.WithCancel(context.Background())
	go func() {
		<-in.asked
		cancel()
	}()
	var errs bytes.Buffer
	env := &environment{Stdin: in, Stdout: io.Discard, Stderr: &errs, Now: time.Now}
	if got := run(ctx, env, []string{"compute", "--kind", "individuals", "-"}); got != exitFailure {
		t.Errorf("exit code: got %d, want %d", got, exitFailure)
	}
	if got, want := errs.String(), "limitary: standard input: interrupted\n"; got != want {
		t.Errorf("got %q, want %q", got, want)
	}
}

func TestProgressIsForPeople(t *testing.T) {
	var text strings.Builder
	text.WriteString("x\n")
	for i := range 150_000 {
		fmt.Fprintf(&text, "%d\n", i%7)
	}
	path := fileWith(t, text.String())
	for _, watched := range []bool{false, true} {
		var errs bytes.Buffer
		env := &environment{Stdout: io.Discard, Stderr: &errs, Now: time.Now, Interactive: watched}
		if code := run(context.Background(), env, []string{"judge", "--centre", "3", "--sigma", "2", path}); code != exitOK {
			t.Fatalf("exit code %d: %s", code, errs.String())
		}
		if got := strings.Contains(errs.String(), "reading results.csv: 65536 rows"); got != watched {
			t.Errorf("watched %v: progress shown: %v", watched, got)
		}
		if watched && !strings.HasSuffix(errs.String(), " \r") {
			t.Errorf("the progress stays on the screen: %q", errs.String())
		}
	}
}
