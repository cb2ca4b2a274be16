package rules_test

import (
	"bytes"
	"flag"
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// A longer search: go test ./internal/rules -run BruteForce -cases 100000 -seed 1
var (
	caseCount = flag.Int("cases", 1500, "cases to judge by brute force")
	caseSeed  = flag.Uint64("seed", 20260201, "seed of these cases")
)

// fast shows a stretch of a case to the plan, in calls of at most chunk points, and gives hits numbered as the
// brute-force judge numbers them, and which observations were points.
func (c *testCase) fast(plan *rules.Plan, st *rules.State, from, chunk int, after func(i int)) (hits []bruteHit, proven []bool) {
	proven = make([]bool, len(c.series))
	for i := from; i < len(c.series); {
		o := c.series[i]
		if o.restart {
			plan.Reset(st, o.headStart)
		}
		first := i
		collect := func(h rules.Hit) {
			hits = append(hits, bruteHit{first + h.Point, h.Rule, h.Side, h.WindowBack, h.FirstBack})
		}
		if o.bound != decimal.Measured {
			proven[i] = plan.JudgeBound(st, o.x, o.bound, o.at, collect)
			i++
		} else {
			var xs []float64
			var at []rules.Scale
			for ; i < len(c.series) && len(xs) < chunk && c.series[i].bound == decimal.Measured && (i == first || !c.series[i].restart); i++ {
				xs, at = append(xs, c.series[i].x), append(at, c.series[i].at)
				proven[i] = true
			}
			if !c.unequal {
				at = nil
			}
			plan.Judge(st, xs, at, collect)
		}
		if after != nil {
			after(i - 1)
		}
	}
	return hits, proven
}

// check judges a case in every way and compares. It reports whether the case could be decided at all.
func (c *testCase) check(tb testing.TB) (decided bool, kinds []rules.Kind) {
	tb.Helper()
	plan, err := rules.Compile(c.trace, c.places, c.specs)
	if err != nil {
		tb.Fatalf("the case does not compile: %v\n%s", err, c)
	}
	brute := newBrute(c.trace, c.places, c.specs, c.headStart)
	var want []bruteHit
	wantProven := make([]bool, len(c.series))
	for i, o := range c.series {
		var found []bruteHit
		found, wantProven[i] = brute.judge(i, o)
		want = append(want, found...)
	}
	if brute.doubt {
		return false, nil
	}
	for _, h := range want {
		kinds = append(kinds, c.specs[h.Rule].Kind)
	}
	compare := func(how string, got []bruteHit, gotProven []bool, from int) {
		tb.Helper()
		tail := want[len(want)-countFrom(want, from):]
		if !slices.Equal(gotProven[from:], wantProven[from:]) {
			i := from
			for gotProven[i] == wantProven[i] {
				i++
			}
			tb.Fatalf("%s: observation %d is a point: got %t, want %t\n%s\n%s", how, i, gotProven[i], wantProven[i], seriesText(c.series, max(0, i-70), i+1), c)
		}
		if !slices.Equal(got, tail) {
			tb.Fatalf("%s: hits differ%s\n%s", how, firstDifference(got, tail, c.series), c)
		}
	}
	st := plan.Start(c.headStart)
	got, proven := c.fast(plan, st, 0, len(c.series), nil)
	compare("whole", got, proven, 0)

	forms := make([][]byte, len(c.series))
	reach := make([]int, len(c.series)) // before each observation
	progress := make([][]rules.Progress, len(c.series))
	st = plan.Start(c.headStart)
	next := plan.Reach(st)
	got, proven = c.fast(plan, st, 0, 1, func(i int) {
		forms[i], progress[i] = plan.AppendState(nil, st), plan.Progress(st)
		reach[i], next = next, plan.Reach(st)
	})
	compare("point by point", got, proven, 0)
	for _, h := range got {
		if h.WindowBack >= reach[h.Point] || h.FirstBack >= reach[h.Point] {
			tb.Fatalf("%v refers further back than the %d points of reach before it\n%s", h, reach[h.Point], c)
		}
	}
	// One state is used for every split, so that a load that leaves something behind shows.
	resumed := plan.Start(false)
	for i, form := range forms {
		rest, err := plan.LoadState(append(form[:len(form):len(form)], 0xAA), resumed)
		if err != nil || !bytes.Equal(rest, []byte{0xAA}) {
			tb.Fatalf("state after %d: rest %x, error %v", i, rest, err)
		}
		if again := plan.AppendState(nil, resumed); !bytes.Equal(again, form) {
			tb.Fatalf("state after %d: stored %x, loaded and stored again %x\n%s", i, form, again, c)
		}
		if got := plan.Progress(resumed); !slices.Equal(got, progress[i]) {
			tb.Fatalf("progress after %d: got %v from the stored state, want %v\n%s", i, got, progress[i], c)
		}
		got, proven := c.fast(plan, resumed, i+1, 7+i, nil)
		compare(fmt.Sprintf("resumed after %d", i), got, proven, i+1)
	}
	return true, kinds
}

// firstDifference shows the first point at which two lists of hits differ, and the series up to there.
func firstDifference(got, want []bruteHit, series []observation) string {
	n := 0
	for n < len(got) && n < len(want) && got[n] == want[n] {
		n++
	}
	point := len(series) - 1
	for _, rest := range [][]bruteHit{got[n:], want[n:]} {
		if len(rest) > 0 {
			point = min(point, rest[0].Point)
		}
	}
	at := func(hits []bruteHit) []bruteHit {
		return slices.DeleteFunc(slices.Clone(hits), func(h bruteHit) bool { return h.Point != point })
	}
	return fmt.Sprintf(" at %d\n got %v\nwant %v\n%s", point, at(got), at(want), seriesText(series, max(0, point-70), point+1))
}

func countFrom(hits []bruteHit, from int) (n int) {
	for _, h := range hits {
		if h.Point >= from {
			n++
		}
	}
	return n
}

func seriesText(series []observation, from, to int) string {
	var b bytes.Buffer
	for i, o := range series[from:to] {
		mark := [...]string{"", "<", ">"}[o.bound]
		if o.restart {
			mark = "| " + mark
		}
		fmt.Fprintf(&b, "%d: %s%v at %v/%v\n", from+i, mark, o.x, o.at.Centre, o.at.Sigma)
	}
	return b.String()
}

// TestFastJudgeEqualsBruteForce is the independent check of every windowed rule, EWMA and CUSUM, of bounds, segments,
// unequal scales, magnitudes, and of judging a tail from a stored state.
func TestFastJudgeEqualsBruteForce(t *testing.T) {
	t.Logf("seed %d", *caseSeed)
	r := rand.New(rand.NewPCG(*caseSeed, 1))
	decided, cases := 0, *caseCount
	completed := map[rules.Kind]int{}
	for range cases {
		c := drawCase(r.IntN)
		ok, kinds := c.check(t)
		if ok {
			decided++
		}
		for _, k := range kinds {
			completed[k]++
		}
	}
	t.Logf("%d of %d cases decided; hits by kind %v", decided, cases, completed)
	if decided < cases*9/10 {
		t.Errorf("only %d of %d cases can be decided", decided, cases)
	}
	for k := rules.Beyond; k <= rules.CUSUM; k++ {
		if completed[k] < 100 {
			t.Errorf("rules of kind %d completed %d times only; the cases show little", k, completed[k])
		}
	}
}

// TestStateForgetsAfterTheWindow: two segments whose latest Window points are the same have the same stored form,
// whatever came before, where no rule accumulates.
func TestStateForgetsAfterTheWindow(t *testing.T) {
	const seed = 20260202
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	compared := 0
	for range 3000 {
		a, other := drawCase(r.IntN), drawCase(r.IntN)
		a.specs = slices.DeleteFunc(a.specs, func(s rules.Spec) bool { return s.Kind == rules.EWMA || s.Kind == rules.CUSUM })
		plan, err := rules.Compile(a.trace, a.places, a.specs)
		if err != nil {
			t.Fatal(err)
		}
		if len(a.series) < plan.Window() {
			continue
		}
		a.series = slices.DeleteFunc(a.series, func(o observation) bool { return o.bound != decimal.Measured })
		common := a.series[max(0, len(a.series)-plan.Window()):]
		if len(common) < plan.Window() {
			continue
		}
		for i := range common {
			common[i].restart = false
		}
		b := *a
		b.series = slices.Concat(other.series, common)
		b.unequal = true
		for i := range other.series { // values of its own, scales that this trace may have
			b.series[i].at = a.series[0].at
		}
		stA, stB := plan.Start(false), plan.Start(false)
		a.fast(plan, stA, 0, 5, nil)
		b.fast(plan, stB, 0, 9, nil)
		if formA, formB := plan.AppendState(nil, stA), plan.AppendState(nil, stB); !bytes.Equal(formA, formB) {
			t.Fatalf("window %d: forms differ after the same %d points\n%x\n%x\n%s", plan.Window(), len(common), formA, formB, a)
		}
		compared++
	}
	if compared < 1000 {
		t.Errorf("only %d cases compared", compared)
	}
}

// TestEqualFormsJudgeAlike collects states met in a case by their form and continues each of them.
func TestEqualFormsJudgeAlike(t *testing.T) {
	const seed = 20260203
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	met := 0
	for range 400 {
		c := drawCase(r.IntN)
		c.specs = c.specs[:min(len(c.specs), 2)]
		plan, err := rules.Compile(c.trace, c.places, c.specs)
		if err != nil {
			t.Fatal(err)
		}
		states := map[string]*rules.State{}
		st := plan.Start(c.headStart)
		c.fast(plan, st, 0, 1, func(int) {
			form := string(plan.AppendState(nil, st))
			twin, known := states[form]
			if !known {
				states[form] = plan.Start(false)
				states[form].CopyFrom(st)
				return
			}
			met++
			one, two := plan.Start(false), plan.Start(false)
			one.CopyFrom(st)
			two.CopyFrom(twin)
			future := *c
			future.series = c.series[:min(len(c.series), 70)]
			hitsOne, _ := future.fast(plan, one, 0, 9, nil)
			hitsTwo, _ := future.fast(plan, two, 0, 9, nil)
			if !slices.Equal(hitsOne, hitsTwo) {
				t.Fatalf("equal forms %x continue differently\n%v\n%v\n%s", form, hitsOne, hitsTwo, c)
			}
		})
	}
	if met < 1000 {
		t.Errorf("equal forms met %d times only", met)
	}
}

// FuzzFastJudgeEqualsBruteForce lets the input draw the case: each draw takes one byte, two where one is too few.
func FuzzFastJudgeEqualsBruteForce(f *testing.F) {
	r := rand.New(rand.NewPCG(7, 7))
	for range 24 {
		b := make([]byte, 1500)
		for i := range b {
			b[i] = byte(r.Uint32())
		}
		f.Add(b)
	}
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, input []byte) {
		drawCase(func(n int) int {
			v := 0
			for size := n - 1; size > 0 && len(input) > 0; size >>= 8 {
				v, input = v<<8|int(input[0]), input[1:]
			}
			return v % n
		}).check(t)
	})
}
