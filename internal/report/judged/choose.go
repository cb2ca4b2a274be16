package judged

import (
	"limitary/internal/chart"
	"limitary/internal/rules"
)

// DispersionRules gives those of the rules that suit a dispersion trace of the kind, and the ids of the others. Points
// beyond a line always do. Runs on one side, trends and alternations do on ranges and standard deviations; on moving
// ranges only where asked for, because neighbouring moving ranges share a value, and on duplicates only where asked for,
// because different samples have no order that means anything. Zone rules of several points and patterns of many points
// take a symmetric statistic for granted (common practice, no source).
func DispersionRules(kind chart.Kind, specs []rules.Spec, asked bool) (taken []rules.Spec, left []string) {
	for _, s := range specs {
		unusual := s.IsRunPattern() && kind == chart.Individuals || !OnePointBeyond(s) && kind.Duplicates()
		if s.SuitsDispersion() && (asked || !unusual) {
			taken = append(taken, s)
		} else {
			left = append(left, s.ID)
		}
	}
	return taken, left
}

// CountRules gives those of the rules that suit counts, and the ids of the others: one point beyond a line. The steps and
// the skewness of counts give every pattern another rate than the nominal one.
func CountRules(specs []rules.Spec) (taken []rules.Spec, left []string) {
	for _, s := range specs {
		if OnePointBeyond(s) {
			taken = append(taken, s)
		} else {
			left = append(left, s.ID)
		}
	}
	return taken, left
}

// OnePointBeyond reports whether a rule looks for a single point beyond a line.
func OnePointBeyond(s rules.Spec) bool {
	return s.Kind == rules.BeyondLine || s.Kind == rules.Beyond && s.K == 1 && s.M == 1
}
