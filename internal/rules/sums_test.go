package rules_test

import (
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// armsOf adds up both arms from their definition: the sum that ends at the newest point and began after any earlier one
// is largest where the recurrence last was 0, so S = max over j of Σ(z_i - k) from j on, or 0. The points since 0 are
// those of the longest tail that reaches this largest value.
func armsOf(zs []float64, sign, k float64) (sum float64, points int) {
	tail := 0.0
	for i := len(zs) - 1; i >= 0; i-- {
		tail += sign*zs[i] - k
		if tail > sum+1e-9 {
			sum, points = tail, len(zs)-i
		}
	}
	return sum, points
}

// averageOf weighs every point by λ(1-λ)^age, and gives the limit from the sum of the squared weights.
func averageOf(zs []float64, s rules.Spec) (average, limit float64) {
	squares := 0.0
	for i, z := range zs {
		weight := s.Lambda * math.Pow(1-s.Lambda, float64(len(zs)-1-i))
		average += weight * z
		squares += weight * weight
	}
	if s.Asymptotic {
		squares = s.Lambda / (2 - s.Lambda)
	}
	return average, s.Limit * math.Sqrt(squares)
}

func TestSumsAreThoseOfTheDefinition(t *testing.T) {
	const seed, centre, sigma = 20261201, 10, 0.5
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	asymptotic := ewma(0.1, 2.5)
	asymptotic.Asymptotic = true
	specs := []rules.Spec{ewma(0.2, 3), beyond(1, 1, 3), cusum(0.5, 5), asymptotic, onSides(cusum(0.25, 8), rules.LowerOnly)}
	plan := mustCompile(t, plain(centre, sigma), decimal.Unrounded, specs...)
	st := plan.Start(false)
	var zs []float64
	near := func(name string, got, want float64) {
		t.Helper()
		if math.Abs(got-want) > 1e-11 {
			t.Fatalf("%s after %d points: got %.15g, want %.15g", name, len(zs), got, want)
		}
	}
	longest := 0
	for range 400 {
		zs = append(zs, float64(r.IntN(4001)-1900)/1000)
		plan.Judge(st, []float64{centre + sigma*zs[len(zs)-1]}, nil, func(rules.Hit) {})
		sums := plan.Sums(st)
		if len(sums) != 4 {
			t.Fatalf("got %d sums, want 4 of 5 rules", len(sums))
		}
		for i, rule := range []int{0, 2, 3, 4} {
			s, spec := sums[i], specs[rule]
			if s.Rule != rule || s.Kind != spec.Kind {
				t.Fatalf("sum %d: got rule %d of kind %d, want rule %d of kind %d", i, s.Rule, s.Kind, rule, spec.Kind)
			}
			if spec.Kind == rules.EWMA {
				average, limit := averageOf(zs, spec)
				near("average", s.Average, average)
				near("limit", s.Limit, limit)
				continue
			}
			near("limit", s.Limit, spec.Interval)
			for _, arm := range []struct {
				side rules.Side
				sign float64
			}{{upper, 1}, {lower, -1}} {
				sum, points := armsOf(zs, arm.sign, spec.Reference)
				got := s.Of(arm.side)
				near("arm", got.Sum, sum)
				if got.Points != points {
					t.Fatalf("points after %d: got %d, want %d", len(zs), got.Points, points)
				}
				if points > 0 { // reference + sum/points is the mean of the points since 0
					near("shift", got.Shift(spec.Reference), arm.sign*decimal.Mean(zs[len(zs)-points:], decimal.Unrounded))
				} else if got.Shift(spec.Reference) != 0 {
					t.Fatalf("an arm of 0 is shifted by %v", got.Shift(spec.Reference))
				}
				longest = max(longest, points)
			}
			if s.Of(none) != (rules.Arm{}) {
				t.Fatal("an arm without a side")
			}
		}
	}
	if longest < 20 {
		t.Errorf("the longest sum has %d points; the test shows little", longest)
	}
}

func TestSumsBeforeTheFirstPoint(t *testing.T) {
	started := cusum(0.5, 4)
	started.HeadStart = 2
	plan := mustCompile(t, plain(0, 1), decimal.Unrounded, ewma(0.2, 3), started)
	for _, tc := range []struct {
		headStart bool
		sum       float64
	}{{false, 0}, {true, 2}} {
		want := []rules.Sum{
			{Rule: 0, Kind: rules.EWMA},
			{Rule: 1, Kind: rules.CUSUM, Limit: 4, Upper: rules.Arm{Sum: tc.sum}, Lower: rules.Arm{Sum: tc.sum}},
		}
		if got := plan.Sums(plan.Start(tc.headStart)); !reflect.DeepEqual(got, want) {
			t.Errorf("head start %t: got %+v, want %+v", tc.headStart, got, want)
		}
	}
	if got := mustCompile(t, plain(0, 1), decimal.Unrounded, beyond(1, 1, 3)); got.Sums(got.Start(false)) != nil {
		t.Error("a plan without EWMA and CUSUM has sums")
	}
}

// A bound lies between the point where a sum began and the next one, but adds nothing to it.
func TestABoundCountsAmongThePointsOfASum(t *testing.T) {
	plan := mustCompile(t, plain(0, 1), decimal.Unrounded, cusum(0.5, 5))
	st := plan.Start(false)
	plan.Judge(st, []float64{2, 1}, nil, func(rules.Hit) {})
	plan.JudgeBound(st, 4, decimal.Above, plan.Nominal(), func(rules.Hit) {})
	if got, want := plan.Sums(st)[0].Upper, (rules.Arm{Sum: 2, Points: 3}); got != want {
		t.Errorf("got %+v, want %+v", got, want)
	}
}

// Looking at the sums between points changes neither the stored form nor a hit.
func TestSumsChangeNothing(t *testing.T) {
	plan := mustCompile(t, plain(0, 1), decimal.Unrounded, cusum(0.5, 3), ewma(0.2, 2))
	xs := []float64{1, 1.5, -0.2, 2, 2, 2.5, -3, -3, -2}
	var looked, unlooked []hit
	a, b := plan.Start(false), plan.Start(false)
	for i := range xs {
		plan.Judge(a, xs[i:i+1], nil, collectInto(&looked, i))
		before := plan.AppendState(nil, a)
		plan.Sums(a)
		if !slices.Equal(plan.AppendState(nil, a), before) {
			t.Fatalf("after point %d the stored form has changed", i)
		}
		plan.Judge(b, xs[i:i+1], nil, collectInto(&unlooked, i))
	}
	wantHits(t, looked, unlooked...)
	if len(looked) == 0 {
		t.Error("no hits; the test shows nothing")
	}
}
