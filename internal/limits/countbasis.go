package limits

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/counts"
	"limitary/internal/decimal"
)

// countBasis is the checked material that limits of counts rest on.
type countBasis struct {
	family   counts.Family
	samples  []counts.Sample // used, in order
	excluded []Exclusion
	// breakBefore says of each sample that no moving range reaches it from the one before in samples.
	breakBefore []bool
	// count and inspected are totals, squares that of the squares of what was inspected.
	count, inspected, squares float64
	// mean, smallest and largest are those of what was inspected for one sample.
	mean, smallest, largest float64
}

// gatherCounts checks the groups and takes up those that are used.
func (r *Request) gatherCounts() (*countBasis, error) {
	b := &countBasis{family: counts.Nonconformities, smallest: math.Inf(1)}
	if r.Kind.Items() {
		b.family = counts.Nonconforming
	}
	apart := true
	for i := range r.Groups {
		g := &r.Groups[i]
		if err := r.checkCountGroup(i); err != nil {
			return nil, err
		}
		apart = apart || g.BreakBefore
		if g.Excluded {
			b.excluded = append(b.excluded, Exclusion{i, g.ExclusionReason})
			apart = true
			continue
		}
		b.take(*g.Count, apart)
		apart = false
	}
	if len(b.samples) == 0 { // limits from a target: a sample of np or c has its size all the same
		b.smallest, b.largest = float64(r.SubgroupSize), float64(r.SubgroupSize)
	}
	b.addInspected()
	if b.count > counts.TotalMax || r.Kind.Items() && b.inspected > counts.TotalMax {
		return nil, refuse("groups", fmt.Sprintf("%g of %g", b.count, b.inspected), "add up to more than the limit of %g", counts.TotalMax)
	}
	return b, nil
}

func (b *countBasis) take(c chart.Count, apart bool) {
	b.samples = append(b.samples, counts.Sample{Count: c.Nonconforming, Inspected: c.Inspected})
	b.breakBefore = append(b.breakBefore, apart)
	b.count += c.Nonconforming
	b.squares += c.Inspected * c.Inspected
	b.smallest, b.largest = min(b.smallest, c.Inspected), max(b.largest, c.Inspected)
}

// addInspected sums what was inspected. Decimals are summed exactly, so that the order of samples makes no difference.
func (b *countBasis) addInspected() {
	if len(b.samples) == 0 {
		return
	}
	sizes := make([]float64, len(b.samples))
	for i, s := range b.samples {
		sizes[i] = s.Inspected
	}
	b.mean = decimal.Mean(sizes, decimal.Unrounded)
	b.inspected = b.mean * float64(len(b.samples))
	if b.family == counts.Nonconforming {
		b.inspected = math.Round(b.inspected)
	}
}

// checkCountGroup refuses what is wrong in group i of a chart of counts.
func (r *Request) checkCountGroup(i int) error {
	g := &r.Groups[i]
	field := func(name string) string { return fmt.Sprintf("groups[%d].%s", i, name) }
	switch {
	case len(g.Readings) > 0:
		return refuse(field("readings"), fmt.Sprintf("%d readings", len(g.Readings)), "a chart of kind %s takes counts", r.Kind)
	case g.Count == nil && !g.Excluded:
		return refuse(field("count"), "none", "a group needs a count, or an exclusion with its reason")
	case g.Count == nil:
		return g.checkExclusion(i)
	}
	if err := r.Kind.CheckCount(*g.Count, r.SubgroupSize); err != nil {
		return &Error{field("count"), "", err.Error()}
	}
	if g.Count.Inspected < counts.InspectedMin {
		return refuse(field("count"), fmt.Sprintf("inspected %v", g.Count.Inspected), "want at least %g inspection units; use a smaller unit", counts.InspectedMin)
	}
	return g.checkExclusion(i)
}
