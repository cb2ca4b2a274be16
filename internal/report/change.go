package report

import (
	"fmt"
	"strings"
)

// Change is the answer whether limits in force should be kept, given new results.
type Change struct {
	// Against says which limits are in force.
	Against string
	// Decision is KEEP, CHANGE or NOT_ENOUGH_DATA; Text says why.
	Decision, Text string
	Figures        []ChangeFigure
	Notes          []string
	// Looks of twelve months, and the chance that the interval of at least one of so many misses.
	Looks       int
	OneWrongMax float64
}

// ChangeFigure is the answer on one figure of the limits.
type ChangeFigure struct {
	Name                         string
	Estimate, Lower, Upper       *float64
	RelevantLower, RelevantUpper float64
	Decision, Text               string
	// Needed is about how many new results would settle it; nil where it is settled, or nothing would.
	Needed *int
	// P of no difference; not valid for PReason. PlainP is that of the plain t, F or chi-square test.
	P       *float64
	PValid  bool
	PReason string
	PlainP  *float64
}

// Change writes the decision first, the intervals after it and p-values last.
func (t *Text) Change(c *Change) {
	if c == nil {
		return
	}
	t.Section("Limits in force, " + c.Against + ": " + strings.ReplaceAll(c.Decision, "_", " "))
	t.Paragraph(c.Text)
	t.line("")
	table := NewTable("figure", "decision", ">estimate", "95 % interval", "does not matter within", ">results needed")
	for _, f := range c.Figures {
		needed := ""
		if f.Needed != nil {
			needed = fmt.Sprint(*f.Needed)
		}
		table.Row(f.Name, strings.ReplaceAll(f.Decision, "_", " "), optional(f.Estimate, 4), f.interval(), fmt.Sprintf("%.3g to %.3g", f.RelevantLower, f.RelevantUpper), needed)
	}
	t.Table(table)
	t.line("")
	for _, f := range c.Figures {
		t.Item(f.Text)
	}
	for _, n := range c.Notes {
		t.Item(n)
	}
	t.changeP(c)
}

func (f *ChangeFigure) interval() string {
	if f.Lower == nil || f.Upper == nil {
		return ""
	}
	return fmt.Sprintf("%.4g to %.4g", *f.Lower, *f.Upper)
}

// changeP writes the p-values, which are no part of the decision.
func (t *Text) changeP(c *Change) {
	var parts []string
	why := ""
	for _, f := range c.Figures {
		if f.P == nil {
			continue
		}
		text := fmt.Sprintf("%s p %s", f.Name, pText(f.P))
		if f.PlainP != nil {
			text += fmt.Sprintf(" (plain test p %s)", pText(f.PlainP))
		}
		if !f.PValid {
			text, why = text+", NOT VALID", f.PReason
		}
		parts = append(parts, text)
	}
	if len(parts) == 0 {
		return
	}
	t.line("")
	t.Paragraph(strings.TrimSpace("Of no difference at all, and no part of the decision: " + strings.Join(parts, "; ") + ". " + why))
}
