package main

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
)

// kindRows reads an example file apart from the code under test: columns by name.
func kindRows(t testing.TB, name string) map[string][]string {
	t.Helper()
	file, err := os.Open(filepath.Join(kindsDir, name))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	out := map[string][]string{}
	for i, column := range rows[0] {
		for _, r := range rows[1:] {
			out[column] = append(out[column], r[i])
		}
	}
	return out
}

func numbers(t testing.TB, texts []string) (xs []float64) {
	t.Helper()
	for _, s := range texts {
		x, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		xs = append(xs, x)
	}
	return xs
}

// wanted is what limits should be, by another route. Lower is NaN where there is no such line.
type wanted struct {
	trace                pb.TraceRole
	centre, lower, upper float64
	// at gives statistic and action lines of point i, on any one scale.
	at func(i int) (x, lower, upper float64)
	n  int
}

// beyond lists the points outside their lines; a line that is NaN has nothing beyond it.
func (w *wanted) beyond() (points []int) {
	for i := range w.n {
		if x, lower, upper := w.at(i); x < lower || x > upper {
			points = append(points, i)
		}
	}
	return points
}

// kindCase is one file and how limits are computed from it.
type kindCase struct {
	name, file    string
	columns, args []string
	want          func(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted
	// says are lines of the readable report, structure above all.
	says []string
	// without are headings it must not have.
	without []string
}

func TestEveryKindFromFileToVerdicts(t *testing.T) {
	for _, c := range kindCases() {
		t.Run(c.name, func(t *testing.T) {
			path := filepath.Join(kindsDir, c.file)
			call := slices.Concat([]string{"compute", path}, c.columns, c.args)
			raw := mustRun(t, "", append(call, "--json")...)
			var got pb.ComputeLimitsResponse
			if err := protojson.Unmarshal([]byte(raw), &got); err != nil {
				t.Fatal(err)
			}
			want := c.want(t, kindRows(t, c.file), &got)
			checkTrace(t, &got, &want)
			limits := fileWith(t, raw)
			var judged pb.EvaluateBatchResponse
			verdicts := mustRun(t, "", slices.Concat([]string{"judge", path, "--json", "--limits", limits}, c.columns)...)
			if err := protojson.Unmarshal([]byte(verdicts), &judged); err != nil {
				t.Fatal(err)
			}
			if hits := beyondAction(judged.Evaluations[0], want.trace); !slices.Equal(hits, want.beyond()) {
				t.Errorf("points beyond the action lines: got %v, want %v", hits, want.beyond())
			}
			checkText(t, mustRun(t, "", call...), &c)
		})
	}
}

func beyondAction(e *pb.EvaluationResult, trace pb.TraceRole) (points []int) {
	for _, h := range e.Hits {
		if h.Rule == "action-warning/2" && h.Trace == trace {
			points = append(points, int(h.Point))
		}
	}
	return points
}

// checkTrace compares the published lines. The centre and sigma are rounded once each, so a line three sigmas out may
// move by half a unit of the last digit for the centre, three halves for sigma and half for itself.
func checkTrace(t *testing.T, got *pb.ComputeLimitsResponse, want *wanted) {
	t.Helper()
	trace, within := got.Location, 0.51
	if want.trace == dispersion {
		trace, within = got.Dispersion, 0.51+rangeMean/2 // it follows from the rounded sigma
	}
	unit := math.Pow(10, -float64(got.PublishedDecimals))
	if math.Abs(trace.GetCentre()-want.centre) > within*unit {
		t.Errorf("centre: got %v, want %v", trace.GetCentre(), want.centre)
	}
	for name, l := range map[string]struct {
		line *pb.Line
		want float64
	}{"upper": {trace.UpperAction, want.upper}, "lower": {trace.LowerAction, want.lower}} {
		switch absent := l.line.GetBasis() == pb.Basis_BASIS_ABSENT; {
		case absent != math.IsNaN(l.want):
			t.Errorf("%s action line: absent is %v, want %v", name, absent, l.want)
		case !absent && math.Abs(l.line.GetValue()-l.want) > 3*unit:
			t.Errorf("%s action line: got %v, want %v", name, l.line.GetValue(), l.want)
		}
	}
}

func checkText(t *testing.T, text string, c *kindCase) {
	t.Helper()
	unwrapped := strings.Join(strings.Fields(text), " ")
	for _, s := range c.says {
		if !strings.Contains(unwrapped, strings.Join(strings.Fields(s), " ")) {
			t.Errorf("the report does not say %q:\n%s", s, text)
		}
	}
	for _, s := range c.without {
		if strings.Contains(text, "\n"+s) {
			t.Errorf("the report has %q", s)
		}
	}
	if strings.Contains(text, "NaN") || strings.Contains(text, "Inf") {
		t.Errorf("the report holds a figure that is none:\n%s", text)
	}
}

const (
	location   = pb.TraceRole_TRACE_ROLE_LOCATION
	dispersion = pb.TraceRole_TRACE_ROLE_DISPERSION
)

// Moments of the range of two normal readings, in sigmas: 2/√π and √(2 - 4/π) in closed form.
var (
	rangeMean  = 2 / math.Sqrt(math.Pi)
	rangeSigma = math.Sqrt(2 - 4/math.Pi)
)

func sum(xs []float64) (total float64) {
	for _, x := range xs {
		total += x
	}
	return total
}

// binomialMass and poissonMass are probabilities of single counts, by logarithms of factorials.
func binomialMass(n, p float64) func(float64) float64 {
	return func(k float64) float64 {
		return math.Exp(logFactorial(n) - logFactorial(k) - logFactorial(n-k) + k*math.Log(p) + (n-k)*math.Log1p(-p))
	}
}

func poissonMass(mean float64) func(float64) float64 {
	return func(k float64) float64 { return math.Exp(k*math.Log(mean) - mean - logFactorial(k)) }
}

func logFactorial(k float64) float64 { l, _ := math.Lgamma(k + 1); return l }

// exactLines gives the smallest count with at most 0.00135 above it and the largest with at most so much below it, by
// adding up; NaN where no count lies below.
func exactLines(mass func(float64) float64, most float64) (lower, upper float64) {
	above := 0.0
	for upper = most; upper > 0 && above+mass(upper) <= 0.00135; upper-- {
		above += mass(upper)
	}
	below := 0.0
	for lower = 0; below+mass(lower) <= 0.00135; lower++ {
		below += mass(lower)
	}
	if lower == 0 {
		lower = math.NaN()
	}
	return lower, upper
}

// movingRanges gives the centre and the sigma of single values.
func movingRanges(xs []float64) (centre, sigma float64) {
	ranges := 0.0
	for i := range xs[1:] {
		ranges += math.Abs(xs[i+1] - xs[i])
	}
	return sum(xs) / float64(len(xs)), ranges / float64(len(xs)-1) / rangeMean
}

// flat are lines that all points share.
func flat(trace pb.TraceRole, xs []float64, centre, lower, upper float64) wanted {
	return wanted{trace, centre, lower, upper, func(i int) (float64, float64, float64) { return xs[i], lower, upper }, len(xs)}
}
