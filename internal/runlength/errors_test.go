package runlength_test

import (
	"context"
	"errors"
	"math"
	"strings"
	"testing"
	"time"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength"
	"limitary/internal/runlength/effort"
)

func TestRefusals(t *testing.T) {
	limit := one(beyond(1, 1, 3))
	look := list(beyond(1, 1, 3))
	look[0].Consequence = rules.Look
	none := &runlength.Lines{LowerAction: math.Inf(-1), UpperAction: math.Inf(1), LowerWarning: -2, UpperWarning: 2}
	crossed := &runlength.Lines{LowerAction: 3, UpperAction: -3, LowerWarning: -2, UpperWarning: 2}
	line := one(rules.Spec{Kind: rules.BeyondLine, Line: rules.ActionLine})
	cases := map[string]struct {
		request runlength.Request
		reason  runlength.Reason
		says    []string // all of them in the message
	}{
		"no rules":               {runlength.Request{}, runlength.NoRules, []string{"rules"}},
		"k above m":              {runlength.Request{Location: one(beyond(4, 3, 1))}, runlength.BadField, []string{"location.rules[0].beyond.k", "4", "3"}},
		"lambda 0":               {runlength.Request{Location: one(ewma(0, 3))}, runlength.BadField, []string{"ewma.lambda", "0"}},
		"lambda above 1":         {runlength.Request{Location: one(ewma(1.2, 3))}, runlength.BadField, []string{"ewma.lambda", "1.2"}},
		"negative sigma ratio":   {runlength.Request{Location: limit, SigmaRatio: -1}, runlength.BadField, []string{"sigma_ratio", "-1", "0.01"}},
		"sigma ratio NaN":        {runlength.Request{Location: limit, SigmaRatio: math.NaN()}, runlength.BadField, []string{"sigma_ratio"}},
		"only milder rules":      {runlength.Request{Location: runlength.Trace{Rules: look}}, runlength.NothingFires, []string{"ACT"}},
		"a line that is absent":  {runlength.Request{Location: runlength.Trace{Rules: line.Rules, Lines: none}}, runlength.NothingFires, []string{"rules"}},
		"a limit out of reach":   {runlength.Request{Location: one(beyond(1, 1, 60))}, runlength.NothingFires, []string{"float64"}},
		"lines crossed":          {runlength.Request{Location: runlength.Trace{Rules: line.Rules, Lines: crossed}}, runlength.BadField, []string{"action", "3", "-3"}},
		"shift NaN":              {runlength.Request{Location: limit, Shifts: []float64{0, math.NaN()}}, runlength.BadField, []string{"shifts[1]"}},
		"shift too large":        {runlength.Request{Location: limit, Shifts: []float64{101}}, runlength.BadField, []string{"shifts[0]", "101", "100"}},
		"shift in large units":   {runlength.Request{Location: limit, SubgroupSize: 100, ShiftUnit: runlength.ProcessSigmas, Shifts: []float64{11}}, runlength.BadField, []string{"shifts[0]"}},
		"too many shifts":        {runlength.Request{Location: limit, Shifts: make([]float64, runlength.ShiftsMax+1)}, runlength.BadField, []string{"shifts", "65", "64"}},
		"horizon 0":              {runlength.Request{Location: limit, Horizons: []int{0}}, runlength.BadField, []string{"horizons_points[0]"}},
		"quantile 1":             {runlength.Request{Location: limit, Quantiles: []float64{1}}, runlength.BadField, []string{"quantiles[0]"}},
		"two traces, no kind":    {runlength.Request{Location: limit, Dispersion: limit}, runlength.BadField, []string{"dispersion"}},
		"subgroup of one":        {runlength.Request{Kind: chart.XbarR, SubgroupSize: 1, Location: limit}, runlength.BadField, []string{"subgroup_size"}},
		"a chart of counts":      {runlength.Request{Kind: chart.P, SubgroupSize: 1, Location: limit}, runlength.BadField, []string{"kind"}},
		"t without a variance":   {runlength.Request{Location: limit, Data: runlength.Data{Shape: runlength.StudentShape, Parameter: 2}}, runlength.BadField, []string{"degrees_of_freedom", "2"}},
		"correlation 1":          {runlength.Request{Location: limit, Data: runlength.Data{Correlation: 1}}, runlength.BadField, []string{"correlation"}},
		"negative rounding step": {runlength.Request{Location: limit, Data: runlength.Data{Step: -0.1}}, runlength.BadField, []string{"rounding_step"}},
		"too few simulated runs": {runlength.Request{Location: limit, SimulationRuns: 3}, runlength.BadField, []string{"simulation_runs", "3", "100"}},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			_, err := runlength.Compute(context.Background(), c.request)
			var refused *runlength.Error
			if !errors.As(err, &refused) {
				t.Fatalf("got %v, want a *runlength.Error", err)
			}
			if refused.Reason != c.reason {
				t.Errorf("reason %d, want %d (%v)", refused.Reason, c.reason, err)
			}
			for _, text := range c.says {
				if !strings.Contains(err.Error(), text) {
					t.Errorf("message %q does not say %q", err, text)
				}
			}
		})
	}
}

func TestCostIsLimited(t *testing.T) {
	r := runlength.Request{Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, Ends: rules.Look}
	_, err := runlength.With(effort.New(context.Background(), 100_000), r)
	var refused *runlength.Error
	if !errors.As(err, &refused) || refused.Reason != runlength.TooCostly {
		t.Errorf("got %v, want the cost limit", err)
	}
	// Building the machine counts too: many long windows of many zones.
	var many []rules.Spec
	for i := range 30 {
		many = append(many, beyond(5, 20+i, 0.1*float64(i)))
	}
	_, err = runlength.With(effort.New(context.Background(), 2_000_000_000), runlength.Request{Location: one(many...), SimulationRuns: 100})
	if err != nil && (!errors.As(err, &refused) || refused.Reason != runlength.TooCostly) {
		t.Errorf("many windows: got %v, want an answer or the cost limit", err)
	}
	meter := effort.New(context.Background(), 0)
	if _, err := runlength.With(meter, r); err != nil || meter.Done() < 100_000 {
		t.Errorf("without a limit of its own: %v after %d operations", err, meter.Done())
	}
}

func TestContextEndsTheWork(t *testing.T) {
	ended, cancel := context.WithDeadline(context.Background(), time.Unix(0, 0))
	defer cancel()
	long := runlength.Request{Location: one(cusum(0.5, 8, 0), sameSide(14)), SimulationRuns: 1_000_000}
	if _, err := runlength.Compute(ended, long); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("simulation: got %v, want the deadline", err)
	}
	choice := runlength.ChoiceRequest{Request: runlength.Request{Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, Ends: rules.Look}, InControlARLMin: 100, Shift: 1}
	if _, err := runlength.Choose(ended, choice); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("choice: got %v, want the deadline", err)
	}
}

// Combinations without an exact method answer by simulation and say so.
func TestOutOfReachIsSimulated(t *testing.T) {
	big := list(beyond(30, 60, 0)) // far too many windows to number
	for name, r := range map[string]runlength.Request{
		"CUSUM with run rules":    {Location: one(cusum(0.5, 4, 0), sameSide(8))},
		"two averages":            {Location: one(ewma(0.1, 2.7), ewma(0.4, 3))},
		"a long window":           {Location: runlength.Trace{Rules: big}},
		"trend of rounded points": {Location: one(trend(5)), Data: runlength.Data{Step: 0.5}},
		"correlated points":       {Location: one(beyond(1, 1, 2)), Data: runlength.Data{Correlation: 0.5}},
		"trend of moving ranges":  {Kind: chart.Individuals, Dispersion: one(trend(5))},
		"means of skewed data":    {Kind: chart.XbarR, SubgroupSize: 4, Location: one(beyond(1, 1, 2)), Data: runlength.Data{Shape: runlength.GammaShape, Parameter: 2}},
	} {
		r.SimulationRuns, r.Seed = 400, seed
		row := mustRow(t, r)
		if row.Computation != runlength.Simulation || row.Runs < 100 || !(row.StandardError > 0) || row.ErrorBound != 2*row.StandardError {
			t.Errorf("%s: %s, error bound %v; want a simulation with its standard error", name, row.Describe(), row.ErrorBound)
		}
		again := mustRow(t, r)
		if again.ARL != row.ARL {
			t.Errorf("%s: the same seed gave %v and %v", name, row.ARL, again.ARL)
		}
		r.Seed++
		if other := mustRow(t, r); other.ARL == row.ARL {
			t.Errorf("%s: another seed gave the same %v", name, row.ARL)
		}
	}
}

// Positively correlated points make a CUSUM cry wolf, and leave a single limit's rate as it is; the ARL of the latter grows.
func TestCorrelationMatters(t *testing.T) {
	sums := runlength.Request{Location: one(cusum(0.5, 4, 0)), SimulationRuns: 4000, Seed: seed, Data: runlength.Data{Correlation: 0.4}}
	correlated := mustRow(t, sums)
	sums.Data.Correlation = 0
	independent := mustRow(t, sums)
	if !(correlated.ARL < independent.ARL/3) {
		t.Errorf("CUSUM: correlated ARL %v, independent %v; want far fewer", correlated.ARL, independent.ARL)
	}
	rates, err := runlength.LongRun(context.Background(), runlength.Request{Location: one(beyond(1, 1, 2)), Seed: seed, Data: runlength.Data{Correlation: 0.6}})
	if err != nil {
		t.Fatal(err)
	}
	want := 2000 * phi(-2)
	if d := math.Abs(rates[0].PointsFlaggedPer1000 - want); d > 2*rates[0].FlaggedErrorBound {
		t.Errorf("points beyond 2: %v per 1000, want %v whatever the correlation (bound %v)", rates[0].PointsFlaggedPer1000, want, rates[0].FlaggedErrorBound)
	}
}
