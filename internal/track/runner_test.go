package track_test

import (
	"bytes"
	"errors"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// TestStoredFormsReadBack reads the stored forms of random schedules back: verdicts to equal forms, states to equal
// continuations, and no part of a state as a whole one.
func TestStoredFormsReadBack(t *testing.T) {
	const schedules, opsMax, seed = 50, 30, 20260306
	states := 0
	for i := range schedules {
		random := rand.New(rand.NewPCG(seed, uint64(i)))
		s := drawSchedule(random.IntN, opsMax)
		m := newModel(s)
		if problems := m.run(s, census{}); len(problems) > 0 {
			t.Fatalf("seed %d, schedule %d: %q", seed, i, problems)
		}
		for lot, tr := range m.tracks {
			timeline := m.timeline(lot)
			for _, p := range tr.places {
				o, err := track.Decode(p.verdict)
				if err != nil {
					t.Fatal(err)
				}
				if got := o.Encode(); !bytes.Equal(got, p.verdict) {
					t.Fatalf("verdict %s reads back as %s", p.verdict, got)
				}
				if timeline.InForce(p.At) == nil {
					continue
				}
				states++
				for n := range p.state {
					if track.NewRunner(timeline, nil).Resume(p.At, p.state[:n]) == nil {
						t.Fatalf("seed %d, schedule %d: %d of the %d bytes of a state are taken for one", seed, i, n, len(p.state))
					}
				}
				if track.NewRunner(timeline, nil).Resume(p.At, append(slices.Clone(p.state), 0)) == nil {
					t.Fatalf("seed %d, schedule %d: a state and a byte more are taken for one", seed, i)
				}
			}
		}
	}
	if states == 0 {
		t.Fatal("no states")
	}
	if _, err := track.Decode([]byte(`{"s":`)); err == nil {
		t.Error("half a verdict reads back")
	}
}

func TestRunner(t *testing.T) {
	t.Run("lists the patterns on their way and begins with segments", func(t *testing.T) {
		b := newBench(t, location(rules.Spec{ID: "run", Kind: rules.SameSide, N: 4, Consequence: rules.Act}))
		b.do(op{kind: addMark, minute: 35, isBreak: true})
		b.series(-10, "11", "11", "11", "11", "11", "11", "11")
		runner := track.NewRunner(b.timeline(""), nil)
		var began []bool
		var have []int
		for _, p := range b.track("").places {
			it := p.Item
			if _, err := runner.Step(&it); err != nil {
				t.Fatal(err)
			}
			began = append(began, runner.Began())
			n := 0
			for _, progress := range runner.Progress() {
				n = progress.Have
			}
			have = append(have, n)
		}
		if want := []bool{false, true, false, false, false, true, false}; !slices.Equal(began, want) {
			t.Errorf("began %v, want %v", began, want)
		}
		if want := []int{0, 0, 2, 3, 3, 0, 2}; !slices.Equal(have, want) { // a complete one lacks the next point
			t.Errorf("%v of 4 points, want %v", have, want)
		}
	})
	t.Run("passes on what reading fails with", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "11")
		broken := errors.New("broken")
		resumed := track.NewRunner(b.timeline(""), func(chart.Role, int) ([]track.Ref, error) { return nil, broken })
		last := b.track("").places[2]
		if err := resumed.Resume(last.At, last.state); err != nil {
			t.Fatal(err)
		}
		next := b.item(&current{row: b.row(40, "11"), id: 9, revision: 1})
		if _, err := track.JudgeRegion(resumed, nil, func() (*track.Item, error) { return next, nil }); !errors.Is(err, broken) {
			t.Errorf("where earlier points cannot be read: %v, want %v", err, broken)
		}
		if _, err := track.JudgeRegion(track.NewRunner(b.timeline(""), nil), nil, func() (*track.Item, error) { return nil, broken }); !errors.Is(err, broken) {
			t.Errorf("where items cannot be read: %v, want %v", err, broken)
		}
		few := track.NewRunner(b.timeline(""), func(chart.Role, int) ([]track.Ref, error) { return []track.Ref{last.Ref}, nil })
		if err := few.Resume(last.At, last.state); err != nil {
			t.Fatal(err)
		}
		if _, err := few.Step(next); err == nil {
			t.Error("a window reaches back beyond the stored points, and nothing is said")
		}
	})
	t.Run("says which results newly ask for a stop", func(t *testing.T) {
		stop := rules.Spec{ID: "b", Kind: rules.Beyond, K: 1, M: 1, Z: 3, Consequence: rules.Stop}
		b := newBench(t, location(stop, threeOnASide))
		var stops []int64
		b.watch = func(_ *trackModel, _ stir, reg *track.Region) {
			for _, j := range reg.Items {
				if j.NewlyStops() {
					stops = append(stops, j.Item.ID)
				}
			}
		}
		want := func(ids ...int64) {
			t.Helper()
			if !slices.Equal(stops, ids) {
				t.Errorf("new stops at %v, want %v", stops, ids)
			}
			stops = nil
		}
		b.series(10, "11", "14", "14")
		want(2, 3)
		b.do(op{kind: amendReadings, n: 1, row: row{readings: []string{"9"}}}) // the verdict of 3 changes, its stop does not
		want()
		b.do(op{kind: amendReadings, n: 1, row: row{readings: []string{"14"}}})
		want(1)
	})
}
