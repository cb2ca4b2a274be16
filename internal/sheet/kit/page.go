package kit

import "strings"

// Form is how a formula is written.
type Form string

// The forms on the page of formulas, by the headings there.
const (
	WithCommas     Form = "separated by ,"
	WithSemicolons Form = "separated by ;"
	// PointLocale and CommaLocale read a number as their locale writes it.
	PointLocale Form = "with the decimal of the locale: a point"
	CommaLocale Form = "with the decimal of the locale: a comma"
	Browser     Form = "browser-based programs"
)

// Formula is one formula of the page.
type Formula struct {
	// Gives is what stands above it.
	Gives string
	Text  string
}

// Formulas reads the formulas of one form off the page, in order.
func Formulas(form Form) []Formula {
	var all []Formula
	gives, here := "", false
	for line := range strings.SplitSeq(text(formulas), "\n") {
		heading, isHeading := strings.CutPrefix(line, "== ")
		formula, isFormula := strings.CutPrefix(line, "    =")
		switch {
		case isHeading:
			here = heading == string(form)
		case isFormula && here:
			all = append(all, Formula{Gives: gives, Text: "=" + formula})
		case strings.HasSuffix(line, ":"):
			gives = strings.TrimSuffix(line, ":")
		}
	}
	return all
}
