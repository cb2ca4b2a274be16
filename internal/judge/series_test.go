package judge_test

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

// randomSeries draws values with ties on the lines, and missing ones.
func randomSeries(r *rand.Rand, n int) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		switch r.IntN(10) {
		case 0:
			xs[i] = math.NaN()
		case 1, 2:
			xs[i] = float64(7 + r.IntN(7)) // on a line
		default:
			xs[i] = 10 + r.NormFloat64()*1.4
		}
	}
	return xs
}

// individuals gives limits of both traces, so that a series and its points are judged by all that can be.
func individuals(tb testing.TB, places int) judge.Limits {
	tb.Helper()
	specs := append(set(tb, "nelson-1984"), rules.Spec{ID: "e", Kind: rules.EWMA, Consequence: rules.Act, Lambda: 0.2, Limit: 2.7},
		rules.Spec{ID: "c", Kind: rules.CUSUM, Consequence: rules.Act, Reference: 0.5, Interval: 4})
	return judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: places, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, specs...), trace(1.128, 0.853, beyond(1, 1, 3), sameSide(5), trend(4))}}
}

// TestSeriesEqualsPointByPoint: the quick way over a whole series gives what judging its values one by one gives.
func TestSeriesEqualsPointByPoint(t *testing.T) {
	const seed = 20260302
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	hits := 0
	for round := range 120 {
		l := individuals(t, []int{decimal.Unrounded, 0, 1, 3}[round%4])
		switch r.IntN(4) {
		case 0:
			l.Kind, l.Traces[chart.Dispersion] = chart.Given, nil
		case 1:
			l.Traces[chart.Dispersion] = nil
		}
		j := mustNew(t, l)
		xs := randomSeries(r, r.IntN(200))
		var want []judge.SeriesHit
		st := j.NewState()
		var at [chart.Roles][]int // the index of every point of each trace
		for i, x := range xs {
			pt := judge.Point{}
			if !math.IsNaN(x) {
				pt.Readings = []float64{x}
			}
			var v judge.Verdict
			j.Judge(st, pt, &v)
			for role, tv := range v.Traces {
				if tv.Point {
					at[role] = append(at[role], i)
				}
			}
			for _, h := range v.Hits {
				points := at[h.Role]
				want = append(want, judge.SeriesHit{Point: i, Role: h.Role, Rule: h.Rule, Side: h.Side,
					WindowFirst: points[len(points)-1-h.WindowBack], FirstCounting: points[len(points)-1-h.FirstBack]})
			}
		}
		if got := j.Series(xs); !slices.Equal(got, want) {
			t.Fatalf("series %v:\n got %+v\nwant %+v", xs, got, want)
		}
		hits += len(want)
	}
	if hits < 1000 {
		t.Errorf("only %d hits", hits)
	}
}

func TestSeriesOfNothing(t *testing.T) {
	j := mustNew(t, individuals(t, 2))
	for _, xs := range [][]float64{nil, {}, {math.NaN()}, {math.NaN(), math.NaN()}, {10}, {math.NaN(), 10}} {
		if got := j.Series(xs); len(got) != 0 {
			t.Errorf("%v: hits %v", xs, got)
		}
	}
	given := []float64{math.NaN(), 99, math.NaN()}
	want := slices.Clone(given)
	if got := j.Series(given); len(got) == 0 || fmt.Sprint(given) != fmt.Sprint(want) {
		t.Errorf("hits %v; the caller's values are now %v", got, given)
	}
}

// TestStateResumesAtEverySplit: judging a tail from the stored state gives what judging the whole gives, and a repeat
// judged aside leaves no trace.
func TestStateResumesAtEverySplit(t *testing.T) {
	const seed = 20260303
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for round := range 30 {
		l := individuals(t, 2)
		if round%2 == 1 {
			l.Kind, l.SubgroupSize, l.ProcessSigma = chart.XbarS, 3, 1.7
		}
		j := mustNew(t, l)
		var points []judge.Point
		for range 60 {
			pt := judge.Point{Break: r.IntN(20) == 0}
			for range l.SubgroupSize - r.IntN(l.SubgroupSize) {
				pt.Readings = append(pt.Readings, decimal.Round(10+1.5*r.NormFloat64(), 1))
			}
			switch r.IntN(12) {
			case 0:
				pt.Readings = nil
			case 1:
				pt.Bounds = slices.Repeat([]decimal.Bound{decimal.Bound(1 + r.IntN(2))}, len(pt.Readings))
			}
			points = append(points, pt)
		}
		var whole []string
		var forms [][]byte
		st := j.NewState()
		for i, pt := range points {
			whole = append(whole, fmt.Sprintf("%+v", verdictsOf(j, st, pt)[0]))
			forms = append(forms, j.AppendState(nil, st))
			var v judge.Verdict
			aside := points[(i+7)%len(points)]
			j.Aside(st, aside, &v)
			if after := j.AppendState(nil, st); !bytes.Equal(after, forms[i]) {
				t.Fatalf("a repeat judged aside changes the state from %x to %x", forms[i], after)
			}
			next := j.NewState()
			j.CopyState(next, st)
			if want := verdictsOf(j, next, aside)[0]; fmt.Sprintf("%+v", v) != fmt.Sprintf("%+v", want) {
				t.Fatalf("aside: got %+v, want what it would have as the next point, %+v", v, want)
			}
		}
		resumed := j.NewState()
		for i, form := range forms {
			if err := j.LoadState(form, resumed); err != nil {
				t.Fatal(err)
			}
			for k, v := range verdictsOf(j, resumed, points[i+1:]...) {
				if got := fmt.Sprintf("%+v", v); got != whole[i+1+k] {
					t.Fatalf("resumed after %d, result %d:\n got %s\nwant %s", i, i+1+k, got, whole[i+1+k])
				}
			}
			if final := j.AppendState(nil, resumed); !bytes.Equal(final, forms[len(forms)-1]) {
				t.Fatalf("resumed after %d: final state %x, want %x", i, final, forms[len(forms)-1])
			}
		}
	}
}

func TestLoadStateRefusesWhatItDidNotWrite(t *testing.T) {
	j := mustNew(t, individuals(t, 2))
	st := j.NewState()
	verdictsOf(j, st, measured(10), measured(11))
	form := j.AppendState(nil, st)
	for n := range form {
		if err := j.LoadState(form[:n], j.NewState()); err == nil {
			t.Errorf("the first %d of %d bytes are loaded", n, len(form))
		}
	}
	if err := j.LoadState(append(slices.Clone(form), 0), j.NewState()); err == nil {
		t.Error("a byte too many is loaded")
	}
	for at, wrong := range map[int]byte{0: 2, 9: 9} {
		bad := slices.Clone(form)
		bad[at] = wrong
		if err := j.LoadState(bad, j.NewState()); err == nil {
			t.Errorf("byte %d set to %d is loaded", at, wrong)
		}
	}
	notANumber := slices.Clone(form)
	for i := 1; i < 9; i++ {
		notANumber[i] = 0xFF
	}
	if err := j.LoadState(notANumber, j.NewState()); err == nil {
		t.Error("a reading that is not a number is loaded")
	}
}
