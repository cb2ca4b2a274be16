package changetest_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

// countLaw draws nonconformities of mean 1 in so many units, from one sample to the next with a gamma-distributed rate of
// so many shapes, where there are any: a variance of μ + μ²/shape.
type countLaw struct {
	mean  float64
	shape int
}

func (l countLaw) String() string {
	if l.shape == 0 {
		return fmt.Sprintf("Poisson %g", l.mean)
	}
	return fmt.Sprintf("mean %g, variance factor %.2g", l.mean, 1+l.mean/float64(l.shape))
}

func (l countLaw) draw(r *rand.Rand, scale, units float64) float64 {
	mean := l.mean * scale * units
	if l.shape > 0 {
		sum := 0.0
		for range l.shape {
			sum += r.ExpFloat64()
		}
		mean *= sum / float64(l.shape)
	}
	count, left := 0.0, mean // unit exponential gaps up to the mean
	for left -= r.ExpFloat64(); left > 0; left -= r.ExpFloat64() {
		count++
	}
	return count
}

func (l countLaw) groups(r *rand.Rand, n int, scale float64, sizes []float64) []changetest.Group {
	groups := make([]changetest.Group, n)
	for i := range groups {
		units := sizes[i%len(sizes)]
		groups[i] = counted(l.draw(r, scale, units), units)
	}
	return groups
}

func counted(count, inspected float64) changetest.Group {
	return changetest.Group{Group: limits.Group{Count: &chart.Count{Nonconforming: count, Inspected: inspected}}}
}

// countsInForce are limits computed from the groups; false where they have none.
func countsInForce(kind chart.Kind, size int, groups []changetest.Group, extra limits.ExtraVariation) (f changetest.InForce, ok bool) {
	plain := make([]limits.Group, len(groups))
	inspected := 0.0
	for i, g := range groups {
		plain[i] = g.Group
		inspected += g.Count.Inspected
	}
	res, err := limits.Compute(limits.Request{Kind: kind, SubgroupSize: size, Groups: plain, Counts: limits.CountOptions{Extra: extra, Method: chart.Normal}})
	if err != nil {
		return f, false
	}
	return changetest.InForce{Kind: kind, SubgroupSize: size, Centre: *res.Location.Centre, Groups: res.N, Inspected: inspected, Model: res.Model}, true
}

var one = []float64{1}

// The interval holds the true difference in 95 % of cases, or nearly, for counts that vary as counting has it and for
// those that vary more, where the plain test finds changes that are none in up to half of them. A shift of one sigma
// beside none shows that the interval follows it.
func TestCountsCoverage(t *testing.T) {
	for i, c := range []struct {
		law      countLaw
		old, now int
		sizes    []float64
		target   bool
		extra    limits.ExtraVariation
		short    float64 // allowed beyond chance: the price of few counts, or of a factor from few samples
		shift    float64
	}{
		{countLaw{mean: 0.5}, 30, 20, one, false, limits.NoExtra, 0.005, 0},
		{countLaw{mean: 0.5}, 30, 20, one, true, limits.NoExtra, 0.005, 0},
		{countLaw{mean: 0.5}, 30, 60, one, false, limits.NoExtra, 0.005, 1},
		{countLaw{mean: 4}, 30, 10, one, false, limits.NoExtra, 0.005, 0},
		{countLaw{mean: 4}, 25, 30, one, false, limits.NoExtra, 0.005, 1},
		{countLaw{mean: 4}, 25, 30, one, true, limits.NoExtra, 0.005, 0},
		{countLaw{mean: 30}, 25, 20, one, false, limits.NoExtra, 0.005, 0},
		{countLaw{mean: 30}, 25, 50, one, false, limits.NoExtra, 0.005, 1},
		{countLaw{mean: 4, shape: 2}, 40, 20, one, false, limits.NoExtra, 0.01, 0},
		{countLaw{mean: 4, shape: 2}, 40, 20, one, true, limits.NoExtra, 0.01, 0},
		{countLaw{mean: 4, shape: 2}, 40, 60, one, false, limits.LaneyFactor, 0.01, 0},
		{countLaw{mean: 30, shape: 30}, 25, 20, one, false, limits.LaneyFactor, 0.01, 0},
		{countLaw{mean: 4, shape: 2}, 40, 40, []float64{0.5, 1, 1, 4}, false, limits.BetweenSamples, 0.01, 0},
		{countLaw{mean: 4, shape: 4}, 40, 40, []float64{0.5, 1, 1, 4}, false, limits.NoExtra, 0.01, 1},
	} {
		t.Run(fmt.Sprintf("%v, old %d, new %d, target %t, extra %d, %d sizes, shift %g", c.law, c.old, c.now, c.target, c.extra, len(c.sizes), c.shift), func(t *testing.T) {
			t.Parallel()
			const runs = 500
			r, got, sum := rand.New(rand.NewPCG(uint64(i), 17)), rates{}, 0.0
			for range runs {
				f, ok := countsInForce(chart.U, 1, c.law.groups(r, c.old, 1, c.sizes), c.extra)
				if !ok {
					continue
				}
				if c.target {
					f.Centre, f.CentreTarget = c.law.mean, true
				}
				unit, _ := limits.CountSigma(chart.U, f.Centre, f.Model.Inspected, &f.Model)
				apart := c.shift * math.Sqrt(c.law.mean)
				res := mustCompare(t, changetest.Request{InForce: f, Groups: c.law.groups(r, c.now, 1+apart/c.law.mean, c.sizes), Looks: 1})
				got.add(res.Centre, apart/unit, (c.law.mean+apart-f.Centre)/unit)
				sum++
			}
			got.over(sum)
			t.Logf("seed %d,17, %g runs: misses of the 95 %% interval %.3f (as published %.3f; plain test finds a difference in %.3f); CHANGE %.3f, KEEP %.3f, no interval %.3f",
				i, sum, 1-got.covered, 1-got.published, got.plain, got.change, got.keep, 1-got.interval)
			chance := four(0.05, int(sum))
			atLeast(t, "coverage", got.covered, 0.95-c.short-chance)
			atLeast(t, "coverage as published", got.published, 0.95-c.short-0.015-chance)
			atMost(t, "coverage", got.covered, 0.985+chance)
			atLeast(t, "share with an interval", got.interval, 0.97)
			if c.shift == 0 {
				atMost(t, "CHANGE", got.change, 0.01+four(0.01, runs))
			}
			if c.law.shape > 0 && c.shift == 0 {
				atLeast(t, "plain test, which is to be replaced", got.plain, 0.10)
			}
		})
	}
}

// φ is by how much the variance of the pooled mean exceeds that of counting, also where sizes differ: rates of variance s²
// about μ give 1 + s²/μ·Σn²/N (from the definition of a weighted mean).
func TestDispersionOfUnequalSizes(t *testing.T) {
	law, sizes, n := countLaw{mean: 20, shape: 5}, []float64{0.5, 1, 1, 4}, 200
	f := changetest.InForce{Kind: chart.U, SubgroupSize: 1, Centre: law.mean, CentreTarget: true, Model: chart.Model{Inspected: 1, CountMethod: chart.Normal}}
	r, sum, squares := rand.New(rand.NewPCG(61, 1)), 0.0, 0.0
	const runs = 150
	for range runs {
		phi := mustCompare(t, changetest.Request{InForce: f, Groups: law.groups(r, n, 1, sizes), Looks: 1}).Dispersion
		sum += phi
		squares += phi * phi
	}
	mean := sum / runs
	standardError := math.Sqrt((squares/runs - mean*mean) / runs)
	want := 1 + law.mean/float64(law.shape)*(0.25+1+1+16)/6.5
	if math.Abs(mean-want) > 4*standardError || standardError > want/20 {
		t.Errorf("seed 61,1: got a mean φ of %.3f, standard error %.3f, want %.3f", mean, standardError, want)
	}
}
