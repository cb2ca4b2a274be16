package diagnostics

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// setsMin is the least number of sets whose scatter is compared.
const setsMin = 10

// set is a set of duplicates beside the limits.
type set struct {
	// index in the request.
	index int
	// mean is the size of the mean; stratum numbers the sets whose sigma was estimated apart from that of others.
	mean    float64
	stratum int
	// freedom is one less than the readings; ratio is the standard deviation of these over the sigma that the limits give
	// at the mean, and step the rounding step over that sigma. For pairs ratio is range/(√2·sigma).
	freedom     int
	ratio, step float64
	// squares is freedom·ratio², over the pooled ratio² of the stratum: χ² with freedom degrees where the sigma of the
	// limits goes by the mean as it should, whatever its size.
	squares float64
}

// ratioMax keeps squares of ratios finite.
const ratioMax = 1e100

// duplicates are the sets of a basis beside its limits.
type duplicates struct {
	kind   chart.Kind
	spread *chart.Spread
	// fitted says that sigma is a function of the mean, and was fitted to these sets.
	fitted bool
	sets   []set
	// pooled ratio² by stratum, and the rounding step in the chart's unit.
	pooled map[int]float64
	step   float64
}

// examineDuplicates asks everything of charts of duplicates, the rounding first.
func (m *material) examineDuplicates(report *Report, res *limits.Result) {
	m.grid = gridOf(m.readings)
	report.Step, report.Tied = m.grid.step, m.tied()
	d := m.duplicatesOf(res)
	rounding := d.rounding(len(m.readings))
	report.add(rounding)
	report.add(d.zeros())
	coarse := rounding.Outcome == Found
	report.add(d.dependence(coarse))
	report.add(d.outlying(coarse))
	report.add(d.tooFewLarge(coarse))
	keys := m.groupKeys()
	equal := d.middleStep() / (2 * math.Sqrt(math.Pi))
	report.add(repeatedStretch(SetsOfDuplicates, keys, equal*equal))
	report.add(doubledPosts(SetsOfDuplicates, keys, m.joined()))
	report.Values = d.picture()
}

// duplicatesOf sets the sets beside the limits; none are left where there are no limits.
func (m *material) duplicatesOf(res *limits.Result) *duplicates {
	d := &duplicates{kind: m.kind, spread: res.Model.Spread, pooled: map[int]float64{}, step: m.grid.step}
	estimated := slices.ContainsFunc(res.Parts, func(p limits.Part) bool { return p.Origin == limits.Estimated })
	d.fitted = estimated && d.function()
	apart := estimated && !d.function() && len(res.Parts) > 1
	freedom := map[int]float64{}
	for _, g := range m.groups {
		s, ok := d.setOf(g.readings, res.ProcessSigma)
		if !ok {
			continue
		}
		s.index = g.index
		if apart {
			s.stratum = stratumOf(d.spread, s.mean)
		}
		s.squares = float64(s.freedom) * s.ratio * s.ratio
		d.pooled[s.stratum] += s.squares
		freedom[s.stratum] += float64(s.freedom)
		d.sets = append(d.sets, s)
	}
	for k := range d.pooled {
		d.pooled[k] /= freedom[k]
	}
	for i := range d.sets {
		if pooled := d.pooled[d.sets[i].stratum]; pooled > 0 {
			d.sets[i].squares /= pooled
		}
	}
	return d
}

// setOf measures one set; ok is false where the limits give no sigma for it.
func (d *duplicates) setOf(readings []float64, process float64) (s set, ok bool) {
	s.mean, s.freedom = math.Abs(decimal.Mean(readings, decimal.Unrounded)), len(readings)-1
	sigma, absolute := d.spread.At(process, s.mean)
	if d.kind == chart.RelativeRange && !absolute {
		sigma *= s.mean / 100
	}
	if s.freedom < 1 || !(sigma > 0) {
		return s, false
	}
	s.ratio, s.step = min(ratioMax, limits.StandardDeviation(readings)/sigma), min(ratioMax, d.step/sigma)
	return s, true
}

// function says whether sigma is a function of the mean.
func (d *duplicates) function() bool { return d.spread != nil && (d.spread.S0 > 0 || d.spread.B > 0) }

// oneSigma says whether the limits take one sigma for every mean.
func (d *duplicates) oneSigma() bool { return d.spread == nil && d.kind == chart.DuplicateRange }

// stratumOf numbers the band of a mean, from 0, and the plain ranges of low means -1.
func stratumOf(s *chart.Spread, mean float64) int {
	if s.AbsoluteBelow > 0 && mean < s.AbsoluteBelow {
		return -1
	}
	stratum := 0
	for i, b := range s.Bands {
		if mean >= b.From {
			stratum = i
		}
	}
	return stratum
}

// strata gives the sets of each stratum, in the order in which these first occur.
func (d *duplicates) strata() [][]set {
	var out [][]set
	at := map[int]int{}
	for _, s := range d.sets {
		i, known := at[s.stratum]
		if !known {
			i, at[s.stratum] = len(out), len(out)
			out = append(out, nil)
		}
		out[i] = append(out[i], s)
	}
	return out
}

// ready closes a test that cannot be made; ok says that it can.
func (d *duplicates) ready(t Test, least int) (Test, bool) {
	pooled := 0.0
	for _, p := range d.pooled {
		pooled = max(pooled, p)
	}
	switch {
	case len(d.sets) < least:
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs limits, and at least %d sets of duplicates.", least)), false
	case pooled == 0:
		return t.notMade(Void, "The readings of each set are equal."), false
	}
	return t, true
}

// scatter gives what stands for a set among sets of any size: the value that half-normal values exceed with the
// probability with which the readings' sum of squares about their mean, over sigma², exceeds that of the set. For pairs
// it is range/(√2·sigma) itself, the range in units of the standard deviation of a difference.
func scatter(squares float64, freedom int) float64 {
	if freedom == 1 {
		return math.Sqrt(squares)
	}
	beyond := mathext.GammaIncRegComp(float64(freedom)/2, squares/2)
	if beyond < 1e-290 { // both laws fall off as exp(-x²/2)
		return math.Sqrt(squares)
	}
	return max(0, -mathext.NormalQuantile(beyond/2))
}

// picture has the standardised ranges as they are beside the limits, and their half-normal plot.
func (d *duplicates) picture() *Picture {
	if len(d.sets) == 0 {
		return nil
	}
	values := make([]float64, len(d.sets))
	for i, s := range d.sets {
		values[i] = scatter(float64(s.freedom)*s.ratio*s.ratio, s.freedom)
	}
	p := &Picture{Subject: StandardisedRanges, Histogram: histogramOf(values, grid{})}
	slices.Sort(values)
	if values[0] == values[len(values)-1] {
		return p
	}
	for _, i := range plottedOf(len(values)) {
		p.NormalPlot = append(p.NormalPlot, NormalPoint{mathext.NormalQuantile((1 + blom(i, len(values))) / 2), values[i]})
	}
	return p
}
