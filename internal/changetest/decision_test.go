package changetest_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

// flow rates: NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2, each after a break, so that they count as
// independent; mean 50.81, s = √(37.229/9) (computed).
func flowRates() []changetest.Group {
	var groups []changetest.Group
	for _, x := range []float64{49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1} {
		groups = append(groups, changetest.Group{Group: limits.Group{Readings: []float64{x}, Decimals: 1, BreakBefore: true}})
	}
	return groups
}

// Against targets the intervals are the textbook's: mean ± 2.26216·s/√10 and s·√(9/19.0228) to s·√(9/2.70039), with the
// quantiles of t and χ² at nine degrees of freedom as tabulated (printed, from memory). Against ten old results with the
// overall sigma, F(0.975; 9, 9) = 4.0260, and two equal variances have t(18) = 2.10092.
func TestTextbookIntervals(t *testing.T) {
	s := math.Sqrt(37.229 / 9)
	f := changetest.InForce{Kind: chart.Individuals, SubgroupSize: 1, Centre: 50, Sigma: 2, CentreTarget: true, SigmaTarget: true, Estimator: limits.Overall}
	res := mustCompare(t, changetest.Request{InForce: f, Groups: flowRates(), Looks: 1})
	c4, _ := limits.C4(10)
	g := f
	g.Sigma, g.CentreTarget, g.SigmaTarget, g.Groups, g.Readings, g.DegreesOfFreedom = s/c4, false, false, 10, 10, 9
	twin := mustCompare(t, changetest.Request{InForce: g, Groups: flowRates(), Looks: 1})
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"centre, lower", res.Centre.Interval.Lower, (0.81 - 2.26216*s/math.Sqrt(10)) / 2},
		{"centre, upper", res.Centre.Interval.Upper, (0.81 + 2.26216*s/math.Sqrt(10)) / 2},
		{"spread, lower", res.Spread.Interval.Lower, s / 2 * math.Sqrt(9/19.0228)},
		{"spread, upper", res.Spread.Interval.Upper, s / 2 * math.Sqrt(9/2.70039)},
		{"t", res.Centre.Test.Statistic, 0.81 / (s / math.Sqrt(10))},
		{"plain t", res.Centre.Plain.Statistic, 0.81 / (s / math.Sqrt(10))},
		{"twin, centre", twin.Centre.Interval.Upper * s / c4, 0.81 + 2.10092*s*math.Sqrt(0.2)},
		{"twin, spread, upper", twin.Spread.Interval.Upper, math.Sqrt(4.0260)},
		{"twin, spread as published, lower", twin.Spread.Published.Interval.Lower, c4 * math.Sqrt(9/19.0228)},
		{"twin, centre as published, upper", twin.Centre.Published.Interval.Upper * s / c4, 0.81 + 2.26216*s/math.Sqrt(10)},
		{"twin, spread, lower", twin.Spread.Interval.Lower, 1 / math.Sqrt(4.0260)},
	} {
		if !near(c.got, c.want, 2e-5) {
			t.Errorf("%s: got %.7g, want %.7g", c.name, c.got, c.want)
		}
	}
}

// drifting results move by three sigmas in all; neighbours hardly differ more than before.
func drifting(n int) []float64 {
	xs := laws[0].draw(rand.New(rand.NewPCG(7, 7)), n)
	for i := range xs {
		xs[i] += 4 * (float64(i)/float64(n-1) - 0.5)
	}
	return xs
}

// Like is compared with like: by the moving ranges in force a drift is no change of spread, though the overall standard
// deviation of the same results set against the same sigma would show one.
func TestDriftIsNotSpread(t *testing.T) {
	groups := groupsOf(drifting(100), 1, 0, 1)
	byRanges, byOverall := standard(), standard()
	byRanges.SigmaTarget, byOverall.SigmaTarget, byOverall.Estimator = true, true, limits.Overall
	ranges := mustCompare(t, changetest.Request{InForce: byRanges, Groups: groups, Looks: 1})
	overall := mustCompare(t, changetest.Request{InForce: byOverall, Groups: groups, Looks: 1})
	if ranges.Spread.Decision == changetest.Change || ranges.Spread.Differs || ranges.Estimator != limits.MeanMovingRange {
		t.Errorf("seed 7,7, by moving ranges: got %+v", ranges.Spread)
	}
	if !overall.Spread.Differs || *overall.Spread.Estimate < 1.25 {
		t.Errorf("seed 7,7, by the overall sigma: got %+v", overall.Spread)
	}
	if ranges.Correlation.Used < 0.3 {
		t.Errorf("seed 7,7: a drift of four sigmas shows a correlation of %.2f only", ranges.Correlation.Used)
	}
}

// The number that would settle a comparison does so, when results like those at hand come to it, and half of it does not.
func TestNeededSettles(t *testing.T) {
	f := standard()
	f.CentreTarget, f.SigmaTarget, f.Estimator = true, true, limits.Overall
	pattern := laws[0].draw(rand.New(rand.NewPCG(8, 8)), 20)
	mean := 0.0
	for _, x := range pattern {
		mean += x / 20
	}
	series := func(shift float64, n int) []changetest.Group {
		xs := make([]float64, n)
		for i := range xs {
			xs[i] = pattern[i%20] - mean + shift
		}
		groups := groupsOf(xs, 1, 0, 1)
		for i := range groups {
			groups[i].BreakBefore = true
		}
		return groups
	}
	for shift, want := range map[float64]changetest.Decision{0.3: changetest.Keep, -0.72: changetest.Change} {
		decide := func(n int) *changetest.Comparison {
			return mustCompare(t, changetest.Request{InForce: f, Groups: series(shift, n), Looks: 1}).Centre
		}
		first := decide(20)
		if first.Decision != changetest.NotEnoughData || first.Needed == nil || !first.Needed.Reachable || first.Needed.Groups < 40 {
			t.Fatalf("seed 8,8, shift %g: got %+v", shift, first)
		}
		// Scatter as it is and a target: t(n-1)·s/√n must come below the distance to 0.5, found to a twentieth.
		s, least := deviation(pattern), 21
		for changetest.TQuantile(0.975, float64(least-1))*s/math.Sqrt(float64(least)) > math.Abs(math.Abs(shift)-0.5) {
			least++
		}
		if got := first.Needed.Groups; float64(got) < 0.97*float64(least) || float64(got) > 1.06*float64(least)+1 {
			t.Errorf("seed 8,8, shift %g: got %d results, want %d or so", shift, got, least)
		}
		n := (first.Needed.Groups/20 + 1) * 20
		if got := decide(n); got.Decision != want {
			t.Errorf("seed 8,8, shift %g: got %s at %d results, want %s", shift, got.Decision, n, want)
		}
		if got := decide(n / 40 * 20); got.Decision != changetest.NotEnoughData {
			t.Errorf("seed 8,8, shift %g: got %s at %d results already", shift, got.Decision, n/40*20)
		}
	}
	at := mustCompare(t, changetest.Request{InForce: f, Groups: series(0.5, 20), Looks: 1}).Centre
	if at.Needed == nil || at.Needed.Reachable || !strings.Contains(at.Sentence, "No number") {
		t.Errorf("a difference at the limit of relevance is not settled by any number: got %+v", at)
	}
}

func TestSearchFindsTheLeast(t *testing.T) {
	for least := 1; least <= changetest.NeededMax; least += 1 + least/7 {
		for _, low := range []int{1, 9, 300} {
			got := changetest.Search(low, func(n int) bool { return n >= least })
			want := max(low, least)
			if !got.Reachable || got.Groups < want || float64(got.Groups) > 1.06*float64(want)+1 {
				t.Errorf("least %d, from %d: got %+v", least, low, got)
			}
		}
	}
	if got := changetest.Search(5, func(int) bool { return false }); got.Reachable {
		t.Errorf("what nothing settles: got %+v", got)
	}
	if got := changetest.Search(changetest.NeededMax+1, func(int) bool { return true }); got.Reachable {
		t.Errorf("beyond the largest number: got %+v", got)
	}
}

// A small old basis leaves the spread open for ever; the figure as published does not.
func TestPublishedAnswersWhereTheOldBasisCannot(t *testing.T) {
	groups := groupsOf(laws[0].draw(rand.New(rand.NewPCG(9, 9)), 300), 1, 0, 1)
	res := mustCompare(t, changetest.Request{InForce: standard(), Groups: groups, Looks: 1})
	if c := res.Spread; c.Decision != changetest.NotEnoughData || c.Needed.Reachable || c.Published.Decision != changetest.Keep || !strings.Contains(c.Sentence, "Taken as it is published") {
		t.Errorf("seed 9,9: got %+v", c)
	}
}

// A signal takes the validity of p, and looks add up: 1-(1-0.05)^k.
func TestTriggerAndLooks(t *testing.T) {
	req := changetest.Request{InForce: standard(), Groups: groupsOf(laws[0].draw(rand.New(rand.NewPCG(10, 1)), 50), 1, 0, 1), Looks: 1}
	planned := mustCompare(t, req)
	if !planned.Centre.PValid || planned.Centre.PReason != "" || !near(planned.Looks.OneWrongMax, 0.05, 1e-12) {
		t.Errorf("planned: got %+v, looks %+v", planned.Centre, planned.Looks)
	}
	req.Trigger, req.Looks = changetest.AfterSignal, 4
	after := mustCompare(t, req)
	if after.Centre.PValid || after.Spread.PValid || !strings.Contains(after.Centre.PReason, "looked bad") || !strings.Contains(after.Sentence, "because of a signal") {
		t.Errorf("after a signal: got %+v, %q", after.Centre, after.Sentence)
	}
	if !near(after.Looks.OneWrongMax, 1-0.95*0.95*0.95*0.95, 1e-12) || !strings.Contains(after.Sentence, "look 4") || !strings.Contains(after.Sentence, "19 %") {
		t.Errorf("four looks: got %+v, %q", after.Looks, after.Sentence)
	}
	if *after.Centre.Interval != *planned.Centre.Interval || after.Centre.Decision != planned.Centre.Decision {
		t.Error("trigger and looks changed an interval")
	}
}

// The decision of the whole is CHANGE as soon as one figure says so, KEEP only where all do.
func TestTheWhole(t *testing.T) {
	f := standard()
	f.CentreTarget, f.SigmaTarget, f.Estimator = true, true, limits.Overall
	xs := laws[0].draw(rand.New(rand.NewPCG(11, 1)), 400)
	seen := map[string]bool{}
	for _, c := range []struct {
		n            int
		shift, scale float64
		want         changetest.Decision
	}{
		{400, 0, 1, changetest.Keep},
		{400, 1, 1, changetest.Change},
		{400, 0, 2, changetest.Change},
		{20, 0, 1, changetest.NotEnoughData},
		{0, 0, 1, changetest.NotEnoughData},
	} {
		res := mustCompare(t, changetest.Request{InForce: f, Groups: groupsOf(xs[:c.n], 1, c.shift, c.scale), Looks: 1})
		if res.Decision != c.want {
			t.Errorf("%+v: got %s of %s and %s", c, res.Decision, res.Centre.Decision, res.Spread.Decision)
		}
		seen[strings.Fields(res.Sentence)[0]] = true
		for _, s := range []string{res.Sentence, res.Centre.Sentence, res.Spread.Sentence} {
			if s == "" || strings.Contains(s, "%!") || !strings.HasSuffix(s, ".") {
				t.Errorf("%+v: got the sentence %q", c, s)
			}
		}
	}
	if len(seen) != 3 {
		t.Errorf("the sentences begin with %v, want three kinds", seen)
	}
}

// Without a single result there is a plan. Old limits from 40 results by moving ranges leave the spread open whatever
// comes. Against the figure as published, both ends of √(χ²/v) must come within 1.25; the normal approximation ln 1.25 =
// 1.96/√(2v) gives v = 39, and the skewness of χ² some more.
func TestPlanWithoutResults(t *testing.T) {
	c := mustCompare(t, changetest.Request{InForce: standard(), Looks: 1}).Spread
	if c.Needed.Reachable || !c.Published.Needed.Reachable || !strings.Contains(c.Sentence, "The old basis is too small") {
		t.Fatalf("got %+v, %q", c, c.Sentence)
	}
	v := 10.0
	within := func(p float64) bool {
		root := math.Sqrt(distuv.ChiSquared{K: v}.Quantile(p) / v)
		return 1/root <= 1.25 && root <= 1.25
	}
	for !within(0.025) || !within(0.975) {
		v++
	}
	if v < 39 || v > 55 {
		t.Fatalf("got v = %g, want somewhat more than 39", v)
	}
	res, err := limits.Compute(limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: plainGroups(c.Published.Needed.Groups)})
	if err != nil {
		t.Fatal(err)
	}
	if got := res.Estimates[0].DegreesOfFreedom; got < v-1.5 || got > 1.06*v+1.5 {
		t.Errorf("%d results have %.1f degrees of freedom, want %g or up to a twentieth more", c.Published.Needed.Groups, got, v)
	}
}

func plainGroups(n int) (groups []limits.Group) {
	for i := range n {
		groups = append(groups, limits.Group{Readings: []float64{float64(i * i % 7)}})
	}
	return groups
}

// Unequal subgroups: the centre is the mean of all readings, the scatter of the means the mean square between subgroups of
// the analysis of variance over the nominal size, both from the definition.
func TestUnequalSubgroups(t *testing.T) {
	r := rand.New(rand.NewPCG(12, 12))
	var groups []changetest.Group
	var all []float64
	for i := range 12 {
		xs := laws[0].draw(r, 1+i%4)
		groups = append(groups, groupsOf(xs, len(xs), 0, 1)...)
		all = append(all, groups[i].Readings...)
	}
	mean, between := 0.0, 0.0
	for _, x := range all {
		mean += x / float64(len(all))
	}
	for _, g := range groups {
		sum := 0.0
		for _, x := range g.Readings {
			sum += x - mean
		}
		between += sum * sum / float64(len(g.Readings)) / 11
	}
	f := standard()
	f.Kind, f.SubgroupSize, f.Estimator, f.Readings = chart.XbarS, 4, limits.SBar, 160
	res := mustCompare(t, changetest.Request{InForce: f, Groups: groups, Looks: 1})
	if !near(*res.Centre.New, mean, 1e-12) || !near(*res.Centre.Estimate, (mean-10)*2, 1e-9) {
		t.Errorf("seed 12,12: got the centre %g, %g sigmas away, want %g", *res.Centre.New, *res.Centre.Estimate, mean)
	}
	c4, _ := limits.C4(12)
	if want := math.Sqrt(between/4) / c4; !near(*res.Means.New, want, 1e-9) || res.Readings != len(all) {
		t.Errorf("seed 12,12: got the sigma of means %g of %d readings, want %g", *res.Means.New, res.Readings, want)
	}
}

// Subgroups with one and the same mean say that something is wrong with them; what varies within is still compared.
func TestEqualMeans(t *testing.T) {
	var groups []changetest.Group
	for i := range 12 {
		x := float64(1 + i%3)
		groups = append(groups, changetest.Group{Group: limits.Group{Readings: []float64{10 - x, 10, 10 + x}}})
	}
	f := standard()
	f.Kind, f.SubgroupSize, f.Readings = chart.XbarR, 3, 120
	f.Estimator = limits.DefaultEstimator
	res := mustCompare(t, changetest.Request{InForce: f, Groups: groups, Looks: 1})
	if res.Centre.Reason != changetest.NoSpread || res.Means.Reason != changetest.NoSpread || res.Spread.Interval == nil || res.Decision == changetest.Keep {
		t.Errorf("got %+v, %+v, %+v", res.Centre, res.Means, res.Spread)
	}
	// R-bar is 4 and d2 of three readings 1.693 (printed in any table, from memory); it is the default of the kind.
	if res.Estimator != limits.RBar || !near(*res.Spread.New, 4/1.693, 1e-3) {
		t.Errorf("got sigma %g by %s, want %g by %s", *res.Spread.New, res.Estimator, 4/1.693, limits.RBar)
	}
}

func TestNames(t *testing.T) {
	for _, c := range []struct {
		got  fmt.Stringer
		want string
	}{
		{changetest.Keep, "KEEP"}, {changetest.Change, "CHANGE"}, {changetest.NotEnoughData, "NOT_ENOUGH_DATA"},
		{changetest.Settled, "SETTLED"}, {changetest.TooFew, "TOO_FEW"}, {changetest.NoSpread, "NO_SPREAD"},
		{changetest.TooCorrelated, "TOO_CORRELATED"}, {changetest.Straddles, "STRADDLES"}, {changetest.Reason(9), "unknown"},
		{changetest.Planned, "planned"}, {changetest.AfterSignal, "after_signal"}, {changetest.Trigger(9), "unknown"},
	} {
		if c.got.String() != c.want {
			t.Errorf("got %s, want %s", c.got, c.want)
		}
	}
}

func ExampleCompare() {
	var groups []changetest.Group
	for _, x := range []float64{54.1, 52.9, 55.0, 53.2, 56.4, 51.8, 54.6, 53.3, 57.0, 54.9, 52.5, 55.8} {
		groups = append(groups, changetest.Group{Group: limits.Group{Readings: []float64{x}, Decimals: 1}})
	}
	res, err := changetest.Compare(changetest.Request{
		InForce: changetest.InForce{
			Kind: chart.Individuals, SubgroupSize: 1, Centre: 50, Sigma: 2, Groups: 30, Readings: 30,
			Estimator: limits.MeanMovingRange, DegreesOfFreedom: 18.2,
		},
		Groups: groups, Looks: 2,
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(res.Centre.Decision, res.Centre.Sentence)
	fmt.Println(res.Spread.Decision, res.Spread.Sentence)
	fmt.Println(res.Sentence)
	// Output:
	// CHANGE Change the centre: the new centre is 2.15 sigmas from the one in force, with a 95 % interval of 1.54 to 2.75 sigmas, all of which matters; what matters begins outside -0.50 to 0.50 sigmas.
	// NOT_ENOUGH_DATA There are not enough data on the spread: the new spread is 1.15 times the old, with a 95 % interval of 0.64 to 2.37 times the old, which holds both no difference and one that matters; what matters begins outside 0.80 to 1.25 times the old. The old basis is too small for any number of new ones to settle it. For the figure as it is published, about 257 new results in all would settle it, if the rest looks like these.
	// Change the limits, once the cause is understood: something that matters has changed. New results compared: 12; left out: 0 of the old basis, 0 excluded. This is look 2 in twelve months; the chance that the interval of at least one of them is wrong is up to 10 %.
}
