package limits

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/counts"
)

// countWork is a set of limits of a chart of counts in the making.
type countWork struct {
	req *Request
	b   *countBasis
	res Result
	// component between samples, where there is one to estimate.
	component *counts.Component
}

// computeCounts gives limits of a chart of counts: the centre, what samples vary more than counting explains, and the
// lines that follow from both for the size Model.Inspected. Every point has the lines of its own size, which follow from
// the published centre and model through CountSigma, NormalCountLine and ExactCountLine.
func computeCounts(req *Request) (Result, error) {
	if err := req.checkCountOptions(); err != nil {
		return Result{}, err
	}
	b, err := req.gatherCounts()
	if err != nil {
		return Result{}, err
	}
	w := &countWork{req: req, b: b, res: Result{
		Kind: req.Kind, SubgroupSize: req.SubgroupSize,
		N: len(b.samples), Excluded: b.excluded, AdvisedMinimum: advisedMinimum(req.Kind),
	}}
	for _, step := range []func() error{w.settleCentre, w.settleExtra, w.settleInspected, w.publish} {
		if err := step(); err != nil {
			return Result{}, err
		}
	}
	w.intervals()
	w.res.Tails = w.tails()
	w.res.Provisional = w.res.Origin != Target && w.res.N < w.res.AdvisedMinimum
	w.res.Findings = w.findings()
	return w.res, nil
}

// checkCountOptions refuses what a chart of counts cannot be asked for, whatever its samples say.
func (r *Request) checkCountOptions() error {
	c := &r.Counts
	switch {
	case c.Method > chart.Exact:
		return refuse("counts.method", uint8(c.Method), "want default, normal or exact")
	case c.Extra > BetweenSamples:
		return refuse("counts.extra", uint8(c.Extra), "want none, a factor (1) or a variance between samples (2)")
	case c.Extra != NoExtra && c.Method == chart.Exact:
		return refuse("counts.method", c.Method, "exact lines are those of counting alone; take normal ones with extra variation")
	case c.Extra == BetweenSamples && r.Kind != chart.P && r.Kind != chart.U:
		return refuse("counts.extra", "between samples", "samples of a chart of kind %s are of one size, for which one factor does the same; ask for the factor", r.Kind)
	case r.Centre != nil && c.MeanUpperBound != nil:
		return refuse("counts.meanUpperBound", *c.MeanUpperBound, "a centre is given as well; leave one of the two out")
	}
	return r.checkCountFixed()
}

// checkCountFixed refuses fixed lines where no count lies.
func (r *Request) checkCountFixed() error {
	most := scaleEnd(r.Kind, float64(r.SubgroupSize))
	for i, line := range r.Fixed[chart.Location].all() {
		if line == nil || line.Basis == chart.Absent || line.Value >= 0 && line.Value <= most {
			continue
		}
		return refuse(fixedField(chart.Location, i), line.Value, "no count lies there; want a line from 0 to %g, or absent", most)
	}
	return nil
}

// scaleEnd is the greatest value that a chart of counts plots for a sample of a size.
func scaleEnd(kind chart.Kind, size float64) float64 {
	switch kind {
	case chart.P:
		return 1
	case chart.NP:
		return size
	}
	return math.Inf(1)
}
