package limits

import (
	"math"
	"sort"

	"limitary/internal/chart"
	"limitary/internal/counts"
	"limitary/internal/decimal"
)

// beyond is the probability that the count of a sample of a size lies beyond a line, as it is judged: statistic and line
// rounded. It is that of counting alone.
func (w *countWork) beyond(size, line, z float64) float64 {
	law, err := countLaw(w.req.Kind, *w.centre(), size)
	if err != nil {
		return 0 // checkCentre has refused such centres
	}
	first := sort.Search(int(chart.InspectedMax)+2, func(k int) bool {
		statistic := w.req.Kind.Statistic(chart.Count{Nonconforming: float64(k), Inspected: size})
		x := decimal.Round(statistic, w.res.PublishedDecimals)
		return x > line || z < 0 && x == line
	})
	if z > 0 {
		return counts.Above(law, float64(first-1))
	}
	return counts.AtMost(law, float64(first-1))
}

// tails gives the realised probability beyond each computed line, at the smallest, the published and the largest size.
// With extra variation there is none: those of counting alone would not hold.
func (w *countWork) tails() (tails []Tail) {
	if w.extra() {
		return nil
	}
	for i, line := range linesOf(&w.res.Location) {
		if line.Basis != chart.SigmaMultiple && line.Basis != chart.TailProbability {
			continue
		}
		for _, size := range w.sizes() {
			tail := Tail{Role: chart.Location, Line: positions[i], Size: size, Nominal: chart.TailOf(lineMultiples[i])}
			if at := w.line(size, lineMultiples[i]); !math.IsInf(at, 0) {
				tail.Probability = w.beyond(size, at, lineMultiples[i])
			}
			tails = append(tails, tail)
		}
	}
	return tails
}

// extra reports whether samples vary otherwise than counting explains.
func (w *countWork) extra() bool { return w.res.Model.Inflation != 0 || w.res.Model.BetweenSigma != 0 }

// sizes are the smallest, the published and the largest size, each once.
func (w *countWork) sizes() []float64 {
	sizes := []float64{w.b.smallest}
	for _, size := range []float64{w.res.Model.Inspected, w.b.largest} {
		if size > sizes[len(sizes)-1] {
			sizes = append(sizes, size)
		}
	}
	return sizes
}

// components splits the variance of the plotted statistic at the published size.
func (w *countWork) components() {
	if w.req.Counts.Extra != BetweenSamples {
		return
	}
	within, _ := CountSigma(w.req.Kind, w.res.CentreUnrounded, w.res.Model.Inspected, &chart.Model{})
	w.res.Components = []Component{
		{Name: "WITHIN", Sigma: within},
		{
			Name: "BETWEEN", Sigma: w.res.Model.BetweenSigma, DegreesOfFreedom: float64(w.component.DegreesOfFreedom),
			Truncated: w.component.Untruncated < 0,
		},
		{Name: "TOTAL", Sigma: w.res.SigmaUnrounded},
	}
}

// intervals tells what is known of the mean: of an estimated centre and of the action lines that follow from both its ends,
// or of the bias of a given one.
func (w *countWork) intervals() {
	mean, ok := w.meanInterval()
	switch centre := w.res.CentreUnrounded; {
	case !ok:
	case w.res.CentreOrigin == Estimated:
		w.res.Intervals.Centre = &mean
		w.res.Intervals.each(chart.Location, &w.res.Location, func(into **Interval, line chart.Line, multiple float64) {
			*into = w.lineInterval(mean, line, multiple)
		})
	case w.req.Centre != nil:
		w.res.Bias = &Comparison{w.mean() - centre, Interval{mean.Lower - centre, mean.Upper - centre}}
	}
}

// meanInterval is that of the mean of the plotted statistic, exact where counting is all there is. With extra variation
// both ends are taken as far out as the standard error of the mean grows.
func (w *countWork) meanInterval() (in Interval, ok bool) {
	if w.res.N == 0 {
		return in, false
	}
	exact, err := counts.RateInterval(w.b.count, w.b.inspected)
	if w.req.Kind.Items() {
		exact, err = counts.ProportionInterval(w.b.count, w.b.inspected)
	}
	if err != nil {
		return in, false // gatherCounts has refused such totals
	}
	units := 1.0
	if w.req.Kind == chart.NP {
		units = float64(w.req.SubgroupSize)
	}
	mean, end, wider := w.mean(), scaleEnd(w.req.Kind, w.res.Model.Inspected), w.widening()
	return Interval{
		max(0, mean-wider*(mean-exact.Lower*units)),
		min(end, mean+wider*(exact.Upper*units-mean)),
	}, true
}

// lineInterval gives the line at both ends of the centre; where it does not exist, the end of the scale.
func (w *countWork) lineInterval(centre Interval, line chart.Line, z float64) *Interval {
	if line.Basis != chart.SigmaMultiple && line.Basis != chart.TailProbability {
		return nil
	}
	at := func(centre float64) float64 {
		size := w.res.Model.Inspected
		return max(0, min(w.lineFrom(centre, size, z), scaleEnd(w.req.Kind, size)))
	}
	a, b := at(centre.Lower), at(centre.Upper)
	return &Interval{min(a, b), max(a, b)}
}

// widening is by how much less is known of the mean than counting alone would leave open: its standard error grows, and
// Student's t stands for the normal quantile, since the extra variation is estimated. A factor below one narrows nothing.
func (w *countWork) widening() float64 {
	if !w.extra() {
		return 1
	}
	grown := w.res.Model.Inflation
	if between := w.res.Model.BetweenSigma; between > 0 {
		extra := between * between * w.b.squares / w.b.inspected
		grown = math.Sqrt(1 + extra/w.unitVariance(w.mean()))
	}
	const at = (1 + Confidence) / 2
	freedom := float64(w.component.DegreesOfFreedom)
	return max(1, grown*studentQuantile(at, freedom)/studentQuantile(at, math.Inf(1)))
}
