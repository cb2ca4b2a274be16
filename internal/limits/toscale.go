package limits

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// scaled reports whether readings are judged on another scale than that of the chart's unit.
func (r *Request) scaled() bool { return r.Transform.Kind != chart.Identity || len(r.Levels) > 0 }

// checkScale refuses a transform or levels that the kind does not have, and a centre that is not on the scale.
func (r *Request) checkScale() error {
	m := chart.Model{Transform: r.Transform, Levels: r.Levels}
	if r.Kind.Counts() {
		m.CountMethod, m.Inspected = chart.Normal, 1 // what a model of counts always has; the rest is checked here
	}
	if err := CheckModel(r.Kind, &m); err != nil {
		return err
	}
	if floor := r.Transform.Floor(); r.Centre != nil && *r.Centre < floor {
		return refuse("centre", *r.Centre, "lies below %g, the lower end of the transformed scale; give it in the units of that scale", floor)
	}
	return nil
}

// toScale replaces the readings used by those on the judged scale: transformed, or standardised by the level of their
// material. Excluded groups stay as they are, since nothing is taken from them.
func (r *Request) toScale() error {
	if !r.scaled() {
		return nil
	}
	groups := make([]Group, len(r.Groups))
	model := chart.Model{Levels: r.Levels}
	for i, g := range r.Groups {
		if !g.Excluded {
			readings, err := r.readingsOnScale(i, &model)
			if err != nil {
				return err
			}
			g.Readings, g.Decimals = readings, 0
		}
		groups[i] = g
	}
	r.Groups = groups
	return nil
}

func (r *Request) readingsOnScale(i int, model *chart.Model) ([]float64, error) {
	g := &r.Groups[i]
	level, ok := model.LevelOf(g.Material)
	if len(r.Levels) > 0 && !ok {
		return nil, refuse(fmt.Sprintf("groups[%d].material", i), fmt.Sprintf("%q", g.Material), "is no level of the standardised track; add the level or exclude the group")
	}
	readings := make([]float64, len(g.Readings))
	for j, x := range g.Readings {
		field := fmt.Sprintf("groups[%d].readings[%d]", i, j)
		y, ok := r.Transform.Apply(x)
		if !ok {
			return nil, refuse(field, x, "with the offset %g it lies outside the domain of the %s scale; use a larger offset or exclude the group", r.Transform.Offset, r.Transform.Kind)
		}
		if len(r.Levels) > 0 {
			y = level.Standardise(x)
		}
		if !finiteAndBounded(y) {
			return nil, refuse(field, x, "is %g on the judged scale, larger in size than the limit of %g", y, MagnitudeMax)
		}
		readings[j] = y
	}
	return readings, nil
}

// dropBelowFloor removes lines below the lower end of a transformed scale, where no reading lies. It looks at the line
// before rounding, as the judge does.
func dropBelowFloor(t *chart.Trace, transform chart.Transform) {
	for _, lower := range []struct {
		line *chart.Line
		z    float64
	}{{&t.LowerAction, chart.ActionMultiple}, {&t.LowerWarning, chart.WarningMultiple}} {
		if decimal.Line(*t.Centre, -lower.z, *t.Sigma, decimal.Unrounded) < transform.Floor() {
			*lower.line = chart.Line{Basis: chart.Absent}
		}
	}
}
