package report

import (
	"fmt"
	"math"
	"strings"

	"limitary/internal/diagnostics"
)

// diagnostics writes what was asked of the results and what they answered.
func (t *Text) diagnostics(r *diagnostics.Report) {
	if r == nil || len(r.Tests) == 0 {
		return
	}
	t.Section("Tests of the results")
	table := NewTable("test", "of", ">n", ">statistic", ">p", ">critical", "outcome")
	for _, each := range r.Tests {
		table.Row(each.Name, each.Subject, fmt.Sprint(each.N), optional(each.Statistic, 4), pText(each.PValue), optional(each.Critical, 4), outcomeWord(each.Outcome))
	}
	t.Table(table)
	t.line("")
	t.Paragraph(jointText(r))
	for _, each := range r.Tests {
		if each.Reason != "" && (each.Outcome == diagnostics.Void || each.Outcome == diagnostics.NotEnoughData) {
			t.Item(fmt.Sprintf("%s (%s): not made. %s", each.Name, each.Subject, sentence(each.Reason)))
		}
	}
	t.setup(r)
	for _, p := range []*diagnostics.Picture{r.Values, r.Means} {
		t.histogram(p)
	}
}

// jointText tells how often clean data give a finding.
func jointText(r *diagnostics.Report) string {
	text := fmt.Sprintf("Each test is made at the level %g.", diagnostics.Level)
	if r.JointRate > 0 {
		text += fmt.Sprintf(" Together they find something in %.1f %% of clean data as simulated for this kind; %.1f %% if they were independent.", 100*r.JointRate, 100*r.JointBound)
	} else if r.JointBound > 0 {
		text += fmt.Sprintf(" Together they find something in up to %.1f %% of clean data.", 100*r.JointBound)
	}
	if r.Step > 0 {
		text += fmt.Sprintf(" Readings are rounded to steps of %s; %.0f %% are equal to another one.", Significant(r.Step, 6), 100*r.Tied)
	}
	return text + " Nothing found is no proof that nothing is there."
}

// setup writes the signals in the basis beside those of clean data.
func (t *Text) setup(r *diagnostics.Report) {
	if len(r.Setup) == 0 {
		return
	}
	t.Section(fmt.Sprintf("Signals in the basis by the set %s, beside those of clean data", diagnostics.SetupSet))
	table := NewTable("rule", ">observed", ">expected", "looks for")
	for _, s := range r.Setup {
		table.Row(s.Rule, fmt.Sprint(s.Observed), fmt.Sprintf("%.2f", s.Expected), s.Description)
	}
	t.Table(table)
}

const (
	// barRunesMax is the length of the longest bar, binsShownMax the most bars; neighbouring bins are joined beyond it.
	barRunesMax  = 40
	binsShownMax = 20
)

// histogram writes counts as bars.
func (t *Text) histogram(p *diagnostics.Picture) {
	if p == nil || len(p.Histogram.Counts) == 0 {
		return
	}
	h := p.Histogram
	joined := (len(h.Counts) + binsShownMax - 1) / binsShownMax
	var bins []int
	most := 0
	for i := 0; i < len(h.Counts); i += joined {
		n := 0
		for _, k := range h.Counts[i:min(i+joined, len(h.Counts))] {
			n += k
		}
		bins, most = append(bins, n), max(most, n)
	}
	t.Section("Distribution of " + p.Subject)
	table := NewTable(">from", ">to", ">n", "")
	for i, n := range bins {
		from := h.Lower + float64(i*joined)*h.Width
		bar := strings.Repeat("#", int(math.Ceil(float64(n*barRunesMax)/float64(most))))
		table.Row(edge(from, h.Width), edge(from+float64(joined)*h.Width, h.Width), fmt.Sprint(n), bar)
	}
	t.Table(table)
}

// edge writes an edge of a bin with the decimals that its width shows.
func edge(x, width float64) string {
	places := 0
	if width > 0 {
		places = min(max(0, 2-int(math.Floor(math.Log10(width)))), 15)
	}
	return Fixed(x, places)
}

func optional(x *float64, digits int) string {
	if x == nil {
		return ""
	}
	return Significant(*x, digits)
}

// pText writes a p-value; below the smallest shown it says so.
func pText(p *float64) string {
	switch {
	case p == nil:
		return ""
	case *p < 0.0001:
		return "<0.0001"
	}
	return fmt.Sprintf("%.4f", *p)
}

func outcomeWord(o diagnostics.Outcome) string {
	return strings.ToLower(strings.ReplaceAll(string(o), "_", " "))
}

// sentence gives a text a capital and a stop, if it lacks them.
func sentence(s string) string {
	if s == "" {
		return s
	}
	s = strings.ToUpper(s[:1]) + s[1:]
	if strings.HasSuffix(s, ".") {
		return s
	}
	return s + "."
}
