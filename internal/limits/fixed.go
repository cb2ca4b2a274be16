package limits

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// positions names the four lines of a trace in messages, in the order of FixedLines.all and linesOf.
var positions = [4]string{"lowerAction", "upperAction", "lowerWarning", "upperWarning"}

func (f *FixedLines) all() [4]*chart.Line {
	return [4]*chart.Line{f.LowerAction, f.UpperAction, f.LowerWarning, f.UpperWarning}
}

// linesOf gives the four lines of a trace, to be written in place.
func linesOf(t *chart.Trace) [4]*chart.Line {
	return [4]*chart.Line{&t.LowerAction, &t.UpperAction, &t.LowerWarning, &t.UpperWarning}
}

func fixedField(role chart.Role, position int) string {
	return fmt.Sprintf("fixed.%s.%s", role, positions[position])
}

// checkFixed refuses fixed lines of another basis, off the scale, or written with more decimals than are published: a
// criterion is a figure of the method and may not be moved by rounding.
func (r *Request) checkFixed() error {
	for role := range chart.Roles {
		for i, line := range r.Fixed[role].all() {
			if line == nil || line.Basis == chart.Absent {
				continue
			}
			field := fixedField(role, i)
			if !r.Kind.Has(role) {
				return refuse(field, line.Value, "a chart of kind %s has no such trace", r.Kind)
			}
			if r.Kind.Duplicates() && i%2 == 0 {
				return refuse(field, line.Value, "duplicates are watched for differing too much only; a lower line is always absent")
			}
			if line.Basis != chart.MethodCriterion && line.Basis != chart.Target {
				return refuse(field, line.Basis, "a fixed line has basis method_criterion, target or absent")
			}
			if err := checkMagnitude(field, line.Value); err != nil {
				return err
			}
			if floor := r.Transform.Floor(); role == chart.Location && line.Value < floor {
				return refuse(field, line.Value, "lies below %g, the lower end of the transformed scale; give lines in its units", floor)
			}
			if role == chart.Dispersion && line.Value <= 0 {
				return refuse(field, line.Value, "a range or standard deviation is never below zero; a line there must be larger, or absent")
			}
			places := decimal.Places(line.Value)
			if d := r.PublishedDecimals; d != nil && places > *d || places > decimal.PlacesMax {
				return refuse(field, line.Value, "has %d decimals and would be moved by rounding to the published decimals; publish as many, at most %d", places, decimal.PlacesMax)
			}
		}
	}
	return nil
}

// place writes the fixed lines over the computed ones and refuses lines that cross.
func (f *FixedLines) place(role chart.Role, t *chart.Trace) error {
	lines := linesOf(t)
	for i, fixed := range f.all() {
		switch {
		case fixed == nil:
		case fixed.Basis == chart.Absent:
			*lines[i] = chart.Line{Basis: chart.Absent}
		default:
			*lines[i] = chart.Line{Value: fixed.Value + 0, Basis: fixed.Basis}
		}
	}
	for i := 0; i < len(lines); i += 2 {
		lower, upper := lines[i], lines[i+1]
		if lower.Basis != chart.Absent && upper.Basis != chart.Absent && lower.Value >= upper.Value {
			field := fixedField(role, i)
			if !lower.Fixed() {
				field = fixedField(role, i+1)
			}
			return refuse(field, fmt.Sprintf("lower %g, upper %g", lower.Value, upper.Value), "the lower line must lie below the upper one")
		}
	}
	return nil
}
