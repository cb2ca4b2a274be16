package runlength

import (
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
	"limitary/internal/runlength/data"
	"limitary/internal/runlength/simulate"
)

// law gives the distribution of the points of a trace at a shift in standard errors and a ratio of sigmas.
func (r *Request) law(role chart.Role, shift, ratio float64) law {
	if role == chart.Dispersion {
		centre, sigma := r.spreadScale()
		d := data.Distribution(data.Range{N: r.SubgroupSize, Ratio: ratio, Centre: centre, Sigma: sigma})
		if r.Kind == chart.XbarS {
			d = data.Spread{N: r.SubgroupSize, Ratio: ratio, Centre: centre, Sigma: sigma}
		}
		return law{d, (centre*ratio - centre) / sigma, ratio}
	}
	d := r.shape(shift, ratio)
	if r.Data.Step > 0 {
		d = data.Rounded{Exact: d, Step: r.Data.Step}
	}
	return law{d, shift, ratio}
}

// shape gives the distribution of exact points, or of readings, with a mean and standard deviation.
func (r *Request) shape(mean, sd float64) data.Distribution {
	switch r.Data.Shape {
	case StudentShape:
		return data.T{Freedom: r.Data.Parameter, Mean: mean, SD: sd}
	case GammaShape:
		return data.Gamma{Shape: r.Data.Parameter, Mean: mean, SD: sd}
	}
	return data.Normal{Mean: mean, SD: sd}
}

// run gives what the exact methods are asked for.
func (r *Request) run(shift, ratio float64, role chart.Role) run {
	out := run{law: r.law(role, shift, ratio), start: r.Start}
	if r.Start == SteadyState {
		before := r.law(role, 0, 1)
		out.before = &before
	}
	return out
}

// warmUpPoints is how long a simulated chart runs in control before its state counts as steady.
const warmUpPoints = 60

// simulated gives the chart that a simulation judges.
func (r *Request) simulated(shift float64) (simulate.Chart, error) {
	c := simulate.Chart{HeadStart: r.Start == FreshStart}
	if r.Start == SteadyState {
		c.WarmUp = warmUpPoints
	}
	var err error
	if c.Location, err = r.Location.plan(); err != nil {
		return c, err
	}
	if c.Dispersion, err = r.Dispersion.plan(); err != nil {
		return c, err
	}
	centre, sigma := r.spreadScale()
	if r.Kind == chart.XbarR || r.Kind == chart.XbarS {
		root := math.Sqrt(float64(r.SubgroupSize))
		c.Points = &simulate.Subgroups{
			Before: r.shape(0, 1), After: r.shape(shift/root, r.SigmaRatio), MeanAfter: shift,
			Size: r.SubgroupSize, Ranges: r.Kind == chart.XbarR, Centre: centre, Sigma: sigma,
			Step: r.Data.Step, Correlation: r.Data.Correlation,
		}
		return c, nil
	}
	values := &simulate.Values{
		Before: r.shape(0, 1), After: r.shape(shift, r.SigmaRatio), MeanAfter: shift,
		Correlation: r.Data.Correlation, Step: r.Data.Step,
	}
	if r.Kind == chart.Individuals {
		values.MovingRanges = &[2]float64{centre, sigma}
	}
	c.Points = values
	return c, nil
}

// plan compiles a trace's rules for the judge, on a scale of sigmas; nil where it has none.
func (t *Trace) plan() (*rules.Plan, error) {
	if len(t.Rules) == 0 {
		return nil, nil
	}
	zero, one := 0.0, 1.0
	line := func(z float64) chart.Line {
		if math.IsInf(z, 0) {
			return chart.Line{Basis: chart.Absent}
		}
		return chart.Line{Value: z, Basis: chart.Target}
	}
	l := t.lines()
	return rules.Compile(chart.Trace{
		Centre: &zero, Sigma: &one,
		LowerAction: line(l.LowerAction), UpperAction: line(l.UpperAction),
		LowerWarning: line(l.LowerWarning), UpperWarning: line(l.UpperWarning),
	}, decimal.Unrounded, t.Rules)
}
