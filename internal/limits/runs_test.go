package limits_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// runDesign is a basis of runs: sizes in turn, and the sigma between runs where that within is 2.
type runDesign struct {
	size    int
	sizes   []int
	between float64
}

func (d runDesign) String() string {
	return fmt.Sprintf("%d runs of up to %d, sigma between %g", len(d.sizes), d.size, d.between)
}

// draw gives runs with mean 10 and sigma 2 within.
func (d runDesign) draw(r *rand.Rand) limits.Request {
	places := 12
	req := limits.Request{Kind: chart.RunMeans, SubgroupSize: d.size, PublishedDecimals: &places}
	for _, n := range d.sizes {
		g, level := limits.Group{Decimals: 3}, 10+d.between*r.NormFloat64()
		for range n {
			g.Readings = append(g.Readings, math.Round((level+2*r.NormFloat64())*1000)/1000)
		}
		req.Groups = append(req.Groups, g)
	}
	return req
}

// inTurn repeats a pattern of sizes.
func inTurn(times int, pattern ...int) (sizes []int) {
	for range times {
		sizes = append(sizes, pattern...)
	}
	return sizes
}

var runDesigns = []runDesign{
	{3, repeat(3, 20), 2},
	{2, repeat(2, 12), 1},
	{6, inTurn(6, 1, 2, 3, 6), 1.4},
	{4, inTurn(5, 4, 1, 2), 3},
	{6, inTurn(10, 1, 2, 6), 0.5},
}

// Worked by hand: the runs 1, 2; 4, 6; 5, 5 have means 1.5, 5, 5 and squares 0.5, 2, 0 within, so s_w² = 2.5/3; the means
// have variance 49/12, so s_b² = 49/12 - 5/12 = 11/3, and the centre is 23/6.
func TestRunsByHand(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.RunMeans, SubgroupSize: 2, Groups: subgroups([]float64{1, 2}, []float64{4, 6}, []float64{5, 5}), PublishedDecimals: ptr(6)})
	within := math.Sqrt(2.5/3) * math.Sqrt(1+unbiasedVariance(3))
	if !near(res.SigmaUnrounded, within, 1e-12) || !near(res.BetweenUnrounded, math.Sqrt(11./3), 1e-12) || !near(res.CentreUnrounded, 23./6, 1e-15) {
		t.Errorf("got within %.12g, between %.12g, centre %.12g, want %.12g, %.12g, %.12g", res.SigmaUnrounded, res.BetweenUnrounded, res.CentreUnrounded, within, math.Sqrt(11./3), 23./6)
	}
	if got, want := *res.Location.Sigma, math.Hypot(res.Model.BetweenSigma, res.ProcessSigma/math.Sqrt2); got != want || res.Model.BetweenSigma != 1.914854 {
		t.Errorf("got location sigma %.12g and sigma between %g, want %.12g and 1.914854", got, res.Model.BetweenSigma, want)
	}
	// Variances of the interval of the centre: the variance of the means over 3, Student's t at two degrees of freedom
	// (4.30265, printed, from memory).
	if got, want := res.Intervals.Centre.Upper-res.CentreUnrounded, 4.30265*math.Sqrt(49./36); !near(got, want, 1e-5) {
		t.Errorf("interval of the centre: half width %.8g, want %.8g", got, want)
	}
	for i, name := range []string{"WITHIN", "BETWEEN", "TOTAL"} {
		if res.Components[i].Name != name || res.Components[i].Interval == nil {
			t.Errorf("component %d: got %+v, want %s with an interval", i, res.Components[i], name)
		}
	}
}

// meansTable computes, from the definitions and in plain float64, what the analysis of runs rests on.
func meansTable(groups []limits.Group) (means, inverse []float64, within float64, freedom int) {
	squares := 0.0
	for _, g := range groups {
		mean, n := 0.0, float64(len(g.Readings))
		for _, x := range g.Readings {
			mean += x / n
		}
		for _, x := range g.Readings {
			squares += (x - mean) * (x - mean)
		}
		means, inverse, freedom = append(means, mean), append(inverse, 1/n), freedom+len(g.Readings)-1
	}
	return means, inverse, squares / float64(freedom), freedom
}

func TestRunsEqualTheDefinitions(t *testing.T) {
	for i, d := range runDesigns {
		req := d.draw(rand.New(rand.NewPCG(uint64(i), 21)))
		res := mustCompute(t, req)
		means, inverse, within, freedom := meansTable(req.Groups)
		a := float64(len(means))
		kappa, spread := 0.0, plainDeviation(means)
		for _, k := range inverse {
			kappa += k / a
		}
		between := max(0, spread*spread-kappa*within)
		// With weights 1/variance the centre solves Σ(x - centre)/variance = 0.
		weights, pull := 0.0, 0.0
		for j, x := range means {
			w := 1 / (between + within*inverse[j])
			weights, pull = weights+w, pull+w*(x-res.CentreUnrounded)
		}
		if math.Abs(pull/weights) > 1e-11 || !near(res.BetweenUnrounded, math.Sqrt(between), 1e-10) {
			t.Errorf("seed %d,21, %s: got between %.14g, centre off by %g, want %.14g, 0", i, d, res.BetweenUnrounded, pull/weights, math.Sqrt(between))
		}
		if got, want := estimate(t, res, limits.Pooled), math.Sqrt(within*(1+unbiasedVariance(float64(freedom)))); !near(got.Sigma, want, 1e-11) || got.DegreesOfFreedom != float64(freedom) || !got.Chosen {
			t.Errorf("seed %d,21, %s: got %+v, want %.14g at %d degrees of freedom", i, d, got, want, freedom)
		}
		if got, want := res.Components[1].DegreesOfFreedom, bruteFreedom(inverse, between, within, float64(freedom)); !near(got, want, 1e-9) {
			t.Errorf("seed %d,21, %s: got %.12g degrees of freedom between, want %.12g", i, d, got, want)
		}
	}
}

// bruteFreedom is Satterthwaite's freedom of s_b² from the covariance matrix: the variance of a quadratic form x'Cx of
// normal x is 2·tr(CVCV), with C = (I - J/a)/(a-1).
func bruteFreedom(inverse []float64, between, within, freedom float64) float64 {
	a := len(inverse)
	cv := make([][]float64, a)
	kappa := 0.0
	for i := range cv {
		cv[i] = make([]float64, a)
		kappa += inverse[i] / float64(a)
		for j := range cv[i] {
			c := -1 / float64(a)
			if i == j {
				c++
			}
			cv[i][j] = c / float64(a-1) * (between + within*inverse[j])
		}
	}
	trace := 0.0
	for i := range cv {
		for j := range cv {
			trace += cv[i][j] * cv[j][i]
		}
	}
	return 2 * between * between / (2*trace + 2*kappa*kappa*within*within/freedom)
}

// With runs of one size the estimate is that of the usual table, (MSB - MSW)/n, and the centre the mean of all readings.
func TestEqualRunsGiveTheUsualTable(t *testing.T) {
	for _, n := range []int{2, 3, 7} {
		req := runDesign{n, repeat(n, 15), 3}.draw(rand.New(rand.NewPCG(uint64(n), 22)))
		res := mustCompute(t, req)
		means, _, within, _ := meansTable(req.Groups)
		grand, squares := 0.0, 0.0
		for _, m := range means {
			grand += m / 15
		}
		for _, m := range means {
			squares += float64(n) * (m - grand) * (m - grand)
		}
		if want := math.Sqrt((squares/14 - within) / float64(n)); !near(res.BetweenUnrounded, want, 1e-11) || !near(res.CentreUnrounded, grand, 1e-14) {
			t.Errorf("seed %d,22: got %.14g about %.14g, want %.14g about %.14g", n, res.BetweenUnrounded, res.CentreUnrounded, want, grand)
		}
	}
}

func TestRunsShiftScaleAndShuffle(t *testing.T) {
	for i, d := range runDesigns {
		r := rand.New(rand.NewPCG(uint64(i), 23))
		req := d.draw(r)
		before := mustCompute(t, req)
		moved := mustCompute(t, mapReadings(req, func(x float64) float64 { return -4*x + 100 }))
		if !near(moved.BetweenUnrounded, 4*before.BetweenUnrounded, 1e-10) || !near(moved.SigmaUnrounded, 4*before.SigmaUnrounded, 1e-11) || !near(moved.CentreUnrounded, 100-4*before.CentreUnrounded, 1e-12) {
			t.Errorf("seed %d,23, %s: moved to %g, %g, %g from %g, %g, %g", i, d, moved.CentreUnrounded, moved.SigmaUnrounded, moved.BetweenUnrounded, before.CentreUnrounded, before.SigmaUnrounded, before.BetweenUnrounded)
		}
		if got, want := moved.Components[1].DegreesOfFreedom, before.Components[1].DegreesOfFreedom; !near(got, want, 1e-9) {
			t.Errorf("seed %d,23, %s: degrees of freedom moved to %g from %g", i, d, got, want)
		}
		shuffled := mapReadings(req, func(x float64) float64 { return x })
		for _, g := range shuffled.Groups {
			r.Shuffle(len(g.Readings), func(a, b int) { g.Readings[a], g.Readings[b] = g.Readings[b], g.Readings[a] })
		}
		r.Shuffle(len(shuffled.Groups), func(a, b int) {
			shuffled.Groups[a], shuffled.Groups[b] = shuffled.Groups[b], shuffled.Groups[a]
		})
		after := mustCompute(t, shuffled)
		if !near(after.CentreUnrounded, before.CentreUnrounded, 1e-13) || !near(after.BetweenUnrounded, before.BetweenUnrounded, 1e-11) || !near(after.SigmaUnrounded, before.SigmaUnrounded, 1e-13) {
			t.Errorf("seed %d,23, %s: order changed the figures", i, d)
		}
	}
}

// Merging two bases with one level adds up the squares within and, for the means, what lies between the two bases.
func TestRunsMerge(t *testing.T) {
	d := runDesigns[2]
	r := rand.New(rand.NewPCG(1, 24))
	one, two := d.draw(r), d.draw(r)
	both := one
	both.Groups = append(append([]limits.Group(nil), one.Groups...), two.Groups...)
	raw := func(req limits.Request) (within, between, means, groups float64) {
		res := mustCompute(t, req)
		m, inverse, w, _ := meansTable(req.Groups)
		kappa := 0.0
		for i, k := range inverse {
			kappa += k / float64(len(inverse))
			means += m[i]
		}
		return w, res.BetweenUnrounded*res.BetweenUnrounded + kappa*w, means, float64(len(m))
	}
	w1, s1, m1, a1 := raw(one)
	w2, s2, m2, a2 := raw(two)
	w, s, _, a := raw(both)
	if want := (w1 + w2) / 2; !near(w, want, 1e-12) { // equal designs, so equal degrees of freedom
		t.Errorf("within: got %.14g, want %.14g", w, want)
	}
	apart := m1/a1 - m2/a2
	if want := ((a1-1)*s1 + (a2-1)*s2 + a1*a2/a*apart*apart) / (a - 1); !near(s, want, 1e-10) {
		t.Errorf("variance of the means: got %.14g, want %.14g", s, want)
	}
}

// runTally holds sums over replications.
type runTally struct {
	within, between, betweenSquares, betweenFourths float64
	root, rootSquares                               float64 // of s_b
	truncated                                       float64
	held                                            map[string]float64
	used                                            float64
}

func simulateRuns(t *testing.T, d runDesign, seed uint64, change func(*limits.Request)) runTally {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 25))
	sum := runTally{held: map[string]float64{}}
	location := math.Sqrt(d.between*d.between + 4/float64(d.size))
	for range runReplications {
		req := d.draw(r)
		change(&req)
		res, err := limits.Compute(req)
		if err != nil {
			t.Fatalf("seed %d,25: %v", seed, err)
		}
		variance := res.BetweenUnrounded * res.BetweenUnrounded
		x := variance - d.between*d.between
		sum.within += (res.SigmaUnrounded/2 - 1) / runReplications
		sum.between += x / runReplications
		sum.betweenSquares += x * x / runReplications
		sum.betweenFourths += x * x * x * x / runReplications
		root := res.BetweenUnrounded/d.between - 1
		sum.root += root / runReplications
		sum.rootSquares += root * root / runReplications
		if res.Components[1].Truncated {
			sum.truncated += 1. / runReplications
		}
		for _, c := range []struct {
			name string
			got  *limits.Interval
			true float64
		}{
			{"within", res.Intervals.Sigma, 2},
			{"between", res.Components[1].Interval, d.between},
			{"total", res.Components[2].Interval, math.Hypot(2, d.between)},
			{"centre", res.Intervals.Centre, 10},
			{"upper action", res.Intervals.UpperAction[chart.Location], 10 + 3*location},
			{"lower action", res.Intervals.LowerAction[chart.Location], 10 - 3*location},
		} {
			if c.got != nil && c.got.Lower <= c.true && c.true <= c.got.Upper {
				sum.held[c.name] += 1. / runReplications
			}
		}
	}
	return sum
}

const runReplications = 1000

// Truncation at zero makes s_b² too large where it happens often, so the design is one in which it does not.
func TestVarianceBetweenRunsIsUnbiased(t *testing.T) {
	for i, d := range []runDesign{{6, inTurn(10, 1, 2, 3, 6), 4}, {3, repeat(3, 25), 4}} {
		s := simulateRuns(t, d, uint64(50+i), func(r *limits.Request) { // nothing is asked of the lines here
			absent := &chart.Line{Basis: chart.Absent}
			r.Fixed[chart.Location] = limits.FixedLines{LowerAction: absent, UpperAction: absent}
		})
		if s.truncated > 0 {
			t.Fatalf("%s: %.4f of estimates were truncated; choose a design without", d, s.truncated)
		}
		variance := s.betweenSquares - s.between*s.between
		if bound := 4 * math.Sqrt(variance/runReplications); math.Abs(s.between) > bound {
			t.Errorf("seed %d,25, %s: variance between is off by %.4f, want 0 within %.4f", 50+i, d, s.between, bound)
		}
		_, inverse, _, freedom := meansTable(d.draw(rand.New(rand.NewPCG(1, 1))).Groups)
		between := bruteFreedom(inverse, d.between*d.between, 4, float64(freedom))
		// The package comment states the bias of the root; terms with 1/freedom² are left out of it.
		if bound := 1/(between*between) + 4*math.Sqrt((s.rootSquares-s.root*s.root)/runReplications); math.Abs(s.root+1/(4*between)) > bound {
			t.Errorf("seed %d,25, %s: sigma between is off by a relative %.4f, want %.4f within %.4f", 50+i, d, s.root, -1/(4*between), bound)
		}
		want := 2 * math.Pow(d.between, 4) / between
		if bound := 4 * math.Sqrt((s.betweenFourths-variance*variance)/runReplications); math.Abs(variance-want) > bound {
			t.Errorf("seed %d,25, %s: variance of the variance between is %.4f, want %.4f within %.4f", 50+i, d, variance, want, bound)
		}
		if bound := 4 * math.Sqrt(unbiasedVariance(float64(freedom))/runReplications); math.Abs(s.within) > bound {
			t.Errorf("seed %d,25, %s: sigma within is off by a relative %.5f, want 0 within %.5f", 50+i, d, s.within, bound)
		}
	}
}

// Where s_b is small beside s_w and runs are few, the intervals of the centre and the lines are wide: the allowance above is
// for them, the one below for what is approximate.
func TestRunIntervalsCover(t *testing.T) {
	chance := 4 * math.Sqrt(0.95*0.05/runReplications)
	for i, d := range runDesigns {
		t.Run(d.String(), func(t *testing.T) {
			s := simulateRuns(t, d, uint64(i), func(*limits.Request) {})
			for name, got := range s.held {
				if got < limits.Confidence-0.01-chance || got > limits.Confidence+0.04+chance {
					t.Errorf("seed %d,25: %s held in %.4f of cases, want %.2f within %.4f", i, name, got, limits.Confidence, chance)
				}
			}
		})
	}
}

func TestRunTargets(t *testing.T) {
	d := runDesigns[0]
	req := d.draw(rand.New(rand.NewPCG(3, 26)))
	free := mustCompute(t, req)
	req.BetweenSigma, req.Sigma, req.Centre = ptr(2.0), ptr(2.0), ptr(10.0)
	given := mustCompute(t, req)
	if given.Origin != limits.Target || given.Model.BetweenSigma != 2 || given.FalseAlarm != nil || given.Intervals.Centre != nil || given.Components[1].Interval != nil {
		t.Errorf("all given: got %s, %+v", given.Origin, given.Components)
	}
	if want := math.Sqrt(4 + 4./3); !near(*given.Location.Sigma, want, 1e-14) || !near(given.Location.UpperAction.Value, 10+3*want, 1e-11) {
		t.Errorf("all given: got %s, want sigma %g", show(given.Location), want)
	}
	for name, c := range map[string]struct {
		got  *limits.Comparison
		want float64
	}{
		"bias":          {given.Bias, free.CentreUnrounded - 10},
		"sigma ratio":   {given.SigmaRatio, free.SigmaUnrounded / 2},
		"between ratio": {given.BetweenRatio, free.BetweenUnrounded / 2},
	} {
		if c.got == nil || math.Abs(c.got.Estimate-c.want) > 1e-12 || c.got.Interval.Lower > c.want || c.got.Interval.Upper < c.want {
			t.Errorf("%s: got %+v, want %g within its interval", name, c.got, c.want)
		}
	}
	for _, c := range []struct {
		name    string
		between float64
		code    string
		want    bool
	}{
		{"far too small a target", 0.01, limits.CodeTargetBetweenDiffers, true},
		{"a right target", 2, limits.CodeTargetBetweenDiffers, false},
	} {
		req.BetweenSigma = ptr(c.between)
		if got := codes(mustCompute(t, req))[c.code]; got != c.want {
			t.Errorf("%s: %s reported: %v, want %v", c.name, c.code, got, c.want)
		}
	}
	if res := mustCompute(t, limits.Request{Kind: chart.RunMeans, SubgroupSize: 4, Centre: ptr(5.0), Sigma: ptr(1.0), BetweenSigma: ptr(0.0)}); *res.Location.Sigma != 0.5 || len(res.Findings) != 0 {
		t.Errorf("nothing between: got %s, want the plain sigma of 0.5", show(res.Location))
	}
}

func codes(res limits.Result) map[string]bool {
	found := map[string]bool{}
	for _, f := range res.Findings {
		found[f.Code] = f.Text != "" && f.Advice != "" && f.CouldMiss != ""
	}
	return found
}

// The means of the runs 1, 3; 2.2, 3.4; 1.9, 2.3 differ less than the readings of the first two.
func TestNegativeVarianceBetweenRunsIsZeroAndSaysSo(t *testing.T) {
	req := limits.Request{Kind: chart.RunMeans, SubgroupSize: 2, Groups: subgroups([]float64{1, 3}, []float64{2.2, 3.4}, []float64{1.9, 2.3})}
	res := mustCompute(t, req)
	if c := res.Components[1]; res.BetweenUnrounded != 0 || res.Model.BetweenSigma != 0 || !c.Truncated || c.Sigma != 0 || c.Interval.Lower != 0 || c.Interval.Upper <= 0 {
		t.Errorf("got %+v, want 0, truncated, with an interval from 0", c)
	}
	if !codes(res)[limits.CodeBetweenTruncated] || codes(res)[limits.CodeSubgroupLimitsNarrow] {
		t.Errorf("got findings %+v", res.Findings)
	}
	if want := res.ProcessSigma / math.Sqrt2; *res.Location.Sigma != want {
		t.Errorf("got location sigma %g, want that of plain subgroups, %g", *res.Location.Sigma, want)
	}
}
