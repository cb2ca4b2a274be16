package report

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// certifiedDigits are the significant digits in which moments are shown, so that they can be held against certified ones.
const certifiedDigits = 12

// data writes what the results used say by themselves.
func (t *Text) data(c *Computed) {
	switch m := &c.Result.Model; {
	case c.Result.Kind.Counts():
		t.totals(c)
	case len(m.Levels) > 0:
		t.levelTable(c)
	default:
		t.moments(c)
	}
}

// moments writes mean and spread of the readings used.
func (t *Text) moments(c *Computed) {
	xs := c.Readings
	if len(xs) < 2 {
		return
	}
	least, greatest := xs[0], xs[0]
	for _, x := range xs {
		least, greatest = min(least, x), max(greatest, x)
	}
	t.Section(fmt.Sprintf("The %d readings used%s", len(xs), map[bool]string{true: ", before the scale is taken"}[c.Result.Model.Transform.Kind != chart.Identity]))
	if c.Result.Kind.Duplicates() { // of different samples, so a mean and a spread over all of them mean nothing
		t.Pairs(Pair{"least, greatest", Shortest(least) + ", " + Shortest(greatest)})
		return
	}
	pairs := []Pair{
		{"mean", Significant(decimal.Mean(xs, decimal.Unrounded), certifiedDigits)},
		{"standard deviation", Significant(limits.StandardDeviation(xs), certifiedDigits) + " (divisor n-1, of all readings together)"},
		{"least, greatest", Shortest(least) + ", " + Shortest(greatest)},
	}
	if lag1, err := limits.Lag1Autocorrelation(xs); err == nil && c.Result.Kind == chart.Individuals {
		// 1.96/√n bounds 95 % of the lag-1 autocorrelations of independent values (common practice, no source).
		pairs = append(pairs, Pair{"lag-1 correlation", fmt.Sprintf("%.3f; of independent results 95 %% lie within %.3f of zero", lag1, 1.96/math.Sqrt(float64(len(xs))))})
	}
	t.Pairs(pairs...)
}

// counted adds up the counts used.
type counted struct {
	samples                                          int
	total, inspected, smallest, largest, least, most float64
}

func (c *Computed) counted() (s counted) {
	for _, g := range c.Groups {
		if g.Excluded || g.Count == nil {
			continue
		}
		n := *g.Count
		if s.samples == 0 {
			s.smallest, s.largest, s.least, s.most = n.Inspected, n.Inspected, n.Nonconforming, n.Nonconforming
		}
		s.samples++
		s.total, s.inspected = s.total+n.Nonconforming, s.inspected+n.Inspected
		s.smallest, s.largest = min(s.smallest, n.Inspected), max(s.largest, n.Inspected)
		s.least, s.most = min(s.least, n.Nonconforming), max(s.most, n.Nonconforming)
	}
	return s
}

// totals writes what was counted in all.
func (t *Text) totals(c *Computed) {
	s, kind := c.counted(), c.Result.Kind
	if s.samples == 0 {
		return
	}
	thing, looked := "nonconformities", "inspection units"
	if kind.Items() {
		thing, looked = "nonconforming items", "items"
	}
	t.Section(fmt.Sprintf("The %d samples used", s.samples))
	size := Shortest(s.smallest)
	if s.smallest != s.largest {
		size += " to " + Shortest(s.largest)
	}
	t.Pairs(
		Pair{thing, Shortest(s.total)}, Pair{looked, Significant(s.inspected, certifiedDigits)}, Pair{looked + " a sample", size},
		Pair{"least, greatest", Shortest(s.least) + ", " + Shortest(s.most)},
	)
}

// levelTable writes, for each level of a standardised track, what its results show beside what is given.
func (t *Text) levelTable(c *Computed) {
	places := c.Result.PublishedDecimals
	t.Section("Levels: a reading counts as (reading - reference)/sigma")
	table := NewTable("material", ">reference", ">sigma", ">readings", ">mean", ">sd", ">standardised mean", ">standardised sd")
	for _, l := range c.Result.Model.Levels {
		xs := readingsOf(c.Groups, l.Material)
		cells := []string{Foreign(l.Material), Shortest(l.Reference), Shortest(l.Sigma), fmt.Sprint(len(xs)), "", "", "", ""}
		if len(xs) > 0 {
			mean := decimal.Mean(xs, decimal.Unrounded)
			cells[4], cells[6] = Significant(mean, 6), Fixed((mean-l.Reference)/l.Sigma, min(places, 3))
		}
		if len(xs) > 1 {
			sd := limits.StandardDeviation(xs)
			cells[5], cells[7] = Significant(sd, 6), Fixed(sd/l.Sigma, min(places, 3))
		}
		table.Row(cells...)
	}
	t.Table(table)
	t.line("")
	t.Paragraph("Where references and sigmas are right, standardised means lie near 0 and standardised sds near 1 at every level.")
}

// readingsOf gives the readings used of one material.
func readingsOf(groups []limits.Group, material string) (xs []float64) {
	for _, g := range groups {
		if !g.Excluded && g.Material == material {
			xs = append(xs, g.Readings...)
		}
	}
	return xs
}
