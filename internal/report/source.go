package report

import (
	"fmt"
	"strings"
	"time"

	"limitary/internal/chart"
	"limitary/internal/resultfile"
	"limitary/internal/rules"
)

// About is what every report says first.
type About struct {
	// Title of the user, and unit of the results; both may be empty.
	Title, Unit string
	// File is how the file is called; Table is what was read from it.
	File  string
	Table *resultfile.Table
	// At is the time of the computation, Program the number of the program.
	At      time.Time
	Program string
	Sets    []rules.Set
	// Notes are what to know about the data and the choice of rules.
	Notes []string
}

// kindNames say what a chart plots.
var kindNames = map[chart.Kind]string{
	chart.Given:          "statistics plotted as given",
	chart.Individuals:    "individuals chart (single values and moving ranges)",
	chart.XbarR:          "chart of subgroup means and ranges",
	chart.XbarS:          "chart of subgroup means and standard deviations",
	chart.RunMeans:       "chart of run means and standard deviations within runs",
	chart.P:              "p chart (fraction of nonconforming items)",
	chart.NP:             "np chart (number of nonconforming items)",
	chart.C:              "c chart (nonconformities in one inspection unit)",
	chart.U:              "u chart (nonconformities per inspection unit)",
	chart.DuplicateRange: "chart of the range of replicate readings",
	chart.RelativeRange:  "chart of the range of replicate readings in percent of their mean",
}

// nouns are what a chart calls one result.
var nouns = map[chart.Kind]string{
	chart.Given: "result", chart.Individuals: "result", chart.XbarR: "subgroup", chart.XbarS: "subgroup", chart.RunMeans: "run",
	chart.P: "sample", chart.NP: "sample", chart.C: "sample", chart.U: "sample",
	chart.DuplicateRange: "set of replicates", chart.RelativeRange: "set of replicates",
}

// countOf writes a number of results of a kind.
func countOf(kind chart.Kind, n int) string {
	noun := nouns[kind]
	if kind.Duplicates() && n != 1 {
		return fmt.Sprintf("%d sets of replicates", n)
	}
	return Count(n, noun)
}

// done says when and by what a report was made.
func (a *About) done() string {
	return fmt.Sprintf("%s by limitary %s, judge number %d", a.At.UTC().Format(time.RFC3339), a.Program, rules.JudgeNumber)
}

// filePairs say what was read.
func (a *About) filePairs() []Pair {
	t := a.Table
	columns := make([]string, len(t.Values))
	for i, v := range t.Values {
		columns[i] = fmt.Sprintf("%q", Foreign(v))
	}
	noun := "column "
	if len(columns) > 1 {
		noun = "columns "
	}
	read := fmt.Sprintf("%s from %s%s, lines %d to %d", Count(t.Len(), "result"), noun, strings.Join(columns, ", "), t.Line(0), t.Lines)
	names := map[byte]string{',': "comma", ';': "semicolon", '\t': "tab", '.': "point"}
	dialect := "one column"
	if t.Delimiter != 0 {
		dialect = "columns separated by " + names[t.Delimiter]
	}
	if t.Decimal != 0 {
		dialect += ", decimal " + names[t.Decimal]
	}
	if t.Skipped > 0 {
		dialect += fmt.Sprintf(", %s skipped", Count(t.Skipped, "blank line"))
	}
	return []Pair{{"file", Foreign(a.File)}, {"results", read}, {"read as", dialect}, {"unit", Foreign(a.Unit)}}
}

// AllNotes are what to know about the file and the choice of rules.
func (a *About) AllNotes() []string {
	var notes []string
	if n := a.Table.Empty; n > 0 {
		notes = append(notes, fmt.Sprintf("%s without a reading: no result, not judged.", Count(n, "row")))
	}
	if line := a.Table.TimeBack; line > 0 {
		notes = append(notes, fmt.Sprintf("Line %d has an earlier time than the row above it. The order of the file was kept.", line))
	}
	return append(notes, a.Notes...)
}

// noteItems writes the notes.
func (t *Text) noteItems(a *About) {
	notes := a.AllNotes()
	if len(notes) == 0 {
		return
	}
	t.Section("Notes")
	for _, n := range notes {
		t.Item(n)
	}
}

// closing ends a report.
func (t *Text) closing() {
	t.line("")
	t.Paragraph(Safety)
}

// setPairs tell where the rules come from.
func setPairs(sets []rules.Set) []Pair {
	var pairs []Pair
	for _, s := range sets {
		text := s.Title + "; " + s.Source
		if s.Provenance != s.Source {
			text += "; " + s.Provenance
		}
		pairs = append(pairs, Pair{s.ID, text})
	}
	return pairs
}
