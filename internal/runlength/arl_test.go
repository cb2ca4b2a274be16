package runlength_test

import (
	"context"
	"encoding/csv"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"limitary/internal/rules"
	"limitary/internal/runlength"
	"limitary/testdata"
)

// arlRow is a row of testdata/arl.csv. Its computed column is printed to ten digits by programs that are not this one:
// chains by Gaussian elimination, integral equations by another quadrature, permutation recursions; see
// testdata/README.md. The published column is not used: it is recalled.
type arlRow struct {
	chart, what, side string
	shift, computed   float64
	method, note      string
}

func arlRows(tb testing.TB) (rows []arlRow) {
	tb.Helper()
	file, err := testdata.Files.Open("arl.csv")
	if err != nil {
		tb.Fatal(err)
	}
	defer file.Close()
	records, err := csv.NewReader(file).ReadAll()
	if err != nil {
		tb.Fatal(err)
	}
	for _, r := range records[1:] {
		shift, err1 := strconv.ParseFloat(r[3], 64)
		computed, err2 := strconv.ParseFloat(r[6], 64)
		if err1 != nil || err2 != nil {
			tb.Fatalf("row %q: %v, %v", r, err1, err2)
		}
		rows = append(rows, arlRow{r[0], r[1], r[2], shift, computed, r[7], r[9]})
	}
	return rows
}

// prefixes are rules by how a row of the file names them.
var prefixes = []struct {
	prefix string
	rules  []rules.Spec
}{
	{"beyond 3 sigma", list(beyond(1, 1, 3))},
	{"shift in units of the standard error", list(beyond(1, 1, 3))},
	{"2 of 3 beyond 2 sigma", list(beyond(2, 3, 2))},
	{"2 of 3 beyond 1.9307 sigma", list(beyond(2, 3, 1.9307))},
	{"4 of 5 beyond 1 sigma", list(beyond(4, 5, 1))},
	{"6 same side", list(sameSide(6))},
	{"7 same side", list(sameSide(7))},
	{"8 same side", list(sameSide(8))},
	{"9 same side", list(sameSide(9))},
	{"10 same side", list(sameSide(10))},
	{"15 in a row within 1 sigma", list(within(15, 1))},
	{"8 in a row beyond 1 sigma, either side", list(rules.Spec{Kind: rules.Outside, N: 8, Z: 1, OneSideOK: true})},
	{"6 points steadily", list(trend(6))},
	{"7 points steadily", list(trend(7))},
	{"8 points steadily", list(trend(8))},
	{"14 points alternating", list(alternating(14))},
	{"1-3s | 9 same side", list(beyond(1, 1, 3), sameSide(9))},
	{"1-3s | 7 same side", list(beyond(1, 1, 3), sameSide(7))},
	{"1-3s | 2-2s", list(beyond(1, 1, 3), beyond(2, 2, 2))},
	{"1-2s as a rejection rule", list(beyond(1, 1, 2))},
	{"Nelson tests 1-4", list(beyond(1, 1, 3), sameSide(9), trend(6), alternating(14))},
	{"C1 =", list(beyond(1, 1, 3))},
	{"C12 =", list(beyond(1, 1, 3), beyond(2, 3, 2))},
	{"C14 =", list(beyond(1, 1, 3), sameSide(8))},
	{"C15 =", list(beyond(1, 1, 3), beyond(2, 2, 2))},
	{"C123 =", list(beyond(1, 1, 3), beyond(2, 3, 2), beyond(4, 5, 1))},
	{"C1234 =", list(beyond(1, 1, 3), beyond(2, 3, 2), beyond(4, 5, 1), sameSide(8))},
	{"C7 =", list(beyond(1, 1, 3.09))},
	{"C79 =", list(beyond(1, 1, 3.09), sameSide(8))},
}

// rulesOf gives the rules a row is about.
func (r *arlRow) rulesOf() []rules.Spec {
	var a, b float64
	switch {
	case strings.HasPrefix(r.chart, "EWMA"):
		fmt.Sscanf(r.what, "lambda=%g L=%g", &a, &b)
		s := ewma(a, b)
		s.Asymptotic = true
		return list(s)
	case strings.HasPrefix(r.chart, "CUSUM tabular"):
		fmt.Sscanf(r.what, "k=%g h=%g", &a, &b)
		s := cusum(a, b, 0)
		if strings.Contains(r.chart, "FIR head start h/2") {
			s.HeadStart = b / 2
		}
		if r.side == "one-sided upper" {
			s.Sides = rules.UpperOnly
		}
		return list(s)
	}
	for _, p := range prefixes {
		if strings.HasPrefix(r.what, p.prefix) {
			return p.rules
		}
	}
	return nil
}

// printed is the relative rounding of a value printed to ten digits, and a little for the other program.
const printed = 1e-9

func TestARLsAreThoseOfOtherPrograms(t *testing.T) {
	compared, left := 0, map[string]bool{}
	for _, r := range arlRows(t) {
		specs := r.rulesOf()
		if strings.HasPrefix(r.chart, "per-window") || strings.Contains(r.chart, "Siegmund") {
			left[r.chart] = true // the tests below
			continue
		}
		if specs == nil {
			t.Errorf("row %q %q: the test knows no such rules", r.chart, r.what)
			continue
		}
		got := mustRow(t, runlength.Request{Location: runlength.Trace{Rules: specs}, Shifts: []float64{r.shift}})
		what := fmt.Sprintf("%s, %s, %s, shift %v", r.chart, r.what, r.side, r.shift)
		if strings.HasPrefix(r.method, "simulation, 2e6 runs, se 0.08") {
			if math.Abs(got.ARL-r.computed) > 3*0.08 {
				t.Errorf("%s: got %v, want %v within three standard errors", what, got.ARL, r.computed)
			}
		} else {
			near(t, what, got.ARL, r.computed, printed)
		}
		if got.Computation == runlength.Simulation || got.ErrorBound > 1e-10*got.ARL {
			t.Errorf("%s: %s; want an exact method with a bound below 1e-10", what, got.Describe())
		}
		compared++
	}
	if compared < 270 || len(left) != 2 {
		t.Errorf("%d rows compared and %v left to other tests; the file has changed", compared, left)
	}
}

// The per-window rows: probabilities that a window of points is a pattern. For runs, that is the rate of points flagged.
// For k of m the file counts windows whose newest point lies inside as well; its note has the judge's count.
func TestFlaggedRatesAreWindowProbabilities(t *testing.T) {
	judged := map[string]float64{ // printed in the notes of the file
		"test 5": 0.00204672451, "test 6": 0.00446568359,
	}
	tests := map[string]rules.Spec{
		"test 1": beyond(1, 1, 3), "test 2": sameSide(9), "test 3": trend(6), "test 4": alternating(14),
		"test 5": beyond(2, 3, 2), "test 6": beyond(4, 5, 1), "test 7": within(15, 1),
		"test 8": {Kind: rules.Outside, N: 8, Z: 1, OneSideOK: true},
	}
	done := 0
	for _, r := range arlRows(t) {
		name, _, _ := strings.Cut(r.what, ":")
		spec, ok := tests[name]
		if !strings.HasPrefix(r.chart, "per-window") || !ok {
			continue
		}
		want := r.computed
		if v, ok := judged[name]; ok {
			want = v
		}
		rates, err := runlength.LongRun(context.Background(), runlength.Request{Location: one(spec)})
		if err != nil {
			t.Fatal(err)
		}
		near(t, r.what, rates[0].PointsFlaggedPer1000/1000, want, 3e-9) // printed to 9 to 12 digits
		done++
	}
	if done != len(tests) {
		t.Errorf("%d of %d tests found in the file", done, len(tests))
	}
	// Both sides present: 1.01969e-4 in the note of test 8, printed to 6 digits.
	rates, err := runlength.LongRun(context.Background(), runlength.Request{Location: one(outside(8, 1))})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "test 8, both sides present", rates[0].PointsFlaggedPer1000/1000, 1.01969e-4, 5e-6)
}

// Siegmund's formula is an approximation; the rows' notes have the exact value beside it.
func TestCUSUMIsNearSiegmundsApproximation(t *testing.T) {
	for _, r := range arlRows(t) {
		if !strings.Contains(r.chart, "Siegmund") {
			continue
		}
		s := cusum(0.5, 5, 0)
		if r.side == "one-sided" {
			s.Sides = rules.UpperOnly
		}
		got := mustRow(t, runlength.Request{Location: one(s), Shifts: []float64{r.shift}})
		near(t, "Siegmund "+r.side, got.ARL, r.computed, 0.01)
		if r.shift == 1 {
			near(t, "the exact value in the note", got.ARL, 10.376, 5e-5)
		}
	}
}
