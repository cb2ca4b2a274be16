package limits

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Names of parts.
const (
	// PartAll is the one sigma of all duplicates.
	PartAll = "ALL"
	// PartBand is the sigma from the mean Part.From to that of the next band.
	PartBand = "BAND"
	// PartAbsolute is the sigma, in the chart's unit, of duplicates of a relative_range chart with low means.
	PartAbsolute = "ABSOLUTE"
	// PartS0 and PartB are the figures of √(s0² + (b·mean)²).
	PartS0 = "S0"
	PartB  = "B"
)

// Part is one figure of how the scatter of duplicates goes by their mean.
type Part struct {
	Name string
	// From is the mean from which a band holds; the first holds below it as well. For ABSOLUTE it is the mean under which
	// it holds.
	From float64
	// Groups are the sets of duplicates with such a mean.
	Groups int
	// Sigma of a single reading, before rounding; in percent for the bands of a relative_range chart. For B it is the
	// growth of sigma per unit of the mean, a number without unit.
	Sigma  float64
	Origin Origin
	// DegreesOfFreedom are effective, 0 where the figure is given or nothing; Interval is nil where it is given.
	DegreesOfFreedom float64
	Interval         *Interval
	// Estimates by every estimator; none for S0 and B, which are fitted.
	Estimates []Estimate
	// Ratio is the sigma that the results show over the given one, nil where there is none to set against it.
	Ratio *Comparison
}

// PartGroupsMin is the least number of sets of duplicates that a band, or a function of the mean, is estimated from. Ten
// pairs leave nearly nine degrees of freedom, a standard error of a quarter of sigma; from fewer, a step between bands is
// mostly chance.
const PartGroupsMin = 10

// String names the part in messages.
func (p *Part) String() string {
	switch p.Name {
	case PartBand:
		return fmt.Sprintf("band from %g", p.From)
	case PartAbsolute:
		return fmt.Sprintf("means below %g", p.From)
	}
	return "all duplicates"
}

// settleParts estimates or takes the sigma of each band, and of low means.
func (res *Result) settleParts(d *duplicates) error {
	o := &d.req.Duplicates
	parts := d.bandParts()
	for i := range parts {
		p := &parts[i]
		given := d.req.Sigma
		if len(o.Sigmas) > 0 {
			given = &o.Sigmas[i]
		}
		least := 2
		if p.Name == PartBand {
			least = PartGroupsMin
		}
		if err := p.settle(d, d.inPart(i, p), given, least); err != nil {
			return err
		}
	}
	if o.AbsoluteBelow > 0 {
		p := Part{Name: PartAbsolute, From: o.AbsoluteBelow}
		if err := p.settle(d, d.inPart(0, &p), o.AbsoluteSigma, PartGroupsMin); err != nil {
			return err
		}
		parts = append(parts, p)
	}
	res.Parts = parts
	first := &parts[0]
	res.SigmaUnrounded, res.SigmaOrigin, res.SigmaRatio = first.Sigma, first.Origin, first.Ratio
	res.Estimates, res.Intervals.Sigma = first.Estimates, first.Interval
	return nil
}

func (d *duplicates) bandParts() []Part {
	if len(d.req.Duplicates.Bands) == 0 {
		return []Part{{Name: PartAll}}
	}
	var parts []Part
	for _, from := range d.req.Duplicates.Bands {
		parts = append(parts, Part{Name: PartBand, From: from})
	}
	return parts
}

// inPart collects the scatter of the sets with a mean in the part, which is band i unless it is the absolute one.
func (d *duplicates) inPart(i int, p *Part) []within {
	bands := d.req.Duplicates.Bands
	var in []within
	for _, s := range d.sets {
		band := 0
		for j := 1; j < len(bands); j++ {
			if s.size >= bands[j] {
				band = j
			}
		}
		if s.absolute == (p.Name == PartAbsolute) && (s.absolute || band == i) {
			in = append(in, s.within)
		}
	}
	return in
}

// settle takes the given sigma, or estimates it from at least so many sets. What the sets show is set beside it either way.
func (p *Part) settle(d *duplicates, in []within, given *float64, least int) error {
	b := basis{kind: d.req.Kind, within: in}
	p.Groups, p.Estimates = len(in), b.estimates()
	if given != nil {
		p.Sigma, p.Origin = *given, Target
		if len(p.Estimates) > 0 && p.Estimates[0].Sigma > 0 {
			p.Ratio = ratioOf(&p.Estimates[0], p.Sigma)
		}
		return nil
	}
	if len(in) < least {
		return refuse("groups", p, "has %d sets of duplicates, sigma needs at least %d that are not excluded; give sigma, or join it to its neighbour", len(in), least)
	}
	e, err := choose(p.Estimates, d.req.estimator())
	if err != nil {
		return refuse("groups", p, "the spread is zero, so the estimate of sigma is zero; the results are equal or reported too coarsely")
	}
	p.Sigma, p.DegreesOfFreedom = e.Sigma, e.DegreesOfFreedom
	p.Interval = chiInterval(e.Sigma, e.DegreesOfFreedom)
	return nil
}

// publishDuplicates rounds every sigma once and derives the dispersion trace at the process sigma.
func (res *Result) publishDuplicates(d *duplicates) error {
	req := d.req
	res.PublishedDecimals = res.duplicateDecimals(d)
	if req.PublishedDecimals != nil {
		res.PublishedDecimals = *req.PublishedDecimals
	}
	if err := res.roundParts(d); err != nil {
		return err
	}
	scale, _ := At(req.Kind, res.ProcessSigma, req.SubgroupSize)
	t := traceAt(scale.DispersionCentre, scale.DispersionSigma, res.PublishedDecimals)
	if !(*t.Centre < t.UpperWarning.Value && t.UpperWarning.Value < t.UpperAction.Value) {
		return refuse("publishedDecimals", res.PublishedDecimals, "sigma is %.3g, so the lines fall on each other when rounded; publish more decimals", *t.Sigma)
	}
	absent := chart.Line{Basis: chart.Absent}
	t.LowerAction, t.LowerWarning = absent, absent
	res.Dispersion = t
	res.Location = chart.Trace{LowerAction: absent, UpperAction: absent, LowerWarning: absent, UpperWarning: absent}
	if err := req.Fixed[chart.Dispersion].place(chart.Dispersion, &res.Dispersion); err != nil {
		return err
	}
	unit, _ := At(req.Kind, 1, req.SubgroupSize)
	res.Intervals.dispersion(&res.Dispersion, unit)
	return nil
}

// duplicateDecimals are four digits of the smallest sigma, and two more than the results have where plain ranges are
// plotted.
func (res *Result) duplicateDecimals(d *duplicates) int {
	places := digitsPlaces(res.SigmaUnrounded)
	for _, p := range res.Parts {
		if p.Name != PartB {
			places = max(places, digitsPlaces(p.Sigma))
		}
		if p.Origin == Target && p.Name != PartB {
			places = max(places, decimal.Places(p.Sigma))
		}
	}
	if d.req.Kind == chart.DuplicateRange || d.req.Duplicates.AbsoluteBelow > 0 {
		places = max(places, d.decimals+2)
	}
	return d.req.placesOfFixed(places)
}

// roundParts rounds the sigma of each part and builds the model from them. B has decimals of its own, four digits: it is
// multiplied by means.
func (res *Result) roundParts(d *duplicates) error {
	o := &d.req.Duplicates
	s := &chart.Spread{}
	for i := range res.Parts {
		p := &res.Parts[i]
		if p.Name == PartB {
			if s.B = p.Sigma; p.Origin == Estimated && p.Sigma > 0 {
				s.B = decimal.Round(p.Sigma, min(digitsPlaces(p.Sigma), decimal.PlacesMax))
			}
			continue
		}
		rounded, err := roundSigma("sigma of "+p.String(), p.Sigma, res.PublishedDecimals)
		if err != nil {
			return err
		}
		switch p.Name {
		case PartBand:
			s.Bands = append(s.Bands, chart.Band{From: p.From, Sigma: rounded})
		case PartAbsolute:
			s.AbsoluteBelow, s.AbsoluteSigma = p.From, rounded
		case PartS0:
			s.S0 = rounded
		}
		if i == 0 {
			res.ProcessSigma = rounded
		}
	}
	if o.function() {
		res.ProcessSigma = decimal.Round(math.Hypot(s.S0, s.B*d.medianSize()), res.PublishedDecimals)
	}
	if o.any() {
		res.Model.Spread = s
	}
	return nil
}

// medianSize is the median of the sizes of the means, 0 without a basis.
func (d *duplicates) medianSize() float64 {
	if len(d.sets) == 0 {
		return 0
	}
	sizes := make([]float64, len(d.sets))
	for i, s := range d.sets {
		sizes[i] = s.size
	}
	return median(sizes)
}
