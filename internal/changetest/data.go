package changetest

import (
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// fresh is the new side: the groups used, as deviations from the centre in force in units of the process sigma in force,
// so that nothing cancels or overflows later.
type fresh struct {
	readings [][]float64 // of each group
	means    []float64
	// joined[i] says that group i followed group i-1 without a break, an exclusion or a result of the old basis between.
	joined []bool
	total  int // readings in all
	size   int // nominal

	excluded, inOldBasis int
	estimates            []limits.Estimate
	// parts are the degrees of freedom of sets of duplicates by the part of the sigma in force that they lie in.
	parts []float64
}

// inBasis is the reason by which groups of the old basis are kept from the estimators.
const inBasis = "in the basis of the limits in force"

// gather checks the groups, takes up the new ones and estimates their sigma by every estimator of the kind.
func gather(req *Request) (*fresh, error) {
	if req.InForce.Kind.Duplicates() {
		return gatherDuplicates(req)
	}
	d := &fresh{size: req.InForce.SubgroupSize}
	groups := req.newGroups()
	if err := d.estimateAll(&req.InForce, groups); err != nil {
		return nil, err
	}
	for i := range d.estimates {
		d.estimates[i].Sigma /= req.InForce.Sigma
	}
	return d, d.take(req, groups)
}

// newGroups are the groups with those of the old basis excluded.
func (r *Request) newGroups() []limits.Group {
	groups := make([]limits.Group, len(r.Groups))
	for i, g := range r.Groups {
		groups[i] = g.Group
		if g.InOldBasis && !g.Excluded {
			groups[i].Excluded, groups[i].ExclusionReason = true, inBasis
		}
	}
	return groups
}

// estimateAll estimates sigma of the groups by every estimator of the kind. Centre and sigma given mean that package
// limits publishes nothing from the groups, and so refuses none of them for what it could not publish. The estimates come
// along all the same.
func (d *fresh) estimateAll(f *InForce, groups []limits.Group) error {
	zero, one := 0.0, 1.0
	res, err := limits.Compute(limits.Request{Kind: f.estimating(), SubgroupSize: f.SubgroupSize, Groups: groups, Centre: &zero, Sigma: &one})
	d.estimates = res.Estimates
	return err
}

func (d *fresh) take(req *Request, groups []limits.Group) error {
	joined := false
	for i, g := range groups {
		switch {
		case req.Groups[i].InOldBasis:
			d.inOldBasis++
			joined = false
		case g.Excluded:
			d.excluded++
			joined = false
		default:
			deviations, err := req.InForce.deviations(i, g.Readings)
			if err != nil {
				return err
			}
			d.add(deviations, joined && !g.BreakBefore)
			joined = true
		}
	}
	return nil
}

// apartMax bounds how many sigmas in force a reading may lie from the centre in force, and spreadMin the part of that sigma
// that a spread must have: beyond either no process has changed, but a unit.
const (
	apartMax  = 1e9
	spreadMin = 1e-9
)

// deviations of the readings of group i from the centre, in process sigmas.
func (f *InForce) deviations(i int, readings []float64) ([]float64, error) {
	apart := make([]float64, len(readings))
	for j, x := range readings {
		apart[j] = decimal.Difference(x, f.Centre, decimal.Unrounded) / f.Sigma
		if math.Abs(apart[j]) > apartMax {
			return nil, refuse(fmt.Sprintf("groups[%d].readings[%d]", i, j), x,
				"lies %.3g sigmas from the centre in force, %g, more than the limit of %g; is it in the same unit?", apart[j], f.Centre, apartMax)
		}
	}
	return apart, nil
}

func (d *fresh) add(deviations []float64, joined bool) {
	d.readings = append(d.readings, deviations)
	d.means = append(d.means, mean(deviations))
	d.joined = append(d.joined, joined)
	d.total += len(deviations)
}

// weight is the number of nominal groups that the readings make up; group i counts share(i) of one.
func (d *fresh) weight() float64       { return float64(d.total) / float64(d.size) }
func (d *fresh) share(i int) float64   { return float64(len(d.readings[i])) / float64(d.size) }
func (d *fresh) groups() int           { return len(d.means) }
func (d *fresh) freedomMeans() float64 { return float64(len(d.means) - 1) }

// level is the mean of all readings.
func (d *fresh) level() float64 {
	sum := 0.0
	for i, m := range d.means {
		sum += m * d.share(i)
	}
	return sum / d.weight()
}

// meansSigma is the standard deviation of the plotted statistic about its mean, at the nominal subgroup size: the mean
// square between subgroups over that size, which for equal sizes is the standard deviation of the means.
func (d *fresh) meansSigma() float64 {
	squares, level := 0.0, d.level()
	for i, m := range d.means {
		squares += d.share(i) * (m - level) * (m - level)
	}
	return math.Sqrt(squares / d.freedomMeans())
}

// estimate finds the new sigma by one estimator; false where the groups do not allow it.
func (d *fresh) estimate(name limits.Estimator) (limits.Estimate, bool) {
	i := slices.IndexFunc(d.estimates, func(e limits.Estimate) bool { return e.Name == name })
	if i < 0 {
		return limits.Estimate{}, false
	}
	return d.estimates[i], true
}

// singles are all readings in order.
func (d *fresh) singles() []float64 { return slices.Concat(d.readings...) }

// movingRanges of individuals by chain of joined results.
func (d *fresh) movingRanges() (chains [][]float64) {
	for i := 1; i < len(d.means); i++ {
		switch {
		case !d.joined[i]:
		case !d.joined[i-1]:
			chains = append(chains, []float64{math.Abs(d.means[i] - d.means[i-1])})
		default:
			last := &chains[len(chains)-1]
			*last = append(*last, math.Abs(d.means[i]-d.means[i-1]))
		}
	}
	return chains
}

func mean(xs []float64) float64 {
	sum := 0.0
	for _, x := range xs {
		sum += x
	}
	return sum / float64(len(xs))
}

// isMovingRange says that an estimator takes differences of neighbours.
func isMovingRange(name limits.Estimator) bool {
	return name == limits.MeanMovingRange || name == limits.MedianMovingRange
}

func noun(kind chart.Kind) string {
	switch {
	case kind == chart.Individuals:
		return "results"
	case kind.Counts():
		return "samples"
	case kind.Duplicates():
		return "sets of duplicates"
	}
	return "subgroups"
}
