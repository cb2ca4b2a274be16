package service

import (
	"fmt"
	"slices"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// Codes of cautions: what a proposal may only do with its author's eyes open. They stay in the version as findings.
const (
	cautionRuleNotForDispersion = "RULE_NOT_FOR_DISPERSION"
	cautionNeighboursShare      = "MOVING_RANGES_SHARE_VALUES"
	cautionSetupPattern         = "SETUP_PATTERN_IN_MONITORING"
	cautionCentreAway           = "CENTRE_AWAY_FROM_MEAN"
	cautionRuleNotForCounts     = "RULE_NOT_FOR_COUNTS"
	cautionRuleNotForDuplicates = "RULE_NOT_FOR_DUPLICATES"
	cautionInflationBelowOne    = limits.CodeInflationBelowOne
)

var cautionCodes = []string{cautionRuleNotForDispersion, cautionNeighboursShare, cautionSetupPattern, cautionCentreAway,
	cautionRuleNotForCounts, cautionRuleNotForDuplicates, cautionInflationBelowOne}

// cautions lists what in the choice of rules goes against the custom of the trade, for a chart with the given limits.
func cautions(kind chart.Kind, location, dispersion []rules.Spec, found []limits.Finding) []definition.Finding {
	var out []definition.Finding
	add := func(code string, specs []rules.Spec, against func(rules.Spec) bool, text, advice, miss string) {
		if ids := matching(specs, against); len(ids) > 0 {
			out = append(out, definition.Finding{Code: code, Figure: float64(len(ids)), Text: fmt.Sprintf(text, strings.Join(ids, ", ")), Advice: advice, CouldMiss: miss})
		}
	}
	add(cautionRuleNotForDispersion, dispersion, func(s rules.Spec) bool { return !kind.Duplicates() && !s.SuitsDispersion() },
		"Rules %s watch a dispersion trace, whose statistics are skewed; their false alarms are not those of a location trace.",
		"Keep to one point beyond a line, runs on one side, trends and alternations there.", "A skewed statistic can also hide a fall of the scatter.")
	if kind == chart.Individuals {
		add(cautionNeighboursShare, dispersion, rules.Spec.IsRunPattern,
			"Rules %s look for patterns among moving ranges, and neighbouring moving ranges share a value.",
			"Expect more of these patterns than their nominal rate; look at the values first.", "The nominal rate of the rules says nothing here.")
	}
	if kind.Counts() {
		add(cautionRuleNotForCounts, location, func(s rules.Spec) bool { return !isOneBeyond(s) },
			"Rules %s watch counts, whose steps and skewness give patterns another rate than the nominal one.",
			"Keep to one point beyond a line on charts of counts.", "A slow rise of the mean; collect more in each sample to see it.")
	}
	if kind.Duplicates() {
		add(cautionRuleNotForDuplicates, dispersion, func(s rules.Spec) bool { return !isOneBeyond(s) },
			"Rules %s look for patterns among ranges of duplicates, which come from different samples in no order that means anything.",
			"Keep to one point above a line on charts of duplicates.", "A slow loss of repeatability; the change test on new results shows it.")
	}
	for _, f := range found {
		if f.Code == limits.CodeInflationBelowOne {
			out = append(out, definition.Finding{Code: f.Code, Figure: f.Figure, Threshold: f.Threshold, Text: f.Text, Advice: f.Advice, CouldMiss: f.CouldMiss})
		}
	}
	all := slices.Concat(location, dispersion)
	add(cautionSetupPattern, all, isSetup,
		"Rules %s are for setting a chart up; kept in monitoring they mostly add false alarms.",
		"Use them on the data the limits come from, and drop them for monitoring.", "Mixed streams that appear later are left to the other rules.")
	if slices.ContainsFunc(found, func(f limits.Finding) bool { return f.Code == limits.CodeTargetCentreDiffers }) {
		add(cautionCentreAway, location, func(s rules.Spec) bool {
			return s.Kind == rules.SameSide || s.Kind == rules.EWMA || s.Kind == rules.CUSUM
		}, "Rules %s will signal again and again: the given centre lies away from the mean of the data.",
			"Settle the bias, take the centre from the data, or leave these rules out.", "A bias smaller than the data can show.")
	}
	return out
}

func matching(specs []rules.Spec, against func(rules.Spec) bool) []string {
	var ids []string
	for _, s := range specs {
		if against(s) {
			ids = append(ids, s.ID)
		}
	}
	return ids
}

func isOneBeyond(s rules.Spec) bool {
	return s.Kind == rules.BeyondLine || s.Kind == rules.Beyond && s.K == 1 && s.M == 1
}

func isSetup(s rules.Spec) bool {
	return s.Kind == rules.Alternating || s.Kind == rules.Within || s.Kind == rules.Outside
}

// accept refuses a proposal whose cautions are not all accepted by their codes. Accepting one that does not arise is
// harmless, naming one that does not exist is an error.
func accept(found []definition.Finding, accepted []string) error {
	for i, code := range accepted {
		if !slices.Contains(cautionCodes, code) {
			return definition.Invalid(fmt.Sprintf("accepted_cautions[%d]", i), "%q: want one of %s", clip(code), strings.Join(cautionCodes, ", "))
		}
	}
	var codes, texts []string
	for _, f := range found {
		if !slices.Contains(accepted, f.Code) {
			codes, texts = append(codes, f.Code), append(texts, f.Code+": "+f.Text+" "+f.Advice)
		}
	}
	if len(codes) == 0 {
		return nil
	}
	return &definition.Error{Reason: definition.CautionNotAccepted, Field: "accepted_cautions", Text: strings.Join(texts, " "),
		Meta: map[string]string{"cautions": strings.Join(codes, ",")}}
}
