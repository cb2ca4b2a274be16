package judged_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/report/judged"
	"limitary/internal/resultfile"
	"limitary/internal/rules"
)

// table reads a file of results.
func table(t *testing.T, text string, o resultfile.Options) *resultfile.Table {
	t.Helper()
	got, err := resultfile.Read(strings.NewReader(text), o)
	if err != nil {
		t.Fatal(err)
	}
	return got
}

// limitsOf makes limits with the rules of a set on every trace.
func limitsOf(kind chart.Kind, set string) judge.Limits {
	s, _ := rules.SetByID(set)
	centre, sigma, spread, wide := 10.0, 1.0, 1.128, 0.853
	l := judge.Limits{Kind: kind, Places: decimal.Unrounded, ProcessSigma: 1}
	l.Traces[chart.Location] = &judge.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: s.Rules}
	if kind == chart.Individuals {
		l.SubgroupSize = 1
		l.Traces[chart.Dispersion] = &judge.Trace{Trace: chart.Trace{Centre: &spread, Sigma: &wide}, Rules: s.Rules}
	}
	return l
}

func judgeOf(t *testing.T, l judge.Limits) *judge.Judge {
	t.Helper()
	j, err := judge.New(l)
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// runGiven judges statistics as given beyond three sigmas.
func runGiven(t *testing.T, in *resultfile.Table, first int, each func(int, *judge.Verdict)) (*judged.Outcome, error) {
	t.Helper()
	j := judgeOf(t, limitsOf(chart.Given, "shewhart-1931"))
	return judged.Run(context.Background(), j, judged.RowsOf(j, in), first, each)
}

// Whole segments give what row by row gives, for random series with ties, breaks and context.
func TestSegmentsAgreeWithRows(t *testing.T) {
	const seed = 20260302
	rng := rand.New(rand.NewPCG(seed, 3))
	hits := 0
	for round := range 200 {
		kind := []chart.Kind{chart.Given, chart.Individuals}[round%2]
		var text strings.Builder
		text.WriteString("x,b\n")
		n := 1 + rng.IntN(120)
		for i := range n {
			mark := ""
			if rng.IntN(15) == 0 {
				mark = "yes"
			}
			fmt.Fprintf(&text, "%.1f,%s\n", 10+1.2*rng.NormFloat64()+float64(i%40)/30, mark)
		}
		in := table(t, text.String(), resultfile.Options{Values: []string{"x"}, Break: "b"})
		j := judgeOf(t, limitsOf(kind, "nelson-1984"))
		first := rng.IntN(n)
		whole, err := judged.Run(context.Background(), j, judged.RowsOf(j, in), first, nil)
		if err != nil {
			t.Fatal(err)
		}
		rows := 0
		single, err := judged.Run(context.Background(), j, judged.RowsOf(j, in), first, func(int, *judge.Verdict) { rows++ })
		if err != nil {
			t.Fatal(err)
		}
		hits += len(whole.Hits)
		if rows != n {
			t.Fatalf("seed %d, round %d: %d verdicts for %d rows", seed, round, rows, n)
		}
		if !reflect.DeepEqual(visible(whole), visible(single)) {
			t.Fatalf("seed %d, round %d:\nwhole  %+v\nsingle %+v", seed, round, visible(whole), visible(single))
		}
	}
	if hits < 1000 {
		t.Errorf("only %d hits: the series show nothing", hits)
	}
}

// visible is what a caller can see of an outcome.
func visible(o *judged.Outcome) string {
	var b strings.Builder
	for _, h := range o.Hits {
		fmt.Fprintln(&b, h.Row, h.Role, h.Rule, h.Side, h.WindowFirst, h.FirstCounting, h.Statistic)
	}
	fmt.Fprint(&b, o.Signals, o.Standings, o.Reasons, o.ByBound)
	return b.String()
}

func TestSignals(t *testing.T) {
	for _, c := range []struct {
		name, rows string
		want       []judged.Signal
	}{
		{"hits at neighbours are one", "14,\n15,\n14,\n", []judged.Signal{{Side: rules.Upper, FirstHit: 0, LastHit: 2, Hits: 3}}},
		{"the other side is another", "14,\n5,\n", []judged.Signal{{Side: rules.Upper, Hits: 1}, {Side: rules.Lower, FirstCounting: 1, FirstHit: 1, LastHit: 1, Hits: 1}}},
		{"a clear point ends one", "14,\n10,\n14,\n", []judged.Signal{{Side: rules.Upper, Hits: 1}, {Side: rules.Upper, FirstCounting: 2, FirstHit: 2, LastHit: 2, Hits: 1}}},
		{"no result ends none", "14,\n,\n14,\n", []judged.Signal{{Side: rules.Upper, FirstHit: 0, LastHit: 2, Hits: 2}}},
		{"a bound that proves nothing ends none", "14,\n<14,\n14,\n", []judged.Signal{{Side: rules.Upper, FirstHit: 0, LastHit: 2, Hits: 2}}},
		{"a bound that proves it goes on", "14,\n>20,\n14,\n", []judged.Signal{{Side: rules.Upper, FirstHit: 0, LastHit: 2, Hits: 3}}},
		{"a break ends one", "14,\n14,yes\n", []judged.Signal{{Side: rules.Upper, Hits: 1}, {Side: rules.Upper, FirstCounting: 1, FirstHit: 1, LastHit: 1, Hits: 1}}},
	} {
		t.Run(c.name, func(t *testing.T) {
			in := table(t, "x,b\n"+c.rows, resultfile.Options{Values: []string{"x"}, Break: "b"})
			got, err := runGiven(t, in, 0, nil)
			if err != nil {
				t.Fatal(err)
			}
			if !reflect.DeepEqual(got.Signals, c.want) {
				t.Errorf("got  %+v\nwant %+v", got.Signals, c.want)
			}
		})
	}
}

func TestWorstAndCounts(t *testing.T) {
	in := table(t, "x\n10\n<10\n14\n9\n", resultfile.Options{})
	got, err := runGiven(t, in, 1, nil)
	if err != nil {
		t.Fatal(err)
	}
	want := [judge.StopAt + 1]int{judge.NotJudged: 1, judge.Clear: 1, judge.StopAt: 1}
	if got.Standings != want || got.Reasons[judge.BoundProvesNothing] != 1 || got.Worst() != judge.StopAt {
		t.Errorf("got standings %v, reasons %v, worst %v", got.Standings, got.Reasons, got.Worst())
	}
	none, err := runGiven(t, table(t, "x\n<10\n", resultfile.Options{}), 0, nil)
	if err != nil || none.Worst() != judge.NotJudged {
		t.Errorf("nothing judged: got %v, %v, want NOT_JUDGED", none.Worst(), err)
	}
}

func TestCancelledRunStops(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	in := table(t, "x\n1\n2\n", resultfile.Options{})
	j := judgeOf(t, limitsOf(chart.Given, "shewhart-1931"))
	for _, each := range []func(int, *judge.Verdict){nil, func(int, *judge.Verdict) {}} {
		if _, err := judged.Run(ctx, j, judged.RowsOf(j, in), 0, each); err != context.Canceled {
			t.Errorf("got %v, want %v", err, context.Canceled)
		}
	}
}

// The table of which rules suit which trace: zone rules of several points and patterns of many points never a dispersion
// trace, runs and trends only ranges and standard deviations unless asked for.
func TestDispersionRules(t *testing.T) {
	nelson, _ := rules.SetByID("nelson-1984")
	for _, c := range []struct {
		kind  chart.Kind
		asked bool
		want  string
	}{
		{chart.Individuals, false, "nelson-1984/1"},
		{chart.Individuals, true, "nelson-1984/1 nelson-1984/2 nelson-1984/3 nelson-1984/4"},
		{chart.XbarR, false, "nelson-1984/1 nelson-1984/2 nelson-1984/3 nelson-1984/4"},
		{chart.XbarS, true, "nelson-1984/1 nelson-1984/2 nelson-1984/3 nelson-1984/4"},
		{chart.DuplicateRange, false, "nelson-1984/1"},
		{chart.RelativeRange, true, "nelson-1984/1 nelson-1984/2 nelson-1984/3 nelson-1984/4"},
	} {
		taken, left := judged.DispersionRules(c.kind, nelson.Rules, c.asked)
		var ids []string
		for _, s := range taken {
			ids = append(ids, s.ID)
		}
		if got := strings.Join(ids, " "); got != c.want || len(taken)+len(left) != len(nelson.Rules) {
			t.Errorf("%v, asked %v: got %q and %v, want %q", c.kind, c.asked, got, left, c.want)
		}
	}
}

func TestCountRules(t *testing.T) {
	warning, _ := rules.SetByID("action-warning")
	taken, left := judged.CountRules(warning.Rules)
	if len(taken) != 2 || len(left) != 1 || left[0] != "action-warning/3" {
		t.Errorf("got %v and %v, want the two lines, and the pattern left out", taken, left)
	}
}

// Rows of counts come with what was inspected: of the row, of all rows, or of the kind.
func TestRowsOfCounts(t *testing.T) {
	in := table(t, "n,k\n5,1\n,\n7,0\n", resultfile.Options{Values: []string{"k"}, Inspected: "n"})
	plain := table(t, "k,b\n1,\n,\n0,\n", resultfile.Options{Values: []string{"k"}})
	for _, c := range []struct {
		name string
		rows judged.Rows
		want []chart.Count
	}{
		{"of the row", judged.Rows{Table: in, Kind: chart.P, Size: 1}, []chart.Count{{Nonconforming: 1, Inspected: 5}, {}, {Inspected: 7}}},
		{"of all rows", judged.Rows{Table: plain, Kind: chart.U, Size: 1, Inspected: 2.5}, []chart.Count{{Nonconforming: 1, Inspected: 2.5}, {}, {Inspected: 2.5}}},
		{"one unit", judged.Rows{Table: plain, Kind: chart.C, Size: 1}, []chart.Count{{Nonconforming: 1, Inspected: 1}, {}, {Inspected: 1}}},
		{"the one size", judged.Rows{Table: plain, Kind: chart.NP, Size: 40}, []chart.Count{{Nonconforming: 1, Inspected: 40}, {}, {Inspected: 40}}},
	} {
		if err := c.rows.Check(); err != nil {
			t.Errorf("%s: %v", c.name, err)
		}
		for i, want := range c.want {
			pt := c.rows.Point(i)
			if there := want != (chart.Count{}); there != (pt.Count != nil) || there && *pt.Count != want || len(pt.Readings) > 0 {
				t.Errorf("%s, row %d: got %+v, want %+v", c.name, i, pt.Count, want)
			}
		}
	}
	if err := (&judged.Rows{Table: plain, Kind: chart.P, Size: 1}).Check(); err == nil || !strings.Contains(err.Error(), "line 2: nothing says how much was inspected") {
		t.Errorf("counts of nobody knows what: got %v", err)
	}
}
