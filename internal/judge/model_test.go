package judge_test

import (
	"bytes"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// kindsWithModels are limits of every kind that judges by more than process sigma, with a generator of its points.
func kindsWithModels() map[string]struct {
	limits judge.Limits
	point  func(r *rand.Rand) judge.Point
} {
	fours := []rules.Spec{beyond(1, 1, 3), beyond(2, 3, 2), sameSide(4), trend(4)}
	one := func(centre, sigma float64, m chart.Model, k chart.Kind, size int) judge.Limits {
		l := judge.Limits{Kind: k, SubgroupSize: size, Places: 6, Model: m}
		l.Traces[chart.Location] = trace(centre, sigma, append([]rules.Spec(nil), fours...)...)
		return l
	}
	count := func(mean float64, sizes ...float64) func(r *rand.Rand) judge.Point {
		return func(r *rand.Rand) judge.Point {
			n := sizes[r.IntN(len(sizes))]
			x := math.Round(math.Min(n*50, math.Abs(mean+r.NormFloat64()*math.Sqrt(mean)*1.5)))
			return judge.Point{Count: &chart.Count{Nonconforming: math.Min(x, n*50), Inspected: n}}
		}
	}
	items := func(mean float64, sizes ...float64) func(r *rand.Rand) judge.Point {
		return func(r *rand.Rand) judge.Point {
			n := sizes[r.IntN(len(sizes))]
			return judge.Point{Count: &chart.Count{Nonconforming: math.Min(n, math.Round(math.Abs(mean+3*r.NormFloat64()))), Inspected: n}}
		}
	}
	readings := func(size int, draw func(r *rand.Rand) float64) func(r *rand.Rand) judge.Point {
		return func(r *rand.Rand) judge.Point {
			pt := judge.Point{Material: []string{"low", "high", "unknown"}[r.IntN(3)]}
			for range 1 + r.IntN(size) {
				pt.Readings = append(pt.Readings, decimal.Round(draw(r), 3))
			}
			return pt
		}
	}
	normal := func(centre, sigma float64) func(r *rand.Rand) float64 {
		return func(r *rand.Rand) float64 { return centre + sigma*r.NormFloat64() }
	}
	runs := one(10, math.Hypot(0.3, 0.2/math.Sqrt(3)), chart.Model{BetweenSigma: 0.3}, chart.RunMeans, 3)
	runs.ProcessSigma = 0.2
	runs.Traces[chart.Dispersion] = trace(0.177, 0.092, beyond(1, 1, 3))
	logs := one(1, 0.5, chart.Model{Transform: chart.Transform{Kind: chart.Log, Offset: 0.1}}, chart.Individuals, 1)
	logs.ProcessSigma = 0.5
	logs.Traces[chart.Dispersion] = trace(0.56, 0.42, beyond(1, 1, 3))
	roots := one(1, 0.5, chart.Model{Transform: chart.Transform{Kind: chart.SquareRoot}}, chart.XbarR, 2)
	roots.ProcessSigma = 0.7
	levels := one(0, 1, chart.Model{Levels: []chart.Level{{Material: "low", Reference: 2, Sigma: 0.1}, {Material: "high", Reference: 20, Sigma: 1.5}}}, chart.Individuals, 1)
	levels.ProcessSigma = 1
	duplicates := judge.Limits{Kind: chart.DuplicateRange, SubgroupSize: 2, Places: 4, ProcessSigma: 0.1,
		Model: chart.Model{Spread: &chart.Spread{Bands: []chart.Band{{From: 0, Sigma: 0.1}, {From: 10, Sigma: 0.3}}}}}
	duplicates.Traces[chart.Dispersion] = trace(0.1128, 0.0853, beyond(1, 1, 3))
	relative := judge.Limits{Kind: chart.RelativeRange, SubgroupSize: 2, Places: 4, ProcessSigma: 4,
		Model: chart.Model{Spread: &chart.Spread{AbsoluteBelow: 1, AbsoluteSigma: 0.05}}}
	relative.Traces[chart.Dispersion] = trace(4.5135, 3.4101, beyond(1, 1, 3))
	exact := chart.Model{CountMethod: chart.Exact, Inspected: 100}
	return map[string]struct {
		limits judge.Limits
		point  func(r *rand.Rand) judge.Point
	}{
		"p exact":    {one(0.04, 0.0196, exact, chart.P, 1), items(4, 50, 100, 200)},
		"p normal":   {one(0.04, 1.4*0.0196, chart.Model{CountMethod: chart.Normal, Inspected: 100, Inflation: 1.4}, chart.P, 1), items(4, 50, 100, 200)},
		"np":         {one(4, 1.96, exact, chart.NP, 100), items(4, 100)},
		"c":          {one(4, 2, chart.Model{CountMethod: chart.Exact, Inspected: 1}, chart.C, 1), count(4, 1)},
		"u":          {one(2, math.Sqrt(1.16), chart.Model{CountMethod: chart.Normal, Inspected: 2, BetweenSigma: 0.4}, chart.U, 1), count(4, 1, 2, 2.5)},
		"run means":  {runs, readings(3, normal(10, 0.5))},
		"log":        {logs, readings(1, normal(2.5, 2))},
		"root":       {roots, readings(2, normal(1.5, 1.5))},
		"levels":     {levels, readings(1, normal(5, 5))},
		"duplicates": {duplicates, readings(2, normal(9, 0.2))},
		"relative":   {relative, readings(2, normal(1, 0.1))},
	}
}

// TestModelStatesResume stores and resumes the state after every point of every kind, and judges each as if nothing had
// happened.
func TestModelStatesResume(t *testing.T) {
	for name, k := range kindsWithModels() {
		t.Run(name, func(t *testing.T) {
			r := rand.New(rand.NewPCG(7, 11))
			j := mustNew(t, k.limits)
			whole, resumed := j.NewState(), j.NewState()
			hits, unjudged := 0, 0
			for i := range 400 {
				pt := k.point(r)
				var want, got judge.Verdict
				j.Judge(whole, pt, &want)
				stored := j.AppendState(nil, resumed)
				again := j.NewState()
				if err := j.LoadState(stored, again); err != nil {
					t.Fatal(err)
				}
				if resumed = again; !bytes.Equal(stored, j.AppendState(nil, resumed)) {
					t.Fatalf("point %d: the state is stored differently after resuming", i)
				}
				j.Judge(resumed, pt, &got)
				if len(want.Hits)+len(got.Hits) == 0 {
					want.Hits, got.Hits = nil, nil
				}
				if !reflect.DeepEqual(want, got) {
					t.Fatalf("point %d, %+v: resumed %+v, want %+v", i, pt, got, want)
				}
				hits += len(want.Hits)
				if want.Standing == judge.NotJudged {
					unjudged++
				}
			}
			if hits == 0 || unjudged == 400 {
				t.Fatalf("%d hits and %d unjudged of 400 points show nothing", hits, unjudged)
			}
		})
	}
}

// TestExactCountsFollowTheirDefinition judges every count around the lines of c charts by tails summed term by term.
func TestExactCountsFollowTheirDefinition(t *testing.T) {
	for _, mean := range []float64{0.2, 1, 4.5, 8.9, 30} {
		l := judge.Limits{Kind: chart.C, SubgroupSize: 1, Places: 6, Model: chart.Model{CountMethod: chart.Exact, Inspected: 1}}
		l.Traces[chart.Location] = trace(mean, math.Sqrt(mean), beyond(1, 1, 3), rules.Spec{Kind: rules.BeyondLine, Line: rules.WarningLine})
		for z, line := range map[float64]*chart.Line{-2: &l.Traces[chart.Location].LowerWarning, 2: &l.Traces[chart.Location].UpperWarning} {
			line.Basis, line.Value = chart.TailProbability, limits.ExactCountLine(chart.C, mean, 1, z)
			if math.IsInf(line.Value, 0) {
				line.Value = 0 // no count is beyond it
			}
		}
		j := mustNew(t, l)
		for x := 0.0; x < 100; x++ {
			// P(X >= x) and P(X <= x), from the largest term of the tail on.
			term := math.Exp(-mean)
			atMost := 0.0
			for k := 0.0; k <= x; k++ {
				atMost += term
				term *= mean / (k + 1)
			}
			atLeast := 0.0
			lg, _ := math.Lgamma(x + 1)
			for k, term := x, math.Exp(-mean+x*math.Log(mean)-lg); k < x+200; k++ {
				atLeast += term
				term *= mean / (k + 1)
			}
			var v judge.Verdict
			j.Judge(j.NewState(), judge.Point{Count: &chart.Count{Nonconforming: x, Inspected: 1}}, &v)
			wantAction := atLeast <= chart.ActionTail || atMost <= chart.ActionTail
			wantWarning := atLeast <= chart.WarningTail || atMost <= chart.WarningTail
			var action, warning bool
			for _, h := range v.Hits {
				action, warning = action || h.Rule == 0, warning || h.Rule == 1
			}
			if action != wantAction || warning != wantWarning {
				t.Errorf("mean %v, count %v: action %v, warning %v; P(X>=x) %.6g, P(X<=x) %.6g", mean, x, action, warning, atLeast, atMost)
			}
		}
	}
}

// TestTransformedIsTransformingFirst judges readings on a scale, and the same readings transformed beforehand.
func TestTransformedIsTransformingFirst(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 5))
	for _, kind := range []chart.TransformKind{chart.Log, chart.SquareRoot} {
		l := kindsWithModels()["log"].limits
		l.Model.Transform.Kind = kind
		plain := l
		plain.Model = chart.Model{}
		scaled, straight := mustNew(t, l), mustNew(t, plain)
		a, b := scaled.NewState(), straight.NewState()
		values := make([]float64, 300)
		for i := range values {
			values[i] = decimal.Round(math.Exp(1+0.7*r.NormFloat64()), 3)
			y := math.Log(values[i] + 0.1)
			if kind == chart.SquareRoot {
				y = math.Sqrt(values[i] + 0.1)
			}
			var got, want judge.Verdict
			scaled.Judge(a, measured(values[i]), &got)
			straight.Judge(b, measured(y), &want)
			if !reflect.DeepEqual(got, want) {
				t.Fatalf("%v, %v: got %+v, want %+v", kind, values[i], got, want)
			}
		}
		series := scaled.Series(values)
		logged := make([]float64, len(values))
		for i, x := range values {
			logged[i], _ = l.Model.Transform.Apply(x)
		}
		if want := straight.Series(logged); !reflect.DeepEqual(series, want) || len(want) == 0 {
			t.Errorf("%v: series gives %v, want %v", kind, series, want)
		}
	}
}

// TestOutsideTheDomain judges readings that a scale has no place for as bounds below everything on it.
func TestOutsideTheDomain(t *testing.T) {
	l := judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: 4, ProcessSigma: 0.5,
		Model: chart.Model{Transform: chart.Transform{Kind: chart.Log}}}
	l.Traces[chart.Location] = trace(1, 0.5, beyond(1, 1, 3))
	v := verdictOn(t, l, measured(0))
	if v.Standing != judge.ActOn || !v.ByBound || v.Hits[0].Side != rules.Lower {
		t.Errorf("zero on a log scale with a lower line: %+v, want a lower signal by bound", v)
	}
	l.Model.Transform.Kind = chart.SquareRoot
	l.Traces[chart.Location] = trace(1, 0.5, beyond(1, 1, 3)) // the lower line would lie at -0.5, where nothing is
	if v = verdictOn(t, l, measured(-0.01)); v.Standing != judge.Clear || !v.ByBound {
		t.Errorf("a negative value on a root scale without a lower line: %+v, want clear by bound", v)
	}
	if v = verdictOn(t, l, greater(-1)); v.Standing != judge.NotJudged || v.Reason != judge.BoundProvesNothing {
		t.Errorf("above a value below the scale: %+v, want nothing proven", v)
	}
	j := mustNew(t, l)
	if lines := j.Lines(chart.Location, rules.Scale{Centre: 1, Sigma: 0.5}); lines.LowerAction != nil || lines.UpperAction == nil {
		t.Errorf("lines %+v, want no lower action line below the root of zero", lines)
	}
	if x, own, ok := j.Original(chart.Location, "", 2.5); x != 6.25 || !own || !ok {
		t.Errorf("2.5 on the root scale lies at %v, %v, %v; want 6.25", x, own, ok)
	}
}

func verdictOn(t *testing.T, l judge.Limits, pt judge.Point) (v judge.Verdict) {
	t.Helper()
	j := mustNew(t, l)
	j.Judge(j.NewState(), pt, &v)
	return v
}

// TestScalesOfKinds holds the sigma of single points against closed forms.
func TestScalesOfKinds(t *testing.T) {
	kinds := kindsWithModels()
	near := func(name string, got, want float64) {
		t.Helper()
		if math.Abs(got-want) > 1e-12*math.Max(1, math.Abs(want)) {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
	location := func(name string, pt judge.Point) judge.TraceVerdict {
		v := verdictOn(t, kinds[name].limits, pt)
		return v.Traces[chart.Location]
	}
	near("run of 1", location("run means", measured(10)).Scale.Sigma, math.Sqrt(0.09+0.04))
	near("run of 2", location("run means", measured(10, 10)).Scale.Sigma, math.Sqrt(0.09+0.02))
	near("p of 50", location("p normal", judge.Point{Count: &chart.Count{Nonconforming: 1, Inspected: 50}}).Scale.Sigma, 1.4*math.Sqrt(0.04*0.96/50))
	near("u of 2.5", location("u", judge.Point{Count: &chart.Count{Nonconforming: 1, Inspected: 2.5}}).Scale.Sigma, math.Sqrt(2/2.5+0.16))
	near("u statistic", location("u", judge.Point{Count: &chart.Count{Nonconforming: 1, Inspected: 2.5}}).Statistic, 0.4)
	near("level", location("levels", judge.Point{Readings: []float64{23}, Material: "high"}).Statistic, 2)
	if v := verdictOn(t, kinds["levels"].limits, judge.Point{Readings: []float64{23}, Material: "other"}); v.Reason != judge.NoScale || v.Standing != judge.NotJudged {
		t.Errorf("unknown material: %+v", v)
	}

	d2, d3 := 2/math.Sqrt(math.Pi), math.Sqrt(2-4/math.Pi)
	spread := func(name string, pt judge.Point) judge.TraceVerdict {
		return verdictOn(t, kinds[name].limits, pt).Traces[chart.Dispersion]
	}
	near("high band", spread("duplicates", measured(20, 20.5)).Scale.Sigma, 0.3*d3)
	near("high band centre", spread("duplicates", measured(20, 20.5)).Scale.Centre, decimal.Round(0.3*d2, 4))
	near("low band", spread("duplicates", measured(2, 2.5)).Scale.Centre, 0.1128)
	near("relative", spread("relative", measured(9, 11)).Statistic, 20)
	near("absolute", spread("relative", measured(0.4, 0.5)).Statistic, 0.1)
	near("absolute sigma", spread("relative", measured(0.4, 0.5)).Scale.Sigma, 0.05*d3)
	if v := verdictOn(t, kinds["duplicates"].limits, measured(1)); v.Reason != judge.TooFewReadings {
		t.Errorf("one reading of a duplicate: %+v", v)
	}
	relative := kinds["relative"].limits
	relative.Model.Spread = nil
	if v := verdictOn(t, relative, measured(-1, 1)); v.Reason != judge.NoScale {
		t.Errorf("a relative range about zero: %+v", v)
	}
}

// TestDuplicatesWatchTheUpperSide: replicates that agree well are no fault.
func TestDuplicatesWatchTheUpperSide(t *testing.T) {
	l := judge.Limits{Kind: chart.DuplicateRange, SubgroupSize: 10, Places: 4, ProcessSigma: 1}
	l.Traces[chart.Dispersion] = trace(3.0775, 0.7971, beyond(1, 1, 3))
	same := make([]float64, 10)
	if v := verdictOn(t, l, measured(same...)); v.Standing != judge.Clear {
		t.Errorf("ten equal readings: %+v, want clear", v)
	}
	same[0] = 9
	if v := verdictOn(t, l, measured(same...)); v.Standing != judge.ActOn {
		t.Errorf("a range of 9 sigma: %+v, want a signal", v)
	}
}

func TestModelsAreChecked(t *testing.T) {
	for name, change := range map[string]func(l *judge.Limits){
		"dispersion of counts":  func(l *judge.Limits) { l.Traces[chart.Dispersion] = trace(1, 1, beyond(1, 1, 3)) },
		"no method":             func(l *judge.Limits) { l.Model.CountMethod = 0 },
		"no size":               func(l *judge.Limits) { l.Model.Inspected = 0 },
		"exact with inflation":  func(l *judge.Limits) { l.Model.Inflation = 1.2 },
		"transformed counts":    func(l *judge.Limits) { l.Model.Transform.Kind = chart.Log },
		"levels of counts":      func(l *judge.Limits) { l.Model.Levels = []chart.Level{{Material: "a", Reference: 1, Sigma: 1}} },
		"spread of counts":      func(l *judge.Limits) { l.Model.Spread = &chart.Spread{} },
		"a NaN between samples": func(l *judge.Limits) { l.Model.BetweenSigma = math.NaN() },
		"an exact line elsewhere": func(l *judge.Limits) {
			l.Traces[chart.Location].UpperAction = chart.Line{Basis: chart.TailProbability, Value: 0.9, Tail: 0.001}
		},
		"a probability with normal lines": func(l *judge.Limits) {
			l.Model.CountMethod = chart.Normal
			l.Traces[chart.Location].UpperAction = chart.Line{Basis: chart.TailProbability, Value: 0.11, Tail: 0.001}
		},
		"a size that is not one": func(l *judge.Limits) { l.SubgroupSize = 5 },
	} {
		l := kindsWithModels()["p exact"].limits
		change(&l)
		if _, err := judge.New(l); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}
