package judge

import (
	"fmt"
	"math"
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// checkModel refuses a model that the kind does not have, or that cannot be judged by.
func (l *Limits) checkModel() error {
	if err := limits.CheckModel(l.Kind, &l.Model); err != nil {
		e := err.(*limits.Error)
		return &Error{"model." + e.Field, e.Value + ": " + e.Problem}
	}
	want := map[chart.Kind]float64{chart.NP: float64(l.SubgroupSize), chart.C: 1}[l.Kind]
	if want != 0 && l.Model.Inspected != want {
		return &Error{"model.inspected", fmt.Sprintf("%v: all samples of this chart have the size %v", l.Model.Inspected, want)}
	}
	return nil
}

// sigmaSlack is how far a given sigma of counts may lie from the one that follows from the centre: people round it.
const sigmaSlack = 0.01

// checkCountTrace refuses a trace of counts that no sample has lines by: its lines follow from the centre.
func (j *Judge) checkCountTrace(t *Trace) *Error {
	kind, m := j.limits.Kind, &j.limits.Model
	if t.Centre == nil {
		return &Error{"centre", fmt.Sprintf("is not set; the lines of a chart of kind %s follow from it", kind)}
	}
	sigma, ok := limits.CountSigma(kind, *t.Centre, m.Inspected, m)
	if !ok || *t.Centre <= 0 {
		return &Error{"centre", fmt.Sprintf("%v: no chart of kind %s with samples of %v has lines about it", *t.Centre, kind, m.Inspected)}
	}
	if t.Sigma != nil && !(math.Abs(*t.Sigma-sigma) <= sigmaSlack*sigma) {
		return &Error{"sigma", fmt.Sprintf("%v: follows from the centre and is %v for samples of %v; leave it so", *t.Sigma, sigma, m.Inspected)}
	}
	return j.checkCountLines(t)
}

// checkCountLines refuses a line by its probability that does not lie where the exact count is. Where no count of the
// published size is beyond it, the place says nothing.
func (j *Judge) checkCountLines(t *Trace) *Error {
	for _, n := range []struct {
		field string
		line  chart.Line
		z     float64
	}{
		{"lower_action", t.LowerAction, -chart.ActionMultiple}, {"upper_action", t.UpperAction, chart.ActionMultiple},
		{"lower_warning", t.LowerWarning, -chart.WarningMultiple}, {"upper_warning", t.UpperWarning, chart.WarningMultiple},
	} {
		if n.line.Basis != chart.TailProbability {
			continue
		}
		if j.limits.Model.CountMethod != chart.Exact {
			return &Error{n.field, "lies by its probability, which goes with exact lines of counts"}
		}
		at := limits.ExactCountLine(j.limits.Kind, *t.Centre, j.limits.Model.Inspected, n.z)
		if math.IsInf(at, 0) {
			continue
		}
		if at = decimal.Round(at, j.limits.Places); math.Abs(at-n.line.Value) > 1e-9*max(1, at) {
			return &Error{n.field, fmt.Sprintf("value %v: the exact line lies at %v", n.line.Value, at)}
		}
	}
	return nil
}

// lineFunc gives the lines of a trace where they do not simply follow from centre and sigma.
func (j *Judge) lineFunc(role chart.Role) rules.LineFunc {
	m := &j.limits.Model
	switch {
	case role == chart.Location && j.limits.Kind.Counts() && m.CountMethod == chart.Exact:
		return func(at rules.Scale, z float64) float64 {
			return limits.ExactCountLine(j.limits.Kind, at.Centre, at.Inspected, z)
		}
	case role == chart.Location && j.limits.Kind.Counts():
		return func(at rules.Scale, z float64) float64 {
			return limits.NormalCountLine(j.limits.Kind, at.Centre, at.Sigma, at.Inspected, z)
		}
	case role == chart.Location && m.Transform.Kind != chart.Identity:
		floor := m.Transform.Floor()
		return func(at rules.Scale, z float64) float64 {
			line := decimal.Line(at.Centre, z, at.Sigma, decimal.Unrounded)
			if line < floor {
				return math.Inf(-1) // no reading lies on the scale below its floor
			}
			return line
		}
	}
	return nil
}

// onScale gives a point with its readings on the judged scale: transformed, or standardised by the level of its
// material. A reading outside the domain of the scale is known to lie below it, and is judged as such a bound.
func (j *Judge) onScale(st *State, pt Point) (Point, bool) {
	m := &j.limits.Model
	st.readings, st.bounds = st.readings[:0], st.bounds[:0]
	switch {
	case len(m.Levels) > 0:
		level, ok := m.LevelOf(pt.Material)
		if !ok {
			return pt, false
		}
		for _, x := range pt.Readings {
			st.readings = append(st.readings, level.Standardise(x))
		}
	case m.Transform.Kind != chart.Identity:
		outside := false
		for i, x := range pt.Readings {
			y, ok := m.Transform.Apply(x)
			bound := decimal.Measured
			if pt.Bounds != nil {
				bound = pt.Bounds[i]
			}
			if !ok && bound == decimal.Measured {
				bound = decimal.Below
			}
			outside = outside || bound != decimal.Measured
			st.readings, st.bounds = append(st.readings, y), append(st.bounds, bound)
		}
		if pt.Bounds = nil; outside {
			pt.Bounds = st.bounds
		}
	default:
		return pt, true
	}
	pt.Readings = st.readings
	return pt, true
}

// Original gives a place of a trace in the chart's unit, where the trace is judged on another scale: material names the
// level. Own is false where the trace is judged in that unit anyway; ok is false where no reading lies there.
func (j *Judge) Original(role chart.Role, material string, y float64) (x float64, own, ok bool) {
	m := &j.limits.Model
	switch {
	case len(m.Levels) > 0:
		level, found := m.LevelOf(material)
		if x = y * level.Sigma; role == chart.Location {
			x += level.Reference
		}
		// A moving range may reach from one material to another, and is then in no unit of either.
		moving := role == chart.Dispersion && j.limits.Kind == chart.Individuals
		return significant(x), true, found && finite(x) && !moving
	case m.Transform.Kind != chart.Identity && role == chart.Location:
		x, ok = m.Transform.Invert(y)
		return significant(x), true, ok && y > m.Transform.Floor()
	}
	return y, false, true
}

// significant leaves off what computing in float64 adds after the twelfth digit.
func significant(x float64) float64 {
	y, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 12, 64), 64)
	if err != nil {
		return x
	}
	return y
}

// CheckPoint refuses a point that the chart cannot have.
func (j *Judge) CheckPoint(pt Point) error {
	switch {
	case j.limits.Kind.Counts() && len(pt.Readings) > 0:
		return &Error{"readings", fmt.Sprintf("a chart of kind %s takes counts", j.limits.Kind)}
	case !j.limits.Kind.Counts() && pt.Count != nil:
		return &Error{"count", fmt.Sprintf("a chart of kind %s takes readings", j.limits.Kind)}
	case pt.Count != nil:
		if err := j.limits.Kind.CheckCount(*pt.Count, j.limits.SubgroupSize); err != nil {
			return &Error{"count", err.Error()}
		}
	}
	return nil
}
