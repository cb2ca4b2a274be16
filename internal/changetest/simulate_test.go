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

// law draws a series of mean 0 and standard deviation 1.
type law struct {
	name string
	draw func(r *rand.Rand, n int) []float64
}

func independent(one func(r *rand.Rand) float64) func(*rand.Rand, int) []float64 {
	return func(r *rand.Rand, n int) []float64 {
		xs := make([]float64, n)
		for i := range xs {
			xs[i] = one(r)
		}
		return xs
	}
}

var laws = []law{
	{"normal", independent((*rand.Rand).NormFloat64)},
	{"t(5)", independent(func(r *rand.Rand) float64 {
		chi := 0.0
		for range 5 {
			z := r.NormFloat64()
			chi += z * z
		}
		return r.NormFloat64() / math.Sqrt(chi/5) / math.Sqrt(5./3)
	})},
	{"gamma(4)", independent(func(r *rand.Rand) float64 { // skewness 1, kurtosis 4.5
		sum := 0.0
		for range 4 {
			sum += r.ExpFloat64()
		}
		return (sum - 4) / 2
	})},
	{"AR(1) 0.3", func(r *rand.Rand, n int) []float64 {
		xs := make([]float64, n)
		x := r.NormFloat64()
		for i := range xs {
			xs[i] = x
			x = 0.3*x + math.Sqrt(1-0.09)*r.NormFloat64()
		}
		return xs
	}},
}

// design is the shape of a comparison: groups of the old basis and of the new side.
type design struct {
	kind      chart.Kind
	size      int
	estimator limits.Estimator
	old, now  int
}

func (d design) String() string {
	return fmt.Sprintf("%s %d, %s, old %d, new %d", d.kind, d.size, d.estimator, d.old, d.now)
}

const places = 1e4 // readings are written with four decimals, as measured values have few

func groupsOf(xs []float64, size int, shift, scale float64) []changetest.Group {
	var groups []changetest.Group
	for i := 0; i < len(xs); i += size {
		g := changetest.Group{Group: limits.Group{Decimals: 4}}
		for _, x := range xs[i : i+size] {
			g.Readings = append(g.Readings, math.Round((10+shift+scale*x)*places)/places)
		}
		groups = append(groups, g)
	}
	return groups
}

func inForce(t testing.TB, d design, groups []changetest.Group) changetest.InForce {
	t.Helper()
	plain := make([]limits.Group, len(groups))
	for i, g := range groups {
		plain[i] = g.Group
	}
	kind := d.kind
	if kind == chart.RunMeans { // what is within runs is estimated alike
		kind = chart.XbarS
	}
	res, err := limits.Compute(limits.Request{Kind: kind, SubgroupSize: d.size, Groups: plain, Estimator: d.estimator})
	if err != nil {
		t.Fatal(err)
	}
	f := changetest.InForce{Kind: d.kind, SubgroupSize: d.size, Centre: *res.Location.Centre, Sigma: res.ProcessSigma, Groups: res.N, Readings: res.Readings, Estimator: d.estimator}
	for _, e := range res.Estimates {
		if e.Chosen {
			f.DegreesOfFreedom = e.DegreesOfFreedom
		}
	}
	if d.kind == chart.RunMeans {
		means := meansSigma(groups)
		f.BetweenSigma = ptr(math.Sqrt(math.Max(0, means*means-f.Sigma*f.Sigma/float64(d.size))))
	}
	return f
}

// rates of a simulation, per figure: shares of the runs, but covered is of those with an interval.
type rates struct {
	interval, covered, published, change, keep, differs, plain float64
}

func (r *rates) add(c *changetest.Comparison, truth, asPublished float64) {
	count := func(to *float64, yes bool) {
		if yes {
			*to++
		}
	}
	count(&r.interval, c.Interval != nil)
	count(&r.covered, c.Interval != nil && c.Interval.Lower <= truth && truth <= c.Interval.Upper)
	count(&r.published, c.Published != nil && c.Published.Interval.Lower <= asPublished && asPublished <= c.Published.Interval.Upper)
	count(&r.change, c.Decision == changetest.Change)
	count(&r.keep, c.Decision == changetest.Keep)
	count(&r.differs, c.Differs)
	count(&r.plain, c.Plain != nil && c.Plain.P < 0.05)
}

func (r *rates) over(runs float64) {
	r.covered /= r.interval
	r.published /= r.interval
	for _, x := range []*float64{&r.interval, &r.change, &r.keep, &r.differs, &r.plain} {
		*x /= runs
	}
}

// scenario is what is true of the new side, and what is known of the old one: its mean shifted by so many published sigmas of the plotted statistic, its
// readings scaled, and a component between subgroups of so many sigmas on both sides. Targets hold the truth; means tells the scatter of the
// old means.
type scenario struct {
	shift, scale, between float64
	target, means         bool
}

var unchanged = scenario{scale: 1}

// run simulates comparisons, of the centre, of the spread and, for charts of means, of their spread.
func run(t testing.TB, d design, l law, s scenario, runs int, seed uint64) (all [3]rates) {
	t.Helper()
	r := rand.New(rand.NewPCG(seed, 11))
	for range runs {
		basis := between(r, groupsOf(l.draw(r, d.old*d.size), d.size, 0, 1), s.between)
		old := inForce(t, d, basis)
		if s.means {
			sigma := meansSigma(basis)
			old.MeansSigma = &sigma
		}
		if s.target {
			old.Centre, old.Sigma, old.CentreTarget, old.SigmaTarget = 10, 1, true, true
		}
		unit := old.Sigma / math.Sqrt(float64(d.size))
		if old.BetweenSigma != nil {
			unit = math.Hypot(unit, *old.BetweenSigma)
		}
		now := between(r, groupsOf(l.draw(r, d.now*d.size), d.size, s.shift*unit, s.scale), s.between)
		res, err := changetest.Compare(changetest.Request{InForce: old, Groups: now, Looks: 1})
		if err != nil {
			t.Fatal(err)
		}
		all[0].add(res.Centre, s.shift, (10+s.shift*unit-old.Centre)/unit)
		all[1].add(res.Spread, s.scale, s.scale/old.Sigma)
		if res.Means != nil {
			all[2].add(res.Means, s.scale, s.scale/math.Sqrt(float64(d.size))/unit)
		}
	}
	for i := range all {
		all[i].over(float64(runs))
	}
	return all
}

// between shifts whole subgroups.
func between(r *rand.Rand, groups []changetest.Group, sigma float64) []changetest.Group {
	if sigma > 0 {
		for _, g := range groups {
			shift := sigma * r.NormFloat64()
			for j := range g.Readings {
				g.Readings[j] = math.Round((g.Readings[j]+shift)*places) / places
			}
		}
	}
	return groups
}

// four standard errors of a share p over runs.
func four(p float64, runs int) float64 { return 4 * math.Sqrt(p*(1-p)/float64(runs)) }

func meansSigma(groups []changetest.Group) float64 {
	means := make([]float64, len(groups))
	for i, g := range groups {
		for _, x := range g.Readings {
			means[i] += x / float64(len(g.Readings))
		}
	}
	return limits.StandardDeviation(means)
}
