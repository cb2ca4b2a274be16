package judged

import (
	"limitary/internal/chart"
	"limitary/internal/rules"
)

// DispersionRules gives those of the rules that suit a dispersion trace of the kind, and the ids of the others. Points
// beyond a line always do. Runs on one side, trends and alternations do on ranges and standard deviations; on moving
// ranges only where asked for, because neighbouring moving ranges share a value. Zone rules of several points and
// patterns of many points take a symmetric statistic for granted (common practice, no source).
func DispersionRules(kind chart.Kind, specs []rules.Spec, asked bool) (taken []rules.Spec, left []string) {
	for _, s := range specs {
		if s.SuitsDispersion() && !(s.IsRunPattern() && kind == chart.Individuals && !asked) {
			taken = append(taken, s)
		} else {
			left = append(left, s.ID)
		}
	}
	return taken, left
}
