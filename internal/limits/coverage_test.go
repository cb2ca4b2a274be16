package limits_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// coverage counts how often the intervals of a design hold the true figures, and how often clean data is reported as
// having estimators that disagree. change may turn a drawn request into another.
func coverage(t *testing.T, d design, seed uint64, change func(*limits.Request)) (held map[string]float64, reported float64) {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 5))
	held = map[string]float64{}
	scale, _ := limits.At(d.kind, 2, d.size)
	for range replications {
		req := d.draw(r)
		change(&req)
		res, err := limits.Compute(req)
		if err != nil {
			t.Fatal(err)
		}
		in := res.Intervals
		for _, c := range []struct {
			name string
			got  *limits.Interval
			true float64
		}{
			{"sigma", in.Sigma, 2},
			{"centre", in.Centre, 10},
			{"lower action", in.LowerAction[chart.Location], 10 - 3*scale.LocationSigma},
			{"upper action", in.UpperAction[chart.Location], 10 + 3*scale.LocationSigma},
			{"lower warning", in.LowerWarning[chart.Location], 10 - 2*scale.LocationSigma},
			{"upper warning of dispersion", in.UpperWarning[chart.Dispersion], scale.DispersionCentre + 2*scale.DispersionSigma},
			{"centre of dispersion", in.DispersionCentre, scale.DispersionCentre},
			{"upper action of dispersion", in.UpperAction[chart.Dispersion], scale.DispersionCentre + 3*scale.DispersionSigma},
		} {
			if c.got != nil && c.got.Lower <= c.true && c.true <= c.got.Upper {
				held[c.name] += 1. / replications
			}
		}
		for _, f := range res.Findings {
			if f.Code == limits.CodeEstimatorsDisagree {
				reported += 1. / replications
			}
		}
	}
	return held, reported
}

// Four standard errors of a coverage of 0.95 over the replications are 0.014. The intervals are approximations; what is
// asked beyond that is that they are never short by more than half a point, nor wide by more than the allowance.
func TestIntervalsCover(t *testing.T) {
	chance := 4 * math.Sqrt(0.95*0.05/replications)
	check := func(t *testing.T, held map[string]float64, wide float64) {
		t.Helper()
		for name, got := range held {
			if got < limits.Confidence-0.005-chance || got > limits.Confidence+wide+chance {
				t.Errorf("%s: held in %.4f of cases, want %.2f, up to 0.005 less or %.3f more, within %.4f", name, got, limits.Confidence, wide, chance)
			}
		}
	}
	for i, d := range designs {
		t.Run(d.String(), func(t *testing.T) {
			held, reported := coverage(t, d, uint64(i), func(*limits.Request) {})
			wide := 0.01
			if d.kind == chart.Individuals {
				wide = 0.025 // few degrees of freedom make the combined interval of the lines cautious
			}
			check(t, held, wide)
			if len(held) != 8 {
				t.Errorf("got intervals for %v, want eight figures", held)
			}
			if reported > 0.01 {
				t.Errorf("estimators of clean data disagree in %.4f of cases, want at most 0.01", reported)
			}
		})
	}
	d := designs[1]
	for name, change := range map[string]func(*limits.Request){
		"median moving range": func(r *limits.Request) { r.Estimator = limits.MedianMovingRange },
		"overall":             func(r *limits.Request) { r.Estimator = limits.Overall },
		"centre given":        func(r *limits.Request) { r.Centre = ptr(10.0) },
		"sigma given":         func(r *limits.Request) { r.Sigma = ptr(2.0) },
	} {
		t.Run(fmt.Sprintf("%s, %s", d, name), func(t *testing.T) {
			held, _ := coverage(t, d, 40, change)
			check(t, held, 0.025)
		})
	}
}

func ptr[T any](x T) *T { return &x }

func estimate(t testing.TB, res limits.Result, name limits.Estimator) limits.Estimate {
	t.Helper()
	for _, e := range res.Estimates {
		if e.Name == name {
			return e
		}
	}
	t.Fatalf("no estimate %s among %v", name, res.Estimates)
	return limits.Estimate{}
}

// A process with between-subgroup variation, and one whose neighbours are correlated, are told apart from clean data.
func TestEstimatorsDisagreeWhereTheModelIsWrong(t *testing.T) {
	for _, c := range []struct {
		name  string
		d     design
		shift func(group int) float64
	}{
		{"a slow wave through individuals", design{chart.Individuals, 1, repeat(1, 60), nil}, func(i int) float64 { return 6 * math.Sin(float64(i)/6) }},
		{"subgroup means that differ", design{chart.XbarR, 4, repeat(4, 25), nil}, func(i int) float64 { return float64(7*i%11) - 5 }},
		{"alternation between two levels", design{chart.Individuals, 1, repeat(1, 60), nil}, func(i int) float64 { return float64(8 * (i % 2)) }},
	} {
		t.Run(c.name, func(t *testing.T) {
			req := c.d.draw(rand.New(rand.NewPCG(9, 9)))
			for i, g := range req.Groups {
				for j := range g.Readings {
					g.Readings[j] += c.shift(i)
				}
			}
			res, err := limits.Compute(req)
			if err != nil {
				t.Fatal(err)
			}
			for _, f := range res.Findings {
				if f.Code == limits.CodeEstimatorsDisagree && f.Figure > f.Threshold && f.Text != "" && f.Advice != "" && f.CouldMiss != "" {
					return
				}
			}
			t.Errorf("seed 9,9: got findings %+v, want %s", res.Findings, limits.CodeEstimatorsDisagree)
		})
	}
}

// For the overall standard deviation the intervals are the textbook's: s·√(9/19.0228) to s·√(9/2.70039), and mean ±
// 2.26216·s/√10, with the quantiles of χ² and t at nine degrees of freedom as tabulated (printed, from memory). The data
// are the NIST flow rates, s = √(37.229/9), mean 50.81.
func TestIntervalsOfTheOverallDeviationAreTheTextbooks(t *testing.T) {
	res := mustCompute(t, limits.Request{
		Kind: chart.Individuals, SubgroupSize: 1, Estimator: limits.Overall,
		Groups: singles(49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1),
	})
	s := math.Sqrt(37.229 / 9)
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"sigma, lower", res.Intervals.Sigma.Lower, s * math.Sqrt(9/19.0228)},
		{"sigma, upper", res.Intervals.Sigma.Upper, s * math.Sqrt(9/2.70039)},
		{"centre, lower", res.Intervals.Centre.Lower, 50.81 - 2.26216*s/math.Sqrt(10)},
		{"centre, upper", res.Intervals.Centre.Upper, 50.81 + 2.26216*s/math.Sqrt(10)},
	} {
		if !near(c.got, c.want, 3e-6) {
			t.Errorf("%s: got %.7g, want %.7g", c.name, c.got, c.want)
		}
	}
}
