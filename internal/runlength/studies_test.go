package runlength_test

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/rules"
	"limitary/internal/runlength"
)

// The three rates against a long stretch of the judge: within two bounds (four standard errors), each rule within a few.
func TestRatesAgreeWithTheJudge(t *testing.T) {
	t.Logf("seed %d", seed)
	we := mustSet(t, "western-electric-1956")
	either := outside(4, 1)
	either.OneSideOK = true
	upper := on(beyond(1, 1, 3), rules.UpperOnly)
	for name, r := range map[string]runlength.Request{
		"1984":         {Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, Ends: rules.Look, Shifts: []float64{0, 1}},
		"patterns":     {Location: one(either, rules.Spec{Kind: rules.Span, Z: 4}, beyond(3, 5, 1)), Shifts: []float64{0.5}},
		"individuals":  {Kind: chart.Individuals, Location: runlength.Trace{Rules: we}, Dispersion: one(upper), Shifts: []float64{0}},
		"means, range": {Kind: chart.XbarR, SubgroupSize: 4, Location: runlength.Trace{Rules: we}, Dispersion: one(upper), Shifts: []float64{1}},
	} {
		exact, err := runlength.LongRun(context.Background(), r)
		if err != nil {
			t.Fatal(err)
		}
		r.Simulate, r.Seed = true, seed
		simulated, err := runlength.LongRun(context.Background(), r)
		if err != nil {
			t.Fatal(err)
		}
		for i := range exact {
			e, s := exact[i], simulated[i]
			if e.Computation == runlength.Simulation || s.Computation != runlength.Simulation || e.FlaggedErrorBound > 1e-6 {
				t.Errorf("%s: computations %v and %v, bound %v", name, e.Computation, s.Computation, e.FlaggedErrorBound)
			}
			if math.Abs(e.PointsFlaggedPer1000-s.PointsFlaggedPer1000) > 2*s.FlaggedErrorBound {
				t.Errorf("%s: %v points flagged per 1000, simulated %v ± %v", name, e.PointsFlaggedPer1000, s.PointsFlaggedPer1000, s.FlaggedErrorBound)
			}
			if math.Abs(e.SignalsOpenedPer1000-s.SignalsOpenedPer1000) > 2*s.OpenedErrorBound {
				t.Errorf("%s: %v signals opened per 1000, simulated %v ± %v", name, e.SignalsOpenedPer1000, s.SignalsOpenedPer1000, s.OpenedErrorBound)
			}
			for j, rule := range e.Rules {
				other := s.Rules[j]
				near(t, name+" "+rule.ID+" opened", other.SignalsOpenedPer1000, rule.SignalsOpenedPer1000, 0.02+1/math.Sqrt(1+4000*rule.SignalsOpenedPer1000))
				if rule.ID != other.ID || rule.SignalsOpenedPer1000 > rule.PointsFlaggedPer1000*(1+1e-12) {
					t.Errorf("%s: rule %s opens %v signals on %v points", name, rule.ID, rule.SignalsOpenedPer1000, rule.PointsFlaggedPer1000)
				}
			}
		}
	}
}

// A single limit in closed form: p per point flagged, p(1-p') opened on each side, and 1/p to the first.
func TestThreeRatesOfOneLimit(t *testing.T) {
	rates, err := runlength.LongRun(context.Background(), runlength.Request{Location: one(beyond(1, 1, 2)), Shifts: []float64{1}})
	if err != nil {
		t.Fatal(err)
	}
	up, down := phi(-1), phi(-3)
	near(t, "flagged", rates[0].PointsFlaggedPer1000, 1000*(up+down), 1e-12)
	near(t, "opened", rates[0].SignalsOpenedPer1000, 1000*(up*(1-up)+down*(1-down)), 1e-12)
	work := rates[0].Workload(30, 4)
	near(t, "points a week", work.PointsPerWeek, 840, 1e-15)
	near(t, "signals a week", work.SignalsPerWeek, 840*(up*(1-up)+down*(1-down)), 1e-12)
	near(t, "flagged a week", work.PointsFlaggedPerWeek, 840*(up+down), 1e-12)
}

func TestMarginalTable(t *testing.T) {
	specs := mustSet(t, "nelson-1984")
	table, err := runlength.Marginals(context.Background(), runlength.Request{Location: runlength.Trace{Rules: specs}, Ends: rules.Look})
	if err != nil {
		t.Fatal(err)
	}
	if len(table) != len(specs) {
		t.Fatalf("%d lines, want %d", len(table), len(specs))
	}
	sum := 0.0
	saved := make([]float64, 5)
	for i, line := range table {
		sum += line.Added
		if line.ID != specs[i].ID || line.Added < 0 || len(line.Shifted) != 5 {
			t.Errorf("line %d: %s adds %v at %d shifts", i, line.ID, line.Added, len(line.Shifted))
		}
		for j, s := range line.Saved {
			if s < -1e-9 {
				t.Errorf("%s saves %v points at shift %d: a rule cannot delay a signal", line.ID, s, j)
			}
			saved[j] += s
		}
		if line.InControl.ARL > line.Alone.ARL*(1+1e-12) {
			t.Errorf("%s: ARL %v with the rules before, %v alone", line.ID, line.InControl.ARL, line.Alone.ARL)
		}
	}
	last := table[len(table)-1]
	near(t, "added up", sum, 1000/last.InControl.ARL, 1e-10)
	for j := range saved {
		near(t, "saved in all", saved[j], table[0].Shifted[j].ARL-last.Shifted[j].ARL, 1e-8)
	}
	near(t, "the whole set", last.InControl.ARL, mustRow(t, runlength.Request{Location: runlength.Trace{Rules: specs}, Ends: rules.Look}).ARL, 1e-12)
}

func TestChoiceRanksSubsets(t *testing.T) {
	specs := mustSet(t, "western-electric-1956")
	choice := runlength.ChoiceRequest{Request: runlength.Request{Location: runlength.Trace{Rules: specs}}, InControlARLMin: 130, Shift: 1}
	calls := 0
	choice.Progress = func(done, of int) {
		if calls++; done != calls || of != 15 {
			t.Errorf("progress %d of %d at call %d", done, of, calls)
		}
	}
	found, err := runlength.Choose(context.Background(), choice)
	if err != nil {
		t.Fatal(err)
	}
	if len(found) != 15+4 || calls != 15 {
		t.Fatalf("%d candidates and %d calls, want 15 subsets, three EWMAs and a CUSUM", len(found), calls)
	}
	for i, c := range found {
		if c.Within != (c.InControl.ARL >= 130-1e-9) {
			t.Errorf("%v %s: ARL %v, within %v", c.Rules, c.Label, c.InControl.ARL, c.Within)
		}
		if i > 0 && c.Within && (!found[i-1].Within || found[i-1].Shifted.ARL > c.Shifted.ARL || c.Rank < found[i-1].Rank) {
			t.Errorf("rank %d comes after rank %d", c.Rank, found[i-1].Rank)
		}
		if c.Label != "" && (!c.Within || c.InControl.ARL > 131) {
			t.Errorf("%s: ARL %v, want the budget of 130 and little more", c.Label, c.InControl.ARL)
		}
		if c.Label == "" { // the subset by itself
			var subset []rules.Spec
			for _, s := range specs {
				if slices.Contains(c.Rules, s.ID) {
					subset = append(subset, s)
				}
			}
			near(t, "subset", c.Shifted.ARL, mustRow(t, runlength.Request{Location: runlength.Trace{Rules: subset}, Shifts: []float64{1}}).ARL, 1e-12)
		}
	}
	ranks := map[int]int{}
	for _, c := range found {
		ranks[c.Rank]++
	}
	if len(ranks) != len(found) {
		t.Errorf("%d ranks for %d candidates: without a basis none are equal", len(ranks), len(found))
	}
	choice.Progress, choice.Basis = nil, &runlength.Basis{Points: 30}
	equal, err := runlength.Choose(context.Background(), choice)
	if err != nil {
		t.Fatal(err)
	}
	if last := equal[len(equal)-1].Rank; !(last < len(equal)) || equal[0].Rank != 1 {
		t.Errorf("limits from 30 points tell all %d candidates apart", len(equal))
	}
}

// Limits estimated from 30 single values: real computations of limits on random values, each with its own run length in
// closed form, against the distribution.
func TestRealisedRatesAreThoseOfComputedLimits(t *testing.T) {
	t.Logf("seed %d", seed)
	const points, bases = 30, 4000
	request := runlength.Request{Kind: chart.Individuals, Location: one(beyond(1, 1, 3))}
	got, err := runlength.Realise(context.Background(), runlength.RealisedRequest{Request: request, Basis: runlength.Basis{Points: points}, Shift: 2, PowerPoints: 4})
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(seed, 3))
	arls, powers := make([]float64, bases), make([]float64, bases)
	for i := range arls {
		q := limits.Request{Kind: chart.Individuals, SubgroupSize: 1}
		for range points {
			q.Groups = append(q.Groups, limits.Group{Readings: []float64{100 + r.NormFloat64()}, Decimals: limits.DecimalsUnknown})
		}
		l, err := limits.Compute(q)
		if err != nil {
			t.Fatal(err)
		}
		c, s := l.CentreUnrounded-100, l.SigmaUnrounded
		arls[i] = 1 / (phi(c-3*s) + phi(-c-3*s))
		powers[i] = 1 - math.Pow(1-phi(c-3*s-2)-phi(2-c-3*s), 4)
	}
	slices.Sort(arls)
	slices.Sort(powers)
	at := func(sorted []float64, p float64) float64 { return sorted[int(p*bases)] }
	// 4000 bases know a quantile of the ARL to some 5 %, and the estimate of sigma is a multiple of chi nearly only.
	near(t, "10 % of ARL", got.ARL.Low, at(arls, 0.1), 0.1)
	near(t, "median ARL", got.ARL.Median, at(arls, 0.5), 0.1)
	near(t, "90 % of ARL", got.ARL.High, at(arls, 0.9), 0.15)
	near(t, "10 % of power", got.Power.Low, at(powers, 0.1), 0.1)
	near(t, "median power", got.Power.Median, at(powers, 0.5), 0.05)
	near(t, "90 % of power", got.Power.High, at(powers, 0.9), 0.05)
	near(t, "rates are reciprocals", got.FalseAlarmsPer1000.High*got.ARL.Low, 1000, 1e-12)
	near(t, "nominal", got.Nominal.ARL, 1/(2*phi(-3)), 1e-12)
	if got.RelativeError > 0.01 {
		t.Errorf("thinning the grid changes figures by %v", got.RelativeError)
	}
}

// The number of points needed is the least that keeps the assurance.
func TestPointsNeeded(t *testing.T) {
	ask := func(points int) *runlength.Realised {
		got, err := runlength.Realise(context.Background(), runlength.RealisedRequest{
			Request: runlength.Request{Kind: chart.XbarS, SubgroupSize: 5, Location: one(beyond(1, 1, 3))},
			Basis:   runlength.Basis{Points: points, Estimator: limits.Pooled}, Shift: 1, Factor: 2,
		})
		if err != nil {
			t.Fatal(err)
		}
		return got
	}
	needed := ask(25).PointsNeeded
	if needed < 30 || needed > 2000 {
		t.Fatalf("%d subgroups needed; want some dozens to hundreds", needed)
	}
	nominal := 1000 * 2 * phi(-3)
	if got := ask(needed).FalseAlarmsPer1000.High; !(got <= 2*nominal*1.01) {
		t.Errorf("with %d subgroups the 90 %% point of the rate is %v, want at most %v", needed, got, 2*nominal)
	}
	if got := ask(needed * 9 / 10).FalseAlarmsPer1000.High; !(got > 2*nominal*0.99) {
		t.Errorf("with fewer subgroups the 90 %% point of the rate is %v, already at most %v", got, 2*nominal)
	}
}

func TestHeadStartFalseSignals(t *testing.T) {
	r := runlength.Request{Location: one(cusum(0.5, 4, 2)), Horizons: []int{20}}
	fresh := mustRow(t, r)
	if fresh.HeadStartWithin == nil || *fresh.HeadStartWithin != fresh.Within[0] {
		t.Fatalf("P(signal within 20) after a head start: %v, want %v", fresh.HeadStartWithin, fresh.Within[0])
	}
	r.Start = runlength.SegmentStart
	plain := mustRow(t, r)
	if plain.HeadStartWithin != nil || !(plain.Within[0] < *fresh.HeadStartWithin) {
		t.Errorf("without the head start: %v within 20 points, with it %v", plain.Within[0], *fresh.HeadStartWithin)
	}
	near(t, "without its head start it is an ordinary CUSUM", plain.ARL, mustRow(t, runlength.Request{Location: one(cusum(0.5, 4, 0))}).ARL, 1e-12)
}

func TestStudiesRefuse(t *testing.T) {
	limit := runlength.Request{Location: one(beyond(1, 1, 3))}
	eleven := make([]rules.Spec, 11)
	for i := range eleven {
		eleven[i] = sameSide(5 + i)
	}
	ctx := context.Background()
	for name, call := range map[string]func() error{
		"no budget": func() error {
			_, err := runlength.Choose(ctx, runlength.ChoiceRequest{Request: limit, Shift: 1})
			return err
		},
		"no shift": func() error {
			_, err := runlength.Choose(ctx, runlength.ChoiceRequest{Request: limit, InControlARLMin: 100})
			return err
		},
		"too many rules": func() error {
			_, err := runlength.Choose(ctx, runlength.ChoiceRequest{Request: runlength.Request{Location: one(eleven...)}, InControlARLMin: 100, Shift: 1})
			return err
		},
		"no basis": func() error {
			_, err := runlength.Realise(ctx, runlength.RealisedRequest{Request: limit, Shift: 1})
			return err
		},
		"factor 1": func() error {
			_, err := runlength.Realise(ctx, runlength.RealisedRequest{Request: limit, Basis: runlength.Basis{Points: 30}, Factor: 1})
			return err
		},
		"assurance 1": func() error {
			_, err := runlength.Realise(ctx, runlength.RealisedRequest{Request: limit, Basis: runlength.Basis{Points: 30}, Assurance: 1})
			return err
		},
		"wrong estimator": func() error {
			_, err := runlength.Realise(ctx, runlength.RealisedRequest{Request: limit, Basis: runlength.Basis{Points: 30, Estimator: limits.RBar}})
			return err
		},
		"no rates": func() error { _, err := runlength.LongRun(ctx, runlength.Request{}); return err },
		"no table": func() error { _, err := runlength.Marginals(ctx, runlength.Request{}); return err },
	} {
		if err, ok := call().(*runlength.Error); !ok || err.Problem == "" {
			t.Errorf("%s: got %v, want a *runlength.Error", name, err)
		}
	}
}
