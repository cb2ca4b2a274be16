package changetest_test

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

// A change that matters is found about as often as the formulas for known correlation and tails say: estimating those
// costs some power and must not add any. The shift of one sigma is CHANGE where the estimate passes 0.5 by t standard
// errors, the ratio of 1.5 where χ² passes its quantile times (1.25/1.5)².
func TestPower(t *testing.T) {
	const runs = 300
	shift := func(now, old float64) float64 {
		standardError := math.Sqrt(1/now + 1/old)
		return distuv.UnitNormal.CDF(0.5/standardError - changetest.TQuantile(0.975, now-1))
	}
	ratio := func(v float64) float64 {
		chi := distuv.ChiSquared{K: v}
		return chi.Survival(chi.Quantile(0.975) * (1.25 / 1.5) * (1.25 / 1.5))
	}
	for i, c := range []struct {
		design   design
		scenario scenario
		figure   int
		want     float64
	}{
		{design{chart.Individuals, 1, limits.MeanMovingRange, 40, 50}, scenario{shift: 1, scale: 1, target: true}, 0, shift(50, math.Inf(1))},
		{design{chart.Individuals, 1, limits.MeanMovingRange, 50, 100}, scenario{shift: -1, scale: 1}, 0, shift(100, 50)},
		{design{chart.XbarR, 4, limits.RBar, 40, 40}, scenario{shift: 1, scale: 1, means: true}, 0, shift(40, 40)},
		{design{chart.Individuals, 1, limits.Overall, 40, 100}, scenario{scale: 1.5, target: true}, 1, ratio(99)},
		{design{chart.XbarS, 5, limits.Pooled, 40, 30}, scenario{scale: 1.5, target: true}, 1, ratio(120)},
	} {
		t.Run(fmt.Sprintf("%s, %+v", c.design, c.scenario), func(t *testing.T) {
			t.Parallel()
			got := run(t, c.design, laws[0], c.scenario, runs, uint64(100+i))[c.figure]
			t.Logf("seed %d,11: CHANGE %.3f, want %.3f; leaves out no difference %.3f; plain %.3f", 100+i, got.change, c.want, got.differs, got.plain)
			atLeast(t, "CHANGE", got.change, c.want-0.15-four(c.want, runs))
			atMost(t, "CHANGE", got.change, c.want+0.01+four(c.want, runs))
			atMost(t, "KEEP", got.keep, 0)
			atLeast(t, "leaves out no difference", got.differs, 0.97)
			atLeast(t, "coverage", got.covered, 0.94-four(0.05, runs))
		})
	}
}

// Where the difference is exactly as large as the limit of relevance, either wrong word is said in at most 2.5 %.
func TestErrorRatesAtTheLimitOfRelevance(t *testing.T) {
	const runs = 300
	for i, c := range []struct {
		estimator limits.Estimator
		scenario  scenario
		figure    int
	}{
		{limits.MeanMovingRange, scenario{shift: 0.5, scale: 1, target: true}, 0},
		{limits.MeanMovingRange, scenario{shift: -0.5, scale: 1}, 0},
		{limits.Overall, scenario{scale: 1.25, target: true}, 1},
		{limits.Overall, scenario{scale: 1 / 1.25, target: true}, 1},
	} {
		d := design{chart.Individuals, 1, c.estimator, 50, 80}
		t.Run(fmt.Sprintf("%s, %+v", d, c.scenario), func(t *testing.T) {
			t.Parallel()
			got := run(t, d, laws[0], c.scenario, runs, uint64(200+i))[c.figure]
			t.Logf("seed %d,11: CHANGE %.3f, KEEP %.3f", 200+i, got.change, got.keep)
			atMost(t, "CHANGE", got.change, 0.025+four(0.025, runs))
			atMost(t, "KEEP", got.keep, 0.025+four(0.025, runs))
			atLeast(t, "both", got.change+got.keep, 0.005) // the limit is where either is about to be said
		})
	}
}

// Unequal spreads are what Welch's interval is for; the pooled t goes wrong where the smaller side scatters more. And
// subgroups that differ beyond the scatter within: the old centre is then less certain than sigma alone says.
func TestCentreCoversWhereTheSidesAreUnlike(t *testing.T) {
	const runs = 300
	for i, c := range []struct {
		design   design
		scenario scenario
		plain    float64 // at least so often does the plain t find a change, where it is to be replaced
	}{
		{design{chart.Individuals, 1, limits.Overall, 50, 15}, scenario{scale: 3}, 0.10},
		{design{chart.Individuals, 1, limits.Overall, 25, 100}, scenario{scale: 1. / 3}, 0.10},
		{design{chart.XbarR, 4, limits.RBar, 25, 40}, scenario{scale: 1, between: 1.5}, 0.10},
		{design{chart.XbarR, 4, limits.RBar, 25, 40}, scenario{scale: 1, between: 1.5, means: true}, 0},
		{design{chart.RunMeans, 3, limits.Pooled, 25, 40}, scenario{scale: 1, between: 1.5}, 0},
	} {
		t.Run(fmt.Sprintf("%s, %+v", c.design, c.scenario), func(t *testing.T) {
			t.Parallel()
			all := run(t, c.design, laws[0], c.scenario, runs, uint64(300+i))
			got := all[0]
			t.Logf("seed %d,11: misses %.3f, plain t %.3f", 300+i, 1-got.covered, got.plain)
			atLeast(t, "coverage", got.covered, 0.94-four(0.05, runs))
			if c.scenario.means || c.design.kind == chart.RunMeans {
				atLeast(t, "coverage of the spread of means", all[2].covered, 0.94-four(0.05, runs))
			}
			atLeast(t, "plain t, which is to be replaced", got.plain, c.plain)
		})
	}
}
