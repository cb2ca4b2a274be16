package judge

import (
	"fmt"
	"math"

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
			st.readings = append(st.readings, (x-level.Reference)/level.Sigma)
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
		return x, true, found && finite(x)
	case m.Transform.Kind != chart.Identity && role == chart.Location:
		x, ok = m.Transform.Invert(y)
		return x, true, ok
	}
	return y, false, true
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
