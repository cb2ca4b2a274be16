package report

import (
	"fmt"
	"io"
	"slices"
	"time"

	"limitary/internal/validation"
)

// PassList is the outcome of the validation checks.
type PassList struct {
	At                time.Time
	Program, Platform string
	Judge             int
	Checks            []validation.Check
}

// Validation writes the pass list: a table for each subject, the sources below it, and the result at the end.
func Validation(w io.Writer, list PassList) error {
	t := NewText(w)
	t.Title("Validation of limitary by published and computed figures")
	t.line("")
	t.Pairs(
		Pair{"date", list.At.Format(time.RFC3339)}, Pair{"program", list.Program}, Pair{"judge number", fmt.Sprint(list.Judge)},
		Pair{"platform", list.Platform}, Pair{"result", resultText(list.Checks)},
	)
	for from := 0; from < len(list.Checks); {
		to := from + 1
		for to < len(list.Checks) && list.Checks[to].Group == list.Checks[from].Group {
			to++
		}
		t.passTable(list.Checks[from:to])
		from = to
	}
	t.line("")
	t.Paragraph("\"printed\": the figure is one that the source printed, and half a unit of its last digit passes. \"computed\": the figure " +
		"was computed apart from this program. A pass shows that the program computes what it claims on these figures, here; it says nothing about the data a laboratory gives it.")
	return t.Flush()
}

func resultText(checks []validation.Check) string {
	passed, printed := 0, 0
	for _, c := range checks {
		if c.Pass {
			passed++
		}
		if c.Printed {
			printed++
		}
	}
	text := fmt.Sprintf("%d of %d checks passed; %d figures are printed, %d computed", passed, len(checks), printed, len(checks)-printed)
	if !validation.Passed(checks) {
		return "FAILED: " + text
	}
	return "PASSED: " + text
}

// passTable writes the checks of one subject.
func (t *Text) passTable(checks []validation.Check) {
	passed := 0
	for _, c := range checks {
		if c.Pass {
			passed++
		}
	}
	t.Section(fmt.Sprintf("%s: %d of %d passed", checks[0].Group, passed, len(checks)))
	var sources, notes []string
	numbered := func(list *[]string, text string) string {
		if text == "" {
			return ""
		}
		i := slices.Index(*list, text)
		if i < 0 {
			i, *list = len(*list), append(*list, text)
		}
		return fmt.Sprint(i + 1)
	}
	table := NewTable("", "figure", "kind", ">wanted", ">got", ">tolerance", ">source", ">note")
	for _, c := range checks {
		verdict, kind := "FAIL", "computed"
		if c.Pass {
			verdict = "pass"
		}
		if c.Printed {
			kind = "printed"
		}
		table.Row(verdict, ForeignLong(c.Name), kind, Significant(c.Want, 15), Significant(c.Got, 15), Significant(c.Tolerance, 2),
			numbered(&sources, c.Source), numbered(&notes, c.Note))
	}
	t.Table(table)
	for _, each := range []struct {
		name string
		list []string
	}{{"source", sources}, {"note", notes}} {
		if len(each.list) > 0 {
			t.line("")
		}
		for i, text := range each.list {
			first := fmt.Sprintf("%s %d: ", each.name, i+1)
			t.hanging(first, "  ", text)
		}
	}
}
