package limits

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// publish rounds centre and model and derives the trace from the rounded figures. There is no process sigma and no
// dispersion trace.
func (w *countWork) publish() error {
	res, m := &w.res, &w.res.Model
	res.SigmaUnrounded, _ = CountSigma(w.req.Kind, res.CentreUnrounded, m.Inspected, m)
	steps := w.stepDecimals()
	places := w.decimals(steps)
	if d := w.req.PublishedDecimals; d != nil {
		places = *d
	}
	res.PublishedDecimals = places
	centre := decimal.Round(res.CentreUnrounded, places)
	sigma, ok := CountSigma(w.req.Kind, centre, m.Inspected, m)
	if !ok || centre <= 0 || centre >= scaleEnd(w.req.Kind, m.Inspected) {
		return refuse("publishedDecimals", places, "the centre is %.4g and rounds to %g, which has no lines; publish more decimals (at most %d)", res.CentreUnrounded, centre, decimal.PlacesMax)
	}
	w.components()
	m.Inflation, m.BetweenSigma = atLeastDigits(m.Inflation, places), atLeastDigits(m.BetweenSigma, places)
	m.CountMethod = w.method(centre)
	if m.CountMethod == chart.Exact && steps > places {
		return refuse("publishedDecimals", places, "exact lines tell neighbouring counts apart, which takes %d decimals for a sample of %g", steps, w.b.largest)
	}
	sigma, _ = CountSigma(w.req.Kind, centre, m.Inspected, m)
	res.Location = chart.Trace{Centre: &centre, Sigma: &sigma}
	for i, line := range linesOf(&res.Location) {
		*line = w.published(lineMultiples[i])
	}
	absent := chart.Line{Basis: chart.Absent}
	res.Dispersion = chart.Trace{LowerAction: absent, UpperAction: absent, LowerWarning: absent, UpperWarning: absent}
	if m.CountMethod == chart.Normal && !w.distinct() {
		return refuse("publishedDecimals", places, "sigma is %.3g, so the lines fall on each other or vanish beside a centre of %g when rounded; publish more decimals", sigma, centre)
	}
	return w.req.Fixed[chart.Location].place(chart.Location, &res.Location)
}

// lineMultiples are the sigmas of lines in the order of linesOf.
var lineMultiples = [4]float64{-chart.ActionMultiple, chart.ActionMultiple, -chart.WarningMultiple, chart.WarningMultiple}

// decimals gives the default of published decimals: two more than tell neighbouring counts of the largest sample apart,
// or what gives sigma four significant digits, and never fewer than a given figure is written with.
func (w *countWork) decimals(steps int) int {
	places := w.res.defaultDecimals(w.req, &basis{decimals: steps})
	if bound := w.req.Counts.MeanUpperBound; bound != nil {
		places = max(places, decimal.Places(*bound))
	}
	return min(places, decimal.PlacesMax)
}

// stepDecimals is how many decimals tell neighbouring counts of the largest sample apart.
func (w *countWork) stepDecimals() int {
	places := 0
	if w.req.Kind == chart.P || w.req.Kind == chart.U {
		for power := 1.0; power < w.b.largest; power *= 10 {
			places++
		}
	}
	return places
}

// atLeastDigits rounds a figure to the decimals, or to as many more as give it significantDigits digits.
func atLeastDigits(x float64, places int) float64 {
	if x == 0 {
		return 0
	}
	return decimal.Round(x, min(max(places, digitsPlaces(x)), decimal.PlacesMax))
}

// method is the one asked for, or Exact where the smallest sample is expected to hold too few of what is counted, or of
// the items without. Extra variation goes with normal lines only.
func (w *countWork) method(centre float64) chart.CountMethod {
	switch {
	case w.req.Counts.Method != chart.CountMethodDefault:
		return w.req.Counts.Method
	case w.req.Counts.Extra == NoExtra && w.scarce(centre, w.b.smallest) < ExactBelow:
		return chart.Exact
	}
	return chart.Normal
}

// published gives the line z sigmas out as it is published. A line beyond which no count lies is absent. Where sizes
// differ and it exists for the largest sample, it stays a line, at the end of the scale for the published size: absent,
// it would be missing for the large samples as well.
func (w *countWork) published(z float64) chart.Line {
	m := &w.res.Model
	value := w.line(m.Inspected, z)
	exists := !math.IsInf(value, 0)
	switch {
	case !exists && math.IsInf(w.line(w.b.largest, z), 0):
		return chart.Line{Basis: chart.Absent}
	case !exists && z < 0:
		value = 0
	case !exists:
		value = scaleEnd(w.req.Kind, m.Inspected)
	}
	if m.CountMethod == chart.Normal {
		return chart.Line{Value: value, Basis: chart.SigmaMultiple}
	}
	tail := 0.0 // nothing lies beyond it at the published size
	if exists {
		tail = w.beyond(m.Inspected, value, z)
	}
	return chart.Line{Value: value, Basis: chart.TailProbability, Tail: tail}
}

// line is the line z sigmas out for a sample of a size, rounded as it is judged; infinite where no count lies beyond.
func (w *countWork) line(size, z float64) float64 {
	at := w.lineFrom(*w.centre(), size, z)
	if math.IsInf(at, 0) {
		return at
	}
	at = decimal.Round(at, w.res.PublishedDecimals)
	if z < 0 && at <= 0 || z > 0 && at >= scaleEnd(w.req.Kind, size) {
		return math.Inf(sign(z))
	}
	return at
}

// centre is the published one, which publish has rounded before it asks for lines.
func (w *countWork) centre() *float64 { return w.res.Location.Centre }

// lineFrom is line for any centre, unrounded.
func (w *countWork) lineFrom(centre, size, z float64) float64 {
	m := &w.res.Model
	if m.CountMethod == chart.Exact {
		return ExactCountLine(w.req.Kind, centre, size, z)
	}
	sigma, _ := CountSigma(w.req.Kind, centre, size, m)
	return NormalCountLine(w.req.Kind, centre, sigma, size, z)
}

// distinct reports whether rounding has left the lines there are and the centre in their order.
func (w *countWork) distinct() bool {
	t := &w.res.Location
	last := math.Inf(-1)
	for _, line := range []chart.Line{t.LowerAction, t.LowerWarning, {Value: *t.Centre}, t.UpperWarning, t.UpperAction} {
		if line.Basis == chart.Absent {
			continue
		}
		if line.Value <= last && line.Value != 0 && line.Value != scaleEnd(w.req.Kind, w.res.Model.Inspected) {
			return false
		}
		last = line.Value
	}
	return true
}
