package diagnostics

import (
	"iter"
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// group is one group of the basis that is used.
type group struct {
	// index in the request.
	index int
	// readings as written, and judged: transformed and standardised as the chart judges them.
	readings, judged []float64
	count            *chart.Count
	// joined says that no exclusion and no break lies between this group and the one before.
	joined bool
}

// material is what a request holds for the tests.
type material struct {
	kind   chart.Kind
	groups []group
	// readings as written and judged, of all groups in order; step is the rounding step of the judged ones where most of
	// them lie, as the grid's step becomes on the judged scale.
	readings, judged []float64
	grid             grid
	step             float64
	// deviations of the judged readings from origin, which lies among them, in units of scale, the largest.
	deviations    []float64
	origin, scale float64
	// values and means are what should be normal; means is nil for individuals.
	values, means *sample
}

// materialOf takes up what is used of a request. It is lenient: groups that limits would refuse are left out.
func materialOf(req *limits.Request) *material {
	m := &material{kind: req.Kind}
	joined := false
	for i := range req.Groups {
		source := &req.Groups[i]
		g, ok := groupOf(req, source)
		if source.Excluded || !ok {
			joined = false
			continue
		}
		g.index, g.joined = i, joined && !source.BreakBefore
		m.groups = append(m.groups, g)
		m.readings, m.judged = append(m.readings, g.readings...), append(m.judged, g.judged...)
		joined = true
	}
	return m
}

// groupOf gives what a group holds on the judged scale; ok is false where that is nothing.
func groupOf(req *limits.Request, source *limits.Group) (g group, ok bool) {
	if req.Kind.Counts() {
		c := source.Count
		return group{count: c}, c != nil && c.Inspected > 0 && c.Nonconforming >= 0 && finite(c.Inspected) && finite(c.Nonconforming)
	}
	model := chart.Model{Transform: req.Transform, Levels: req.Levels}
	g.readings, g.judged = source.Readings, source.Readings
	if model.Scaled() {
		g.judged = make([]float64, len(g.readings))
	}
	for i, x := range g.readings {
		if !(math.Abs(x) <= limits.MagnitudeMax) {
			return group{}, false
		}
		if !model.Scaled() {
			continue
		}
		if g.judged[i], ok = model.OnScale(x, source.Material); !ok || !(math.Abs(g.judged[i]) <= limits.MagnitudeMax) {
			return group{}, false
		}
	}
	return g, len(g.readings) > 0 && (req.Kind != chart.Individuals || len(g.readings) == 1)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// prepare finds the grid and the samples of readings.
func (m *material) prepare(req *limits.Request) {
	m.grid = gridOf(m.readings)
	m.step = m.judgedStep(req)
	m.deviations, m.origin, m.scale = deviationsOf(m.judged)
	if m.kind == chart.Individuals {
		m.values = newSample(IndividualValues, slices.Clone(m.deviations), m.origin, m.scale, m.step)
		return
	}
	m.values, m.means = m.within(), m.between()
}

// judgedStep is what a step at the median reading is on the judged scale.
func (m *material) judgedStep(req *limits.Request) float64 {
	if m.grid.step == 0 || req.Transform.Kind == chart.Identity && len(req.Levels) == 0 {
		return m.grid.step
	}
	if len(req.Levels) > 0 {
		var sigmas []float64
		for _, g := range m.groups {
			level, _ := (&chart.Model{Levels: req.Levels}).LevelOf(req.Groups[g.index].Material)
			sigmas = append(sigmas, level.Sigma)
		}
		slices.Sort(sigmas)
		return m.grid.step / sigmas[len(sigmas)/2]
	}
	ordered := slices.Clone(m.readings)
	slices.Sort(ordered)
	middle := ordered[len(ordered)/2]
	upper, _ := req.Transform.Apply(middle + m.grid.step)
	here, _ := req.Transform.Apply(middle)
	return upper - here
}

// within gives what is left of readings without the means of their subgroups, each with the variance of a reading. From
// four readings on these are the residuals times √(n/(n-1)): their correlation, -1/(n-1), takes from the empirical
// distribution nearly what estimating one mean takes from that of independent values. From two or three it is n-1
// independent contrasts, each next reading against the mean of those before it times √(j/(j+1)), since residuals of so
// few mirror each other.
func (m *material) within() *sample {
	out := make([]float64, 0, len(m.deviations))
	for own := range m.subgroups() {
		if len(own) > 1 {
			out = append(out, contrasts(own)...)
		}
	}
	for i, e := range out {
		if math.Abs(e) < roundingNoise {
			out[i] = 0
		}
	}
	return newSample(IndividualValues, out, 0, m.scale, m.step)
}

// roundingNoise is what equal deviations, none larger than one, may seem to differ by.
const roundingNoise = 1e-14

// subgroups gives the deviations of each group.
func (m *material) subgroups() iter.Seq[[]float64] {
	return func(yield func([]float64) bool) {
		at := 0
		for _, g := range m.groups {
			at += len(g.judged)
			if !yield(m.deviations[at-len(g.judged) : at]) {
				return
			}
		}
	}
}

// contrasts turns the deviations of one subgroup into the values described at within.
func contrasts(e []float64) []float64 {
	n := len(e)
	if n >= 4 {
		mean := sum(e) / float64(n)
		out := make([]float64, n)
		for i := range e {
			out[i] = (e[i] - mean) * math.Sqrt(float64(n)/float64(n-1))
		}
		return out
	}
	out := make([]float64, 0, 2)
	before := e[0]
	for j := 1; j < n; j++ {
		k := float64(j)
		out = append(out, (e[j]-before)*math.Sqrt(k/(k+1)))
		before += (e[j] - before) / (k + 1)
	}
	return out
}

func sum(xs []float64) float64 {
	total := 0.0
	for _, x := range xs {
		total += x
	}
	return total
}

// between gives the means of subgroups, less the mean of all, times √(n/n̄): readings being all that varies, they then
// have one sigma. Means of runs vary between runs, whatever the number of their readings, and are left as they are.
func (m *material) between() *sample {
	means := make([]float64, 0, len(m.groups))
	for own := range m.subgroups() {
		means = append(means, sum(own)/float64(len(own)))
	}
	size := float64(len(m.judged)) / float64(len(m.groups))
	if m.kind != chart.RunMeans {
		grand := sum(m.deviations) / float64(len(m.deviations))
		for i, g := range m.groups {
			means[i] = (means[i] - grand) * math.Sqrt(float64(len(g.judged))/size)
		}
	}
	return newSample(SubgroupMeans, means, m.origin, m.scale, m.step/size)
}
