package rules_test

import (
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/decimal"
	"limitary/internal/rules"
)

func progressOf(tb testing.TB, spec rules.Spec, xs ...float64) []rules.Progress {
	tb.Helper()
	plan := mustCompile(tb, plain(0, 1), decimal.Unrounded, spec)
	st := plan.Start(false)
	plan.Judge(st, xs, nil, func(rules.Hit) {})
	return plan.Progress(st)
}

func TestProgressListsPatternsAtLeastHalfComplete(t *testing.T) {
	want := func(side rules.Side, have, need int) []rules.Progress {
		return []rules.Progress{{Side: side, Have: have, Need: need}}
	}
	for _, tc := range []struct {
		name string
		spec rules.Spec
		xs   []float64
		want []rules.Progress
	}{
		{"8 of 9 on a side", sameSide(9), slices.Repeat([]float64{1}, 8), want(upper, 8, 9)},
		{"5 of 9 on the lower", sameSide(9), []float64{1, -1, -1, -1, -1, -1}, want(lower, 5, 9)},
		{"4 of 9 are less than half", sameSide(9), []float64{1, 1, 1, 1}, nil},
		{"a point on the centre ended it", sameSide(3), []float64{1, 1, 0}, nil},
		{"a run that goes on lacks the next one", sameSide(3), []float64{1, 1, 1, 1}, want(upper, 2, 3)},
		{"4 of 6 rising", trend(6), []float64{5, 1, 2, 3, 4}, want(upper, 4, 6)},
		{"one point is no trend", trend(2), []float64{1}, nil},
		{"7 of 14 alternating", alternating(14), []float64{0, 0, 1, 0, 1, 0, 1, 0}, want(none, 7, 14)},
		{"equal neighbours ended the alternation", alternating(4), []float64{0, 1, 0, 0}, nil},
		{"8 of 15 within", within(15, 1), []float64{2, 0, 0, 0, 0, 0, 0, 0, 0}, want(none, 8, 15)},
		{"4 of 8 outside", outside(8, 1), []float64{0, 2, -2, 2, 2}, want(none, 4, 8)},
		{"1 of 2 among the next three", beyond(2, 3, 2), []float64{2.5, 0}, want(upper, 1, 2)},
		{"too long ago for the next three", beyond(2, 3, 2), []float64{2.5, 0, 0}, nil},
		{"3 of 4 among the next five", beyond(4, 5, 1), []float64{-2, -2, 0, -2}, want(lower, 3, 4)},
		{"one point is no pattern", beyond(1, 1, 3), []float64{4}, nil},
		{"the side not watched", onSides(sameSide(3), rules.UpperOnly), []float64{-1, -1}, nil},
	} {
		t.Run(tc.name, func(t *testing.T) {
			if got := progressOf(t, tc.spec, tc.xs...); !slices.Equal(got, tc.want) {
				t.Errorf("got %v, want %v", got, tc.want)
			}
		})
	}
}

// TestProgressIsWhatTheNextPointsComplete: a run, trend or alternation with Have of Need completes at the (Need-Have)th
// point that goes on with it, and not before.
func TestProgressIsWhatTheNextPointsComplete(t *testing.T) {
	const seed = 20260204
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	met := 0
	for range 2000 {
		n := 3 + r.IntN(12)
		spec := []rules.Spec{sameSide(n), trend(n), within(n, 1)}[r.IntN(3)]
		plan := mustCompile(t, plain(0, 1), decimal.Unrounded, spec)
		st := plan.Start(false)
		var xs []float64
		level := 0.0
		for range 5 + r.IntN(30) {
			level += 0.1 * float64(r.IntN(5)-1)
			xs = append(xs, []float64{level, 0.5, -0.5, -level}[r.IntN(4)])
		}
		xs = append(xs, slices.Sorted(slices.Values(xs[:min(len(xs), n/2+r.IntN(n))]))...)
		plan.Judge(st, xs, nil, func(rules.Hit) {})
		for _, p := range plan.Progress(st) {
			met++
			next := xs[len(xs)-1]
			on := plan.Start(false)
			on.CopyFrom(st)
			for i := 1; i <= p.Need-p.Have; i++ {
				switch {
				case spec.Kind == rules.Within:
					next = 0
				case p.Side == upper:
					next = max(next, 0) + 1
				case p.Side == lower:
					next = min(next, 0) - 1
				}
				completed := false
				plan.Judge(on, []float64{next}, nil, func(h rules.Hit) { completed = completed || h.Side == p.Side })
				if want := i == p.Need-p.Have; completed != want {
					t.Fatalf("%+v after %v: after %d points more completed is %t, want %t", p, xs, i, completed, want)
				}
			}
		}
	}
	if met < 300 {
		t.Errorf("only %d patterns in progress", met)
	}
}
