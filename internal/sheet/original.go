package sheet

import (
	"slices"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/grid"
)

// places are the numbers of a trace that lie on its scale, as they stand in the chart's unit.
var places = map[string]func(*pb.OriginalScale) *float64{
	"centre":        func(o *pb.OriginalScale) *float64 { return o.Centre },
	"lower_action":  func(o *pb.OriginalScale) *float64 { return o.LowerAction },
	"lower_warning": func(o *pb.OriginalScale) *float64 { return o.LowerWarning },
	"upper_warning": func(o *pb.OriginalScale) *float64 { return o.UpperWarning },
	"upper_action":  func(o *pb.OriginalScale) *float64 { return o.UpperAction },
}

// valueOf gives a number of a version on the scale that is asked for: the one it is judged on, or the chart's unit.
func (r *request) valueOf(v *pb.Version, name string) (grid.Value, error) {
	unit, material := r.query.Get("unit"), r.query.Get("material")
	plain, isDispersion := strings.CutPrefix(name, ofDispersion)
	switch {
	case unit == "" && material == "":
		return valueOf(v, name)
	case unit == "":
		return grid.Value{}, refuse("material=%s: chooses the level for unit=original; add that", clip(material))
	case unit != "original":
		return grid.Value{}, refuse("unit=%s: want original, or nothing for the scale that is judged", clip(unit))
	case places[plain] == nil:
		return grid.Value{}, refuse("unit=original: %s is no place on a trace; there are centre and the four lines, with dispersion_ before them too", name)
	}
	if levels := v.GetModel().GetLevels(); len(levels) > 0 {
		return inLevel(v, name, levels, material, isDispersion)
	}
	if material != "" {
		return grid.Value{}, refuse("material=%s: chart %q is not standardised by material", clip(material), v.Chart)
	}
	o := v.Location.GetOriginal()
	if isDispersion || o == nil {
		return valueOf(v, name) // judged in the chart's unit
	}
	if x := places[plain](o); x != nil {
		return grid.Optional(x), nil
	}
	return grid.Value{}, refuse("version %d of chart %q has no %s in the chart's unit", v.Number, v.Chart, name)
}

// inLevel gives a place in the unit of the readings of one material, which count as (reading - reference)/sigma.
func inLevel(v *pb.Version, name string, levels []*pb.Level, material string, isDispersion bool) (grid.Value, error) {
	at := slices.IndexFunc(levels, func(l *pb.Level) bool { return l.Material == material })
	if at < 0 {
		known := make([]string, len(levels))
		for i, l := range levels {
			known[i] = l.Material
		}
		return grid.Value{}, refuse("material=%s: version %d of chart %q has the levels %s", clip(material), v.Number, v.Chart, clip(strings.Join(known, ", ")))
	}
	if value, err := valueOf(v, name); err != nil {
		return value, err
	}
	y, _ := numberOf(v, name)
	x := y * levels[at].Sigma
	if !isDispersion {
		x += levels[at].Reference
	}
	return grid.Float(x), nil
}

// numberOf gives a place of a trace as a number.
func numberOf(v *pb.Version, name string) (float64, bool) {
	plain, isDispersion := strings.CutPrefix(name, ofDispersion)
	t := v.Location
	if isDispersion {
		t = v.Dispersion
	}
	if t == nil {
		return 0, false
	}
	if plain == "centre" {
		return t.GetCentre(), t.Centre != nil
	}
	l := map[string]*pb.Line{"lower_action": t.LowerAction, "lower_warning": t.LowerWarning, "upper_warning": t.UpperWarning, "upper_action": t.UpperAction}[plain]
	return l.GetValue(), l != nil && l.Value != nil
}
