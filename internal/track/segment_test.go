package track_test

import (
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

func TestSegments(t *testing.T) {
	t.Run("a mark with a break splits a run and voiding it joins the parts", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: addMark, minute: 45, isBreak: true})
		b.wantTold("1 CHANGED", "2 OPENED")
		b.wantSignals("1 OPEN 1: 3-4", "2 OPEN 5: 7-7")
		b.do(op{kind: voidMark})
		b.wantTold("1 CHANGED", "2 MERGED")
		b.wantSignals("1 OPEN 1: 3-7", "2 MERGED into 1")
	})
	t.Run("a mark applies to a result at its own moment", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: addMark, minute: 50, isBreak: true})
		b.wantSignals("1 OPEN 1: 3-4", "2 OPEN 5: 7-7")
	})
	t.Run("a mark without a break or restart ends nothing", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: addMark, minute: 45})
		b.wantTold()
		if b.judged != 0 {
			t.Errorf("judged %d results, want none", b.judged)
		}
	})
	t.Run("a version of the same numbers continues the segment", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: approve, minute: 45})
		b.wantTold()
		b.wantSignals("1 OPEN 1: 3-7")
		b.wantVerdict(4, 1, judge.ActOn, judge.Judged)
		b.wantVerdict(5, 2, judge.ActOn, judge.Judged)
		b.series(80, "11")
		b.wantSignals("1 OPEN 1: 3-8")
	})
	t.Run("a result leaves the start of a segment that such a version continues", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.do(op{kind: addMark, minute: 30, isBreak: true})
		b.series(30, "11", "11", "11")
		b.do(op{kind: approve, minute: 35})
		b.wantSignals("1 OPEN 1: 3-3")
		b.do(op{kind: amendTime, n: 1, row: row{minute: 20}})
		b.wantSignals("1 RETRACTED")
	})
	t.Run("a version of other numbers ends the segment", func(t *testing.T) {
		look := threeOnASide
		look.Consequence = rules.Look
		b := newBench(t, location(threeOnASide), location(look))
		b.series(10, "11", "11", "11", "11", "11", "11", "11")
		b.do(op{kind: approve, template: 1, minute: 45})
		b.wantSignals("1 OPEN 1: 3-4", "2 OPEN 5: 7-7")
		b.wantVerdict(5, 2, judge.Clear, judge.Judged)
		b.wantVerdict(7, 2, judge.LookAt, judge.Judged)
	})
	t.Run("a version from the future leaves a running signal as it is", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: approve, minute: 1000})
		b.wantTold()
		b.wantSignals("1 OPEN 1: 3-7")
	})
	t.Run("withdrawing leaves nothing in force until the next version", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: approve, minute: 30})
		b.do(op{kind: approve, minute: 60})
		b.wantSignals("1 OPEN 1: 3-7")
		b.do(op{kind: withdraw, n: 1})
		b.wantVerdict(2, 1, judge.Clear, judge.Judged)
		for _, id := range []int64{3, 4, 5} {
			b.wantVerdict(id, 0, judge.NotJudged, judge.NoVersion)
		}
		b.wantVerdict(6, 3, judge.Clear, judge.Judged)
		b.wantSignals("1 RETRACTED")
	})
	t.Run("results before the first version are not judged until one is approved for them", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(-30, "11", "11", "11", "11")
		b.wantVerdict(1, 0, judge.NotJudged, judge.NoVersion)
		b.wantVerdict(4, 1, judge.Clear, judge.Judged)
		b.wantSignals()
		b.do(op{kind: approve, minute: -30})
		b.wantVerdict(3, 2, judge.ActOn, judge.Judged)
		b.wantSignals("1 OPEN 1: 3-4")
	})
	t.Run("a head start only where the version starts or a mark asks for it", func(t *testing.T) {
		// With no reference and a head start of 1.5 an arm passes 2 at the first point of +1, else at the third.
		cusum := rules.Spec{ID: "sum", Kind: rules.CUSUM, Interval: 2, HeadStart: 1.5, Sides: rules.UpperOnly, Consequence: rules.Act}
		b := newBench(t, location(cusum))
		b.series(10, "11", "9", "9", "9")
		b.wantSignals("1 OPEN 1: 1-1")
		b.series(50, "11")
		b.do(op{kind: addMark, minute: 50, isBreak: true})
		b.wantVerdict(5, 1, judge.Clear, judge.Judged)
		b.do(op{kind: addMark, minute: 50, restart: true})
		b.wantVerdict(5, 1, judge.ActOn, judge.Judged)
		b.do(op{kind: voidMark, n: 1})
		b.wantVerdict(5, 1, judge.Clear, judge.Judged)
	})
}

func TestPoints(t *testing.T) {
	t.Run("a repeat has its own verdict and is never a point", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11")
		repeat := b.row(25, "11")
		repeat.repeat = true
		b.do(op{kind: post, rows: []row{repeat}})
		b.wantVerdict(3, 1, judge.ActOn, judge.Judged)
		b.wantSignals()
		b.series(30, "9", "11")
		b.wantSignals()
		b.do(op{kind: amendRole, n: 3})
		b.wantSignals("1 OPEN 1: 3-3")
	})
	t.Run("a repeat on the other side does not end a run", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11")
		repeat := b.row(25, "9")
		repeat.repeat = true
		b.do(op{kind: post, rows: []row{repeat}})
		b.series(30, "11")
		b.wantSignals("1 OPEN 1: 4-4")
	})
	t.Run("a void in the middle joins two runs", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "9", "11")
		b.wantSignals()
		b.do(op{kind: void, n: 3})
		b.wantVerdict(3, 0, judge.NotJudged, judge.Voided)
		b.wantSignals("1 OPEN 1: 4-4")
	})
	t.Run("a result whose bound proves nothing neither counts nor breaks", func(t *testing.T) {
		b := newBench(t, location(rules.Spec{ID: "b", Kind: rules.Beyond, K: 1, M: 1, Z: 1, Consequence: rules.Stop}, threeOnASide))
		b.series(10, "10.5", "10.5", "<12", "10.5")
		b.wantVerdict(3, 1, judge.NotJudged, judge.BoundProvesNothing)
		b.wantSignals("1 OPEN 1: 4-4")
	})
	t.Run("equal times are ordered by run, position, source and source id, whenever they come", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		rows := []row{ // in order; odd numbers have the later source
			{n: 2, minute: 10}, {n: 1, minute: 10}, {n: 4, minute: 10, position: 1}, {n: 8, minute: 10, run: "r"}, {n: 6, minute: 10, run: "r", position: 2},
			{n: 3, minute: 10, run: "r", position: 2}, {n: 7, minute: 10, run: "r1"}, {n: 5, minute: 11},
		}
		for i := range rows {
			rows[i].readings = []string{"11"}
		}
		for _, i := range []int{4, 0, 7, 2, 5, 1, 6, 3} {
			b.do(op{kind: post, rows: rows[i : i+1]})
		}
		want := make([]int64, len(rows))
		for i, r := range rows {
			want[i] = b.results[r.n].id
		}
		if got := b.order(); !slices.Equal(got, want) {
			t.Errorf("order %v, want %v", got, want)
		}
	})
	t.Run("a late result changes the next moving range too", func(t *testing.T) {
		range2 := rules.Spec{ID: "r", Kind: rules.Beyond, K: 1, M: 1, Z: 1, Sides: rules.UpperOnly, Consequence: rules.Act}
		b := newBench(t, [2][]rules.Spec{{threeOnASide}, {range2}})
		b.series(10, "9", "12", "12", "12")
		b.wantSignals("1 OPEN 2: 2-2", "2 OPEN 2: 4-4")
		b.do(op{kind: post, rows: []row{b.row(15, "10.5")}})
		o, _ := b.verdict(2)
		if got := o.Traces[chart.Dispersion].Statistic; got != 1.5 {
			t.Errorf("moving range %v, want 1.5", got)
		}
		b.wantSignals("1 RETRACTED", "2 OPEN 5: 3-4")
		if o, _ := b.verdict(1); o.Traces[chart.Dispersion].Point {
			t.Error("the first result of a segment has a moving range")
		}
	})
	t.Run("a result that leaves or moves among equal ones changes the windows behind a void", func(t *testing.T) {
		for _, o := range []op{{kind: amendLot, n: 4, row: row{lot: "other"}}, {kind: amendTime, n: 4, row: row{minute: 5}}} {
			// What is remembered after the void is the same with 4 and without it; the window of 6 is not.
			b := newBench(t, location(threeOnASide))
			b.series(10, "11", "11", "11", "11", "11")
			b.do(op{kind: void, n: 5})
			b.series(60, "11")
			b.do(o)
			if verdict, _ := b.verdict(6); len(verdict.Hits) != 1 || verdict.Hits[0].WindowFirst.ID != 2 {
				t.Errorf("after %s result 6 has hits %+v, want one with a window from 2", o, verdict.Hits)
			}
		}
	})
	t.Run("a less-than result takes its moving range and the next one away", func(t *testing.T) {
		one := rules.Spec{ID: "b", Kind: rules.Beyond, K: 1, M: 1, Z: 1, Sides: rules.UpperOnly, Consequence: rules.Act}
		b := newBench(t, [2][]rules.Spec{{one}, {one}})
		b.series(10, "9", "10", "10")
		b.do(op{kind: amendReadings, n: 2, row: row{readings: []string{"<9"}}})
		for _, id := range []int64{2, 3} {
			if o, _ := b.verdict(id); o.Traces[chart.Dispersion].Point || !o.Traces[chart.Location].Point {
				t.Errorf("result %d: %+v, want a point of the location trace only", id, o.Traces)
			}
		}
	})
}

func TestMovesBetweenTracks(t *testing.T) {
	b := newBench(t, location(threeOnASide))
	for i := range 4 {
		r := b.row(10+10*i, "11")
		r.lot = "A"
		b.do(op{kind: post, rows: []row{r}})
	}
	text := func(lot string) string {
		for _, s := range b.track(lot).signals {
			if s.live() {
				return episodeText(&s.Episode)
			}
		}
		return ""
	}
	if text("A") == "" {
		t.Fatal("no signal on the first track")
	}
	for n := 1; n <= 3; n++ {
		b.do(op{kind: amendLot, n: n, row: row{lot: "B"}})
	}
	if a, other := text("A"), text("B"); a != "" || other == "" {
		t.Errorf("signals %q and %q, want one on the second track only", a, other)
	}
	if s := b.track("A").signals[1]; s.status != "RETRACTED" {
		t.Errorf("the signal of the first track is %s, want RETRACTED", s.status)
	}
}
