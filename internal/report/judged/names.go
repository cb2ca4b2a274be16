package judged

import (
	"cmp"
	"fmt"

	"limitary/internal/chart"
)

var statistics = map[chart.Kind][chart.Roles]string{
	chart.Given:          {"Statistic as given", ""},
	chart.Individuals:    {"Single value", "Moving range"},
	chart.XbarR:          {"Subgroup mean", "Subgroup range"},
	chart.XbarS:          {"Subgroup mean", "Subgroup standard deviation"},
	chart.RunMeans:       {"Run mean", "Standard deviation within the run"},
	chart.P:              {"Fraction nonconforming", ""},
	chart.NP:             {"Number nonconforming", ""},
	chart.C:              {"Nonconformities", ""},
	chart.U:              {"Nonconformities per unit", ""},
	chart.DuplicateRange: {"", "Range of replicates"},
	chart.RelativeRange:  {"", "Relative range"},
}

// StatisticName says what a trace plots.
func StatisticName(kind chart.Kind, role chart.Role) string { return statistics[kind][role] }

// StatisticOf says what a trace plots, and on which scale where that is not the chart's unit.
func StatisticOf(kind chart.Kind, m *chart.Model, role chart.Role) string {
	name := StatisticName(kind, role)
	switch {
	case len(m.Levels) > 0:
		return name + ", standardised by level"
	case m.Transform.Kind == chart.Log:
		return name + ", natural logarithms"
	case m.Transform.Kind == chart.SquareRoot:
		return name + ", square roots"
	case m.Spread != nil && m.Spread.AbsoluteBelow > 0:
		return name + ", plain at low means"
	}
	return name
}

// PlottedUnit gives the unit of what is plotted; unit is that of the results.
func PlottedUnit(kind chart.Kind, m *chart.Model, unit string) string {
	switch {
	case len(m.Levels) > 0:
		return "sigmas of the level"
	case m.Transform.Kind != chart.Identity:
		if unit == "" {
			return m.Transform.Kind.String()
		}
		return m.Transform.Kind.String() + " of " + unit
	case kind == chart.RelativeRange && m.Spread != nil && m.Spread.AbsoluteBelow > 0:
		return fmt.Sprintf("%% of the mean; below %g %s", m.Spread.AbsoluteBelow, cmp.Or(unit, "plain"))
	case kind == chart.RelativeRange:
		return "% of the mean"
	}
	return unit
}
