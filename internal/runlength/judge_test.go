package runlength_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
	"limitary/internal/runlength"
)

const seed = 20260101

// drawn gives a random rule that a machine can be made for, with small windows so that it often fires.
func drawn(r *rand.Rand, order bool) rules.Spec {
	z := []float64{0, 0.5, 1, 1.5, 2}[r.IntN(5)]
	side := rules.Sides(r.IntN(3))
	kinds := 7
	if order {
		kinds = 9
	}
	switch r.IntN(kinds) {
	case 0, 1:
		m := 1 + r.IntN(6)
		return on(beyond(1+r.IntN(m), m, z), side)
	case 2:
		return on(sameSide(2+r.IntN(7)), side)
	case 3:
		return within(2+r.IntN(6), z+0.25)
	case 4:
		s := outside(2+r.IntN(5), z)
		s.OneSideOK = r.IntN(2) == 0
		return s
	case 5:
		return on(rules.Spec{Kind: rules.Span, Z: 2*z + 0.5}, side)
	case 6:
		return on(rules.Spec{Kind: rules.BeyondLine, Line: rules.LineKind(1 + r.IntN(2))}, side)
	case 7:
		return on(trend(3+r.IntN(3)), side)
	}
	return alternating(3 + r.IntN(4))
}

// The machines are compared with the judge point by point: random lists of rules, lines and points, some of them on lines.
func TestMachinesFireWhereTheJudgeDoes(t *testing.T) {
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	fired := 0
	for trial := range 400 {
		order, rounded := trial%2 == 0, trial%2 == 1 && trial%4 == 1
		var specs []rules.Spec
		for range 1 + r.IntN(4) {
			specs = append(specs, drawn(r, order))
		}
		specs = list(specs...)
		lines := runlength.Lines{LowerAction: -2.5, UpperAction: 3, LowerWarning: -1.5, UpperWarning: 2}
		if r.IntN(3) == 0 {
			lines.LowerAction = math.Inf(-1)
		}
		continuing := trial%3 == 0
		machine, err := runlength.Machine(specs, lines, rounded, continuing)
		if err != nil {
			t.Fatalf("%+v: %v", specs, err)
		}
		plan := compiled(t, specs, lines)
		state := plan.Start(false)
		for i := range 300 {
			x := 1.3 * r.NormFloat64()
			if rounded {
				x = math.Round(2*x) / 2
			}
			want := false
			plan.Judge(state, []float64{x}, nil, func(rules.Hit) { want = true })
			if got := machine(x); got != want {
				t.Fatalf("trial %d, point %d, value %v, rules %+v: machine fires %v, judge %v", trial, i, x, specs, got, want)
			}
			if want {
				fired++
				if !continuing {
					break
				}
			}
		}
	}
	if fired < 1000 {
		t.Errorf("only %d hits: the test compares too little", fired)
	}
}

func compiled(tb testing.TB, specs []rules.Spec, l runlength.Lines) *rules.Plan {
	tb.Helper()
	zero, unit := 0.0, 1.0
	line := func(z float64) chart.Line {
		if math.IsInf(z, 0) {
			return chart.Line{Basis: chart.Absent}
		}
		return chart.Line{Value: z, Basis: chart.Target}
	}
	plan, err := rules.Compile(chart.Trace{Centre: &zero, Sigma: &unit, LowerAction: line(l.LowerAction), UpperAction: line(l.UpperAction),
		LowerWarning: line(l.LowerWarning), UpperWarning: line(l.UpperWarning)}, decimal.Unrounded, specs)
	if err != nil {
		tb.Fatal(err)
	}
	return plan
}

// lengths plays a chart to its first hit, again and again, through the judge of package judge.
func lengths(tb testing.TB, l judge.Limits, runs int, reading func(*rand.Rand) []float64) (mean, standardError float64) {
	tb.Helper()
	j, err := judge.New(l)
	if err != nil {
		tb.Fatal(err)
	}
	r := rand.New(rand.NewPCG(seed, 2))
	state := j.NewState()
	var v judge.Verdict
	sum, squares := 0.0, 0.0
	for range runs {
		j.Reset(state, true)
		n := 0.0
		for v.Hits = nil; len(v.Hits) == 0; n++ {
			j.Judge(state, judge.Point{Readings: reading(r)}, &v)
		}
		sum, squares = sum+n, squares+n*n
	}
	mean = sum / float64(runs)
	return mean, math.Sqrt((squares/float64(runs) - mean*mean) / float64(runs))
}

// limitsOf gives published limits around centre 0 with process sigma 1.
func limitsOf(kind chart.Kind, size int, location, dispersion []rules.Spec) judge.Limits {
	l := judge.Limits{Kind: kind, SubgroupSize: size, Places: 9, ProcessSigma: 1}
	trace := func(centre, sigma float64, specs []rules.Spec) *judge.Trace {
		t := &judge.Trace{Rules: specs}
		t.Centre, t.Sigma = &centre, &sigma
		return t
	}
	scale := limits.Scale{LocationSigma: 1}
	if kind != chart.Given {
		scale, _ = limits.At(kind, 1, size)
	}
	if location != nil {
		l.Traces[chart.Location] = trace(0, scale.LocationSigma, location)
	}
	if dispersion != nil {
		l.Traces[chart.Dispersion] = trace(scale.DispersionCentre, scale.DispersionSigma, dispersion)
	}
	return l
}

// within3 fails where an exact value is not within three standard errors of a simulated one.
func within3(tb testing.TB, what string, exact runlength.Row, mean, standardError float64) {
	tb.Helper()
	if exact.Computation == runlength.Simulation {
		tb.Errorf("%s: %s; want an exact method", what, exact.Describe())
	}
	if d := (exact.ARL - mean) / standardError; math.Abs(d) > 3 {
		tb.Errorf("%s: exact %.6g, simulated %.6g ± %.2g, %.1f standard errors apart", what, exact.ARL, mean, standardError, d)
	}
}

// The full 1984 set: bounds below 1e-8, the same to 1e-8 with more terms of the series, and within three standard errors
// of the judge itself.
func TestNelsonsEightTests(t *testing.T) {
	t.Logf("seed %d", seed)
	specs := mustSet(t, "nelson-1984")
	shifts := []float64{0, 0.25, 0.5, 1, 1.5, 2, 3}
	rows := mustRows(t, runlength.Request{Location: runlength.Trace{Rules: specs}, Shifts: shifts, Ends: rules.Look})
	for i, row := range rows {
		what := fmt.Sprintf("shift %v", shifts[i])
		if !(row.ErrorBound < 1e-8*row.ARL) {
			t.Errorf("%s: bound %v, want below 1e-8 of %v", what, row.ErrorBound, row.ARL)
		}
		for _, terms := range []int{8, 20} {
			mean, bound, err := runlength.MeanWithTerms(specs, shifts[i], terms)
			if err != nil {
				t.Fatal(err)
			}
			near(t, fmt.Sprintf("%s with %d terms", what, terms), mean, row.ARL, 1e-9+bound)
		}
		shifted := func(r *rand.Rand) []float64 { return []float64{shifts[i] + r.NormFloat64()} }
		mean, se := lengths(t, limitsOf(chart.Given, 1, specs, nil), 10_000, shifted)
		within3(t, what, row, mean, se)
	}
	// The set-up patterns only ask for a look and end no run unless asked to: fewer rules, longer runs.
	milder := mustRow(t, runlength.Request{Location: runlength.Trace{Rules: specs}})
	if !(milder.ARL > rows[0].ARL+5) {
		t.Errorf("rules of consequence ACT and worse have ARL %v, all rules %v", milder.ARL, rows[0].ARL)
	}
}

// Individuals with moving ranges, both at three sigmas: near 105 (the figure is common knowledge of the trade; no source),
// by the judge and by a chain over 700 cells of the latest value.
func TestIndividualsWithMovingRangesJointly(t *testing.T) {
	upper := on(beyond(1, 1, 3), rules.UpperOnly)
	for _, shift := range []float64{0, 1} {
		what := fmt.Sprintf("shift %v", shift)
		row := mustRow(t, runlength.Request{Kind: chart.Individuals, Location: one(beyond(1, 1, 3)), Dispersion: one(upper), Shifts: []float64{shift}})
		if shift == 0 && math.Abs(row.ARL-105) > 1 {
			t.Errorf("ARL %v, want near 105", row.ARL)
		}
		near(t, what+": chain over cells", row.ARL, cells(t, shift, 300), 5e-4)
		shifted := func(r *rand.Rand) []float64 { return []float64{shift + r.NormFloat64()} }
		mean, se := lengths(t, limitsOf(chart.Individuals, 1, list(beyond(1, 1, 3)), list(upper)), 10_000, shifted)
		within3(t, what, row, mean, se)
	}
}

// cells gives the mean run length of individuals with moving ranges by a chain over equal cells, each standing for its
// middle. Its error falls with the square of their width.
func cells(tb testing.TB, shift float64, n int) float64 {
	tb.Helper()
	f, err := limits.Factors(2)
	if err != nil {
		tb.Fatal(err)
	}
	reach := f.RangeMean + 3*f.RangeSigma
	width := 6 / float64(n)
	p, v := make([]float64, n), make([]float64, n)
	for i := range p {
		lo := -3 + width*float64(i)
		p[i] = phi(lo+width-shift) - phi(lo-shift)
		v[i] = 1
	}
	// inside gives how much of cell j lies within reach of the middle of cell i.
	inside := func(i, j int) float64 {
		distance := width * math.Abs(float64(i-j))
		return min(1, max(0, (reach-distance)/width+0.5))
	}
	mean := 0.0
	for range 4000 { // v = 1 + Q v, by iteration
		next := make([]float64, n)
		prefix := make([]float64, n+1)
		for j := range p {
			prefix[j+1] = prefix[j] + p[j]*v[j]
		}
		k := int(reach/width + 1)
		for i := range next {
			lo, hi := max(0, i-k+2), min(n-1, i+k-2)
			next[i] = 1 + prefix[hi+1] - prefix[lo]
			for j := max(0, i-k-2); j < lo; j++ {
				next[i] += p[j] * v[j] * inside(i, j)
			}
			for j := hi + 1; j < min(n, i+k+3); j++ {
				next[i] += p[j] * v[j] * inside(i, j)
			}
		}
		v = next
		last := mean
		mean = 1
		for j := range p {
			mean += p[j] * v[j]
		}
		if math.Abs(mean-last) < 1e-9 {
			break
		}
	}
	return mean
}

// What has no published value is compared with the judge.
func TestExactMethodsAgreeWithTheJudge(t *testing.T) {
	t.Logf("seed %d", seed)
	we := mustSet(t, "western-electric-1956")
	upper := on(beyond(1, 1, 3), rules.UpperOnly)
	asymptotic := ewma(0.2, 2.4)
	asymptotic.Asymptotic = true
	cases := map[string]runlength.Request{
		"sides of trends":              {Location: one(beyond(1, 1, 3), trend(6), on(trend(5), rules.UpperOnly), sameSide(8)), Shifts: []float64{0.5}},
		"lines":                        {Location: runlength.Trace{Rules: mustSet(t, "action-warning"), Lines: &runlength.Lines{LowerAction: math.Inf(-1), UpperAction: 2.5, LowerWarning: -1.9, UpperWarning: 2.2}}, Ends: rules.Look},
		"sigma ratio":                  {Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, SigmaRatio: 1.4, Shifts: []float64{0.5}, Ends: rules.Look},
		"steady state, shift":          {Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, Start: runlength.SteadyState, Shifts: []float64{2}, Ends: rules.Look},
		"steady state, sigma":          {Location: one(trend(5), alternating(10)), Start: runlength.SteadyState, SigmaRatio: 0.7, Shifts: []float64{1}},
		"steady state, zones":          {Location: runlength.Trace{Rules: we}, Start: runlength.SteadyState, Shifts: []float64{1}},
		"rounded":                      {Location: runlength.Trace{Rules: we}, Data: runlength.Data{Step: 0.5}, Shifts: []float64{1}},
		"rounded off the lines":        {Location: runlength.Trace{Rules: we}, Data: runlength.Data{Step: 0.3}},
		"t":                            {Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, Data: runlength.Data{Shape: runlength.StudentShape, Parameter: 5}},
		"gamma":                        {Location: runlength.Trace{Rules: mustSet(t, "nelson-1984")}, Data: runlength.Data{Shape: runlength.GammaShape, Parameter: 3}},
		"widening EWMA":                {Location: one(ewma(0.2, 2.4))},
		"widening EWMA on one side":    {Location: one(on(ewma(0.3, 2), rules.LowerOnly)), Shifts: []float64{-0.3}},
		"EWMA with a limit":            {Location: one(ewma(0.3, 2.4), beyond(1, 1, 3))},
		"EWMA of t":                    {Location: one(asymptotic), Data: runlength.Data{Shape: runlength.StudentShape, Parameter: 6}},
		"EWMA from steady state":       {Location: one(asymptotic), Start: runlength.SteadyState, Shifts: []float64{1}},
		"CUSUM with a limit":           {Location: one(cusum(0.5, 3.5, 0), beyond(1, 1, 3))},
		"CUSUM with a head start":      {Location: one(cusum(0.5, 4, 2), beyond(1, 1, 3)), Shifts: []float64{0.5}},
		"CUSUM of wider points":        {Location: one(cusum(0.5, 4, 0)), SigmaRatio: 1.3},
		"CUSUM of gamma":               {Location: one(cusum(0.5, 3, 0)), Data: runlength.Data{Shape: runlength.GammaShape, Parameter: 3}},
		"lower CUSUM":                  {Location: one(on(cusum(0.5, 3, 2.5), rules.LowerOnly))},
		"lower CUSUM, steady":          {Location: one(on(cusum(0.5, 4, 2), rules.LowerOnly)), Start: runlength.SteadyState, Shifts: []float64{-1}},
		"individuals, runs on MR":      {Kind: chart.Individuals, Location: runlength.Trace{Rules: we}, Dispersion: one(upper, sameSide(8)), SigmaRatio: 1.2},
		"individuals, order":           {Kind: chart.Individuals, Location: one(beyond(1, 1, 3), trend(5)), Dispersion: one(upper), Shifts: []float64{1}},
		"individuals, steady":          {Kind: chart.Individuals, Location: one(beyond(1, 1, 3), trend(5)), Dispersion: one(upper), Start: runlength.SteadyState, Shifts: []float64{2}},
		"moving ranges alone":          {Kind: chart.Individuals, Dispersion: one(upper)},
		"means with ranges":            {Kind: chart.XbarR, SubgroupSize: 5, Location: runlength.Trace{Rules: we}, Dispersion: one(beyond(1, 1, 3), sameSide(8), trend(6)), Shifts: []float64{0.5}, SigmaRatio: 1.2},
		"means with standard dev.":     {Kind: chart.XbarS, SubgroupSize: 4, Location: runlength.Trace{Rules: we}, Dispersion: one(beyond(1, 1, 3), sameSide(8))},
		"ranges of a pair":             {Kind: chart.XbarR, SubgroupSize: 2, Dispersion: one(beyond(1, 1, 3)), SigmaRatio: 1.5},
		"only low standard deviations": {Kind: chart.XbarS, SubgroupSize: 10, Dispersion: one(on(beyond(2, 3, 2), rules.LowerOnly)), SigmaRatio: 0.7},
	}
	for name, r := range cases {
		t.Run(name, func(t *testing.T) {
			r.Horizons = []int{5, 40}
			exact := mustRow(t, r)
			r.Simulate, r.SimulationRuns, r.Seed = true, 10_000, seed
			simulated := mustRow(t, r)
			within3(t, name, exact, simulated.ARL, simulated.StandardError)
			near(t, "SDRL", exact.SDRL, simulated.SDRL, 0.08)
			for i, p := range exact.Within {
				se := math.Sqrt(p*(1-p)/float64(simulated.Runs)) + 1e-9
				if d := math.Abs(p-simulated.Within[i]) / se; d > 4 {
					t.Errorf("P(signal within %d): exact %v, simulated %v, %.1f standard errors apart", r.Horizons[i], p, simulated.Within[i], d)
				}
			}
			if exact.ErrorBound > 1e-6*exact.ARL {
				t.Errorf("bound %v of %v, want below 1e-6", exact.ErrorBound, exact.ARL)
			}
		})
	}
}

// The simulation itself draws subgroups by its own means; the judge's statistics from readings say the same.
func TestSubgroupsThroughTheJudge(t *testing.T) {
	location, dispersion := mustSet(t, "western-electric-1956"), list(beyond(1, 1, 3))
	for _, kind := range []chart.Kind{chart.XbarR, chart.XbarS} {
		row := mustRow(t, runlength.Request{Kind: kind, SubgroupSize: 3, Location: runlength.Trace{Rules: location}, Dispersion: runlength.Trace{Rules: dispersion}, SigmaRatio: 1.1})
		mean, se := lengths(t, limitsOf(kind, 3, location, dispersion), 8000, func(r *rand.Rand) []float64 {
			return []float64{1.1 * r.NormFloat64(), 1.1 * r.NormFloat64(), 1.1 * r.NormFloat64()}
		})
		within3(t, kind.String(), row, mean, se)
	}
}
