package main

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// lineFlags set lines that do not follow from sigma. Compute and judge share them.
type lineFlags struct {
	criterion string
	lines     [chart.Roles][4]lineFlag
}

// lineFlag is where a line lies, or that there is none.
type lineFlag struct {
	given, absent bool
	value         float64
	text          string
}

func (l *lineFlag) String() string {
	if l == nil {
		return ""
	}
	return l.text
}

func (l *lineFlag) Set(s string) error {
	*l = lineFlag{given: true, text: s}
	if strings.EqualFold(s, "none") {
		l.absent = true
		return nil
	}
	var err error
	if l.value, err = parseNumber(s); err != nil {
		return fmt.Errorf("%w, or none where there is to be no such line", err)
	}
	return nil
}

// lineNames are the lines of a trace in the order of lineFlags.lines, as flags and as package limits name them.
var lineNames = [4]struct{ flag, field string }{
	{"lower-action", "lowerAction"}, {"upper-action", "upperAction"}, {"lower-warning", "lowerWarning"}, {"upper-warning", "upperWarning"},
}

// flagOf names the flag of a line.
func flagOf(role chart.Role, line int) string {
	if role == chart.Dispersion {
		return "dispersion-" + lineNames[line].flag
	}
	return lineNames[line].flag
}

func (l *lineFlags) register(f *flagSet) {
	for role := range chart.Roles {
		for i, n := range lineNames {
			f.Var(&l.lines[role][i], flagOf(role, i), fmt.Sprintf("`V`: the %s line of the %s trace lies at V, whatever sigma is; none for no such line",
				strings.ReplaceAll(n.flag, "-", " "), role))
		}
	}
	f.StringVar(&l.criterion, "criterion", "", "what the lines given by V rest on: `BASIS` method (the accredited method's criterion) or target (set by the laboratory or a programme)")
}

// fixed gives the lines by trace.
func (l *lineFlags) fixed() (out [chart.Roles]limits.FixedLines, err error) {
	basis, numbers := chart.Absent, 0
	switch l.criterion {
	case "":
	case "method":
		basis = chart.MethodCriterion
	case "target":
		basis = chart.Target
	default:
		return out, fmt.Errorf("--criterion %q: want method or target", l.criterion)
	}
	for role := range chart.Roles {
		into := [4]**chart.Line{&out[role].LowerAction, &out[role].UpperAction, &out[role].LowerWarning, &out[role].UpperWarning}
		for i, line := range l.lines[role] {
			switch {
			case !line.given:
				continue
			case line.absent:
				*into[i] = &chart.Line{Basis: chart.Absent}
				continue
			case basis == chart.Absent:
				return out, fmt.Errorf("--%s %s: say what the line rests on with --criterion method or --criterion target", flagOf(role, i), line.text)
			}
			numbers++
			*into[i] = &chart.Line{Value: line.value, Basis: basis}
		}
	}
	if l.criterion != "" && numbers == 0 {
		return out, fmt.Errorf("--criterion %s: no line is given; use it with --upper-action V and the like", l.criterion)
	}
	return out, nil
}

// watched refuses a fixed action or warning line that no rule looks at: it would be drawn and never judged.
func (l *lineFlags) watched(role chart.Role, specs []rules.Spec) error {
	kinds := [4]rules.LineKind{rules.ActionLine, rules.ActionLine, rules.WarningLine, rules.WarningLine}
	for i, line := range l.lines[role] {
		looks := slices.ContainsFunc(specs, func(s rules.Spec) bool { return s.Kind == rules.BeyondLine && s.Line == kinds[i] })
		if line.given && !line.absent && !looks {
			return fmt.Errorf("--%s %s: no rule of the %s trace looks at this line, so it would not be judged; add the set %s to the rules",
				flagOf(role, i), line.text, role, rules.DefaultSet)
		}
	}
	return nil
}

// limitsFault tells a refusal of package limits in the words of the command line.
func limitsFault(err error, src *source, rowOf []int) error {
	var e *limits.Error
	if !errors.As(err, &e) {
		return err
	}
	var group int
	if n, _ := fmt.Sscanf(e.Field, "groups[%d]", &group); n == 1 && group < len(rowOf) {
		return fmt.Errorf("%s: line %d: %s: %s", src.name, src.table.Line(rowOf[group]), e.Value, optionFlags.Replace(e.Problem))
	}
	if e.Field == "groups" {
		return fmt.Errorf("%s: %s: %s", src.name, e.Value, optionFlags.Replace(e.Problem))
	}
	text := optionFlags.Replace(e.Problem)
	if e.Value != "" {
		text = e.Value + ": " + text
	}
	if e.Field == "publishedDecimals" { // it depends on the results whether so many do
		return fmt.Errorf("%s: %s: %s", src.name, flagName(e.Field), text)
	}
	return usageError{fmt.Errorf("%s: %s", flagName(e.Field), text)}
}

// flagName gives the flag that sets a field of package limits.
func flagName(field string) string {
	for role := range chart.Roles {
		for i, n := range lineNames {
			if field == fmt.Sprintf("fixed.%s.%s", role, n.field) {
				return "--" + flagOf(role, i)
			}
		}
	}
	names := map[string]string{"subgroupSize": "--size", "publishedDecimals": "--decimals", "transform": "--scale", "transform.offset": "--offset", "levels": "--level"}
	if n, ok := names[field]; ok {
		return n
	}
	if n := optionFlags.Replace(field); n != field {
		return n
	}
	return "--" + field
}

// optionFlags turns the names of what kinds can be asked for into flags, in fields and in sentences.
var optionFlags = strings.NewReplacer(
	"counts.method", "--count-method", "counts.extra", "--extra", "counts.meanUpperBound", "--mean-upper-bound",
	"duplicates.sigmas", "--band-sigma", "duplicates.bands", "--bands", "duplicates.function", "--spread-function",
	"duplicates.absoluteSigma", "--absolute-sigma", "duplicates.absolute_sigma", "--absolute-sigma",
	"duplicates.absoluteBelow", "--absolute-below", "duplicates.absolute_below", "--absolute-below",
	"duplicates.s0", "--spread-at-zero", "duplicates.b", "--spread-growth", "betweenSigma", "--between-sigma",
)
