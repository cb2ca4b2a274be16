package changetest

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// tally is the new side of a chart of counts. The embedded series holds the standardised counts, one a sample, whose
// correlation is looked at; the figures themselves are fractions (p, np) or rates (c, u) of what was inspected.
type tally struct {
	fresh
	samples []chart.Count
	// count and inspected are totals, squares that of the squares of what was inspected.
	count, inspected, squares float64
}

// gatherCounts checks the groups and takes up the new samples.
func gatherCounts(req *Request) (*tally, error) {
	w := &tally{fresh: fresh{size: 1}}
	var joined []bool
	after := false
	for i, g := range req.Groups {
		if err := req.InForce.checkCounted(i, &g.Group); err != nil {
			return nil, err
		}
		switch {
		case g.InOldBasis:
			w.inOldBasis++
		case g.Excluded:
			w.excluded++
		default:
			w.addCount(*g.Count)
			joined = append(joined, after && !g.BreakBefore)
			after = true
			continue
		}
		after = false
	}
	w.standardise(req.InForce.Kind.Items(), joined)
	return w, nil
}

// checkCounted refuses what no chart of counts can hold.
func (f *InForce) checkCounted(i int, g *limits.Group) error {
	field := func(name string) string { return fmt.Sprintf("groups[%d].%s", i, name) }
	switch {
	case len(g.Readings) > 0:
		return refuse(field("readings"), fmt.Sprintf("%d readings", len(g.Readings)), "a chart of kind %s takes counts", f.Kind)
	case g.Excluded && g.ExclusionReason == "":
		return refuse(field("exclusionReason"), "empty", "an exclusion needs a reason")
	case g.Count == nil && !g.Excluded:
		return refuse(field("count"), "none", "a group needs a count, or an exclusion with its reason")
	case g.Count == nil:
		return nil
	}
	if err := f.Kind.CheckCount(*g.Count, f.SubgroupSize); err != nil {
		return &Error{Field: field("count"), Problem: err.Error()}
	}
	return nil
}

func (w *tally) addCount(c chart.Count) {
	w.samples = append(w.samples, c)
	w.count += c.Nonconforming
	w.inspected += c.Inspected
	w.squares += c.Inspected * c.Inspected
}

// mean is the pooled fraction or rate.
func (w *tally) mean() float64 { return w.count / w.inspected }

// countVariance is that of one item or unit, as counting has it.
func countVariance(items bool, mean float64) float64 {
	if items {
		return mean * (1 - mean)
	}
	return mean
}

// standardise makes the series of standardised counts; all are zero where none, or all items, were found.
func (w *tally) standardise(items bool, joined []bool) {
	for i, c := range w.samples {
		z, mean := 0.0, w.mean()
		if v := countVariance(items, mean); v > 0 {
			z = (c.Nonconforming - c.Inspected*mean) / math.Sqrt(c.Inspected*v)
		}
		w.add([]float64{z}, joined[i])
	}
}

// dispersion φ is by how much the pooled mean varies more than counting explains: Pearson's Σz²/(k-1) (quasi-likelihood,
// Wedderburn 1974, from memory), at least 1. What goes beyond 1 is taken for a variance between samples, of which a mean
// of samples of unequal sizes holds more than Σz² does: E Σz²/(k-1) - 1 is (N - Σn²/N)/(k-1) times that variance over
// that of one unit, and φ - 1 is Σn²/N times it, N = Σn. For equal sizes the two agree.
func (w *tally) dispersion() float64 {
	if w.groups() < 2 {
		return 1
	}
	sum := 0.0
	for _, z := range w.means {
		sum += z * z
	}
	excess := sum/w.freedomMeans() - 1
	if excess <= 0 {
		return 1
	}
	inMean := w.squares / w.inspected
	return 1 + excess*inMean*w.freedomMeans()/(w.inspected-inMean)
}

// correlated is the correlation of neighbouring counts, at most (φ-1)/φ: counts repeat each other only through what they
// have in common, and that makes up no more of their variance (derived: given their means, counts are independent).
func (w *tally) correlated(phi float64) Correlation {
	c := w.correlation()
	c.Used = math.Min(c.Used, (phi-1)/phi)
	n := float64(w.groups())
	c.EffectiveForCentre, c.EffectiveForSpread = n/c.inflation(), n*c.squaresFactor()
	return c
}
