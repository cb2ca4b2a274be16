package changetest_test

import (
	"fmt"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// shortest holds how far the coverage of an interval may fall short of 0.95, beyond chance, by law: what the package
// comment admits. AR(1) is the price of estimating a correlation; t(5) that of tails that few results do not show.
type shortest struct{ centre, spread float64 }

var (
	moving = map[string]shortest{"normal": {0.005, 0.005}, "t(5)": {0.005, 0.025}, "gamma(4)": {0.005, 0.01}, "AR(1) 0.3": {0.015, 0.005}}
	ranges = map[string]shortest{"normal": {0.005, 0.005}, "t(5)": {0.005, 0.04}, "gamma(4)": {0.005, 0.02}, "AR(1) 0.3": {0.015, 0.005}}
	square = map[string]shortest{"normal": {0.005, 0.005}, "t(5)": {0.005, 0.05}, "gamma(4)": {0.005, 0.03}, "AR(1) 0.3": {0.015, 0.005}}
)

// Nothing has changed. The intervals hold that in 95 % of cases, or nearly, whatever the law, where the plain tests,
// which should find a change in 5 % of cases, do so far more often; and CHANGE is rare.
func TestNothingChanged(t *testing.T) {
	for _, c := range []struct {
		design  design
		news    []int
		allowed map[string]shortest
		runs    int
	}{
		{design{chart.Individuals, 1, limits.MeanMovingRange, 40, 0}, []int{20, 50, 100}, moving, 450},
		{design{chart.Individuals, 1, limits.MeanMovingRange, 25, 0}, []int{50}, moving, 250},
		{design{chart.Individuals, 1, limits.Overall, 50, 0}, []int{20, 50}, square, 300},
		{design{chart.XbarR, 4, limits.RBar, 30, 0}, []int{20}, ranges, 250},
		{design{chart.XbarS, 3, limits.Pooled, 25, 0}, []int{30}, square, 250},
	} {
		for _, n := range c.news {
			for i, l := range laws {
				d := c.design
				d.now = n
				t.Run(fmt.Sprintf("%s, %s", d, l.name), func(t *testing.T) {
					t.Parallel()
					checkUnchanged(t, d, l, c.allowed[l.name], c.runs, uint64(i))
				})
			}
		}
	}
}

func checkUnchanged(t *testing.T, d design, l law, allowed shortest, runs int, seed uint64) {
	s := unchanged
	s.means = d.size > 1
	all := run(t, d, l, s, runs, seed)
	centre, spread := all[0], all[1]
	t.Logf("seed %d,11: misses of 95 %% intervals: centre %.3f (plain t %.3f), spread %.3f (plain F %.3f), means %.3f; CHANGE %.3f %.3f; KEEP %.3f %.3f; no interval %.3f",
		seed, 1-centre.covered, centre.plain, 1-spread.covered, spread.plain, 1-all[2].covered, centre.change, spread.change, centre.keep, spread.keep, 1-centre.interval)
	chance := four(0.05, runs)
	atLeast(t, "coverage of the centre", centre.covered, 0.95-allowed.centre-chance)
	atLeast(t, "coverage of the spread", spread.covered, 0.95-allowed.spread-chance)
	atMost(t, "coverage of the centre", centre.covered, 0.975+chance)
	atMost(t, "coverage of the spread", spread.covered, 0.975+chance)
	atLeast(t, "share with an interval", centre.interval, 0.97)
	atMost(t, "CHANGE of the centre", centre.change, 0.005+four(0.005, runs))
	atMost(t, "CHANGE of the spread", spread.change, 0.01+four(0.01, runs))
	if d.size > 1 {
		atLeast(t, "coverage of the spread of means", all[2].covered, 0.95-square[l.name].spread-chance)
	}
	switch l.name {
	case "normal":
		atLeast(t, "coverage of the centre as published", centre.published, 0.945-chance)
		atLeast(t, "coverage of the spread as published", spread.published, 0.945-chance)
		atMost(t, "plain t under its own assumptions", centre.plain, 0.05+chance)
	case "t(5)":
		atLeast(t, "plain F, which is to be replaced", spread.plain, 0.06)
		atLeast(t, "plain F beyond ours", spread.plain-(1-spread.covered), 0.01)
	case "AR(1) 0.3":
		if d.size == 1 { // with subgroups, the means given, some of it is in their scatter
			atLeast(t, "plain t, which is to be replaced", centre.plain, 0.05+chance)
			atLeast(t, "plain t beyond ours", centre.plain-(1-centre.covered), 0.05)
		}
	}
}

func atLeast(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !(got >= want) {
		t.Errorf("%s: got %.4f, want at least %.4f", what, got, want)
	}
}

func atMost(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !(got <= want) {
		t.Errorf("%s: got %.4f, want at most %.4f", what, got, want)
	}
}
