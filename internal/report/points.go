package report

import (
	"fmt"

	"limitary/internal/chart"
)

// scaleText says on which scale readings are judged; empty where it is that of the chart's unit.
func scaleText(m *chart.Model) string {
	what := "reading"
	if m.Transform.Offset != 0 {
		what = fmt.Sprintf("(reading + %s)", Shortest(m.Transform.Offset))
	}
	switch {
	case m.Transform.Kind == chart.Log:
		return "natural logarithm of " + what + "; the centre is a median in the chart's unit, and sigma about the relative standard deviation where it is small"
	case m.Transform.Kind == chart.SquareRoot:
		return "square root of " + what + "; the centre is a median in the chart's unit"
	case len(m.Levels) > 0:
		return fmt.Sprintf("(reading - reference)/sigma of the level, %s", Count(len(m.Levels), "level"))
	}
	return ""
}

// Scale says on which scale readings are judged, and by which levels; nothing where it is that of the chart's unit.
func (t *Text) Scale(m *chart.Model) {
	text := scaleText(m)
	if text == "" {
		return
	}
	t.Section("Judged scale")
	t.Paragraph(text + ".")
	if len(m.Levels) == 0 {
		return
	}
	t.line("")
	table := NewTable("material", ">reference", ">sigma")
	for _, l := range m.Levels {
		table.Row(Foreign(l.Material), Shortest(l.Reference), Shortest(l.Sigma))
	}
	t.Table(table)
}

// countSigmaText says how the sigma of what a chart of counts plots follows from the centre, for a sample of a size.
func countSigmaText(kind chart.Kind, m *chart.Model, size string) string {
	text := map[chart.Kind]string{
		chart.P: "centre times (1 - centre) over " + size, chart.NP: "centre times (1 - centre over " + size + ")",
		chart.C: "centre", chart.U: "centre over " + size,
	}[kind]
	if m.BetweenSigma > 0 {
		return "root of (" + text + " + " + Shortest(m.BetweenSigma) + " squared)"
	}
	if m.Inflation > 0 {
		return "root of (" + text + "), times " + Shortest(m.Inflation)
	}
	if kind == chart.C {
		return "root of the centre"
	}
	return "root of (" + text + ")"
}

// Points says in words how the lines of a single point follow where they are not those of the table; nothing where all
// points have the same.
func (t *Text) Points(kind chart.Kind, size int, m *chart.Model) {
	sentences := pointSentences(kind, size, m)
	if len(sentences) == 0 {
		return
	}
	t.Section("Lines of single points")
	for _, s := range sentences {
		t.Paragraph(s)
	}
}

func pointSentences(kind chart.Kind, size int, m *chart.Model) (out []string) {
	switch {
	case kind.Counts():
		out = countSentences(kind, m)
	case kind.Duplicates():
		out = duplicateSentences(kind, size, m)
	case kind == chart.RunMeans:
		out = []string{fmt.Sprintf("A run of n readings has sigma = root of (%s squared + process sigma squared over n): more readings lessen the part within runs only.", Shortest(m.BetweenSigma))}
	case kind == chart.XbarR || kind == chart.XbarS:
		out = []string{fmt.Sprintf("A subgroup of fewer than %d readings has lines of its own, which follow from process sigma and its number of readings.", size)}
	}
	switch {
	case m.Transform.Kind != chart.Identity:
		out = append(out, "A reading that has no place on the scale is known to lie below all that have one, and is judged as such a bound.")
	case len(m.Levels) > 0:
		out = append(out, "In the chart's unit the lines of a level lie at its reference + its sigma times the lines above. A result of another material is not judged.")
	}
	return out
}

func countSentences(kind chart.Kind, m *chart.Model) []string {
	looked := map[bool]string{true: "items", false: "inspection units"}[kind.Items()]
	own := ""
	if kind == chart.P || kind == chart.U {
		own = fmt.Sprintf("Every sample has lines of its own, for the %s inspected in it; those above hold for %s. ", looked, Shortest(m.Inspected))
	}
	if m.CountMethod == chart.Exact {
		law := map[bool]string{true: "binomial", false: "Poisson"}[kind.Items()]
		return []string{own + fmt.Sprintf("Lines are exact: whole counts that leave at most %.5g (action) or %.5g (warning) beyond them on one side, if counts are %s with the centre. "+
			"A count on a line is not beyond it.", chart.ActionTail, chart.WarningTail, law)}
	}
	text := own + "Lines are the normal approximation, with sigma = " + countSigmaText(kind, m, "n") + "."
	if kind == chart.P || kind == chart.U {
		text += " n is what was inspected."
	}
	switch {
	case m.Inflation > 0:
		text += fmt.Sprintf(" The factor %s is that by which samples vary otherwise than counting explains (Laney 2002).", Shortest(m.Inflation))
	case m.BetweenSigma > 0:
		text += fmt.Sprintf(" %s is the standard deviation of the true value between samples.", Shortest(m.BetweenSigma))
	}
	return []string{text}
}

func duplicateSentences(kind chart.Kind, size int, m *chart.Model) []string {
	var out []string
	if size > 2 {
		out = append(out, fmt.Sprintf("A set of fewer than %d readings has lines of its own, which follow from its number of readings.", size))
	}
	s := m.Spread
	switch {
	case s == nil:
		return out
	case len(s.Bands) > 0:
		out = append(out, "Sigma, and the lines with it, is that of the band in which the mean of the set lies; those above hold for the first band.")
	case s.S0 > 0 || s.B > 0:
		out = append(out, fmt.Sprintf("Sigma, and the lines with it, is the root of (%s squared + (%s times the mean of the set) squared); those above hold for process sigma, that at the median of the means of the basis.", Shortest(s.S0), Shortest(s.B)))
	}
	if s.AbsoluteBelow > 0 {
		out = append(out, fmt.Sprintf("Below a mean of %s the plain range is plotted, with a sigma of %s of a single reading.", Shortest(s.AbsoluteBelow), Shortest(s.AbsoluteSigma)))
	}
	return out
}
