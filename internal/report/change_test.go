package report_test

import (
	"bytes"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/report"
)

// written gives what a section writes.
func written(t *testing.T, write func(*report.Text)) string {
	t.Helper()
	var out bytes.Buffer
	text := report.NewText(&out)
	write(text)
	if err := text.Flush(); err != nil {
		t.Fatal(err)
	}
	return out.String()
}

// The whole section, as it is pasted: the decision, why, intervals, and p last with what speaks against it.
func TestChangeTellsTheDecisionFirst(t *testing.T) {
	estimate, lower, upper, p, plain, needed := 0.6, 0.2, 1.0, 0.00004, 0.012, 90
	got := written(t, func(text *report.Text) {
		text.Change(&report.Change{Against: "version 3", Decision: "NOT_ENOUGH_DATA", Text: "Go on with those in force.", Notes: []string{"A note."},
			Figures: []report.ChangeFigure{
				{Name: "centre", Estimate: &estimate, Lower: &lower, Upper: &upper, RelevantLower: -0.5, RelevantUpper: 0.5, Decision: "NOT_ENOUGH_DATA",
					Text: "It is open.", Needed: &needed, P: &p, PlainP: &plain, PReason: "It looked bad."},
				{Name: "spread", RelevantLower: 0.8, RelevantUpper: 1.25, Decision: "NOT_ENOUGH_DATA", Text: "Nothing is known."},
			}})
	})
	want := `
Limits in force, version 3: NOT ENOUGH DATA
-------------------------------------------
Go on with those in force.

figure  decision         estimate  95 % interval  does not matter within  results needed
centre  NOT ENOUGH DATA       0.6  0.2 to 1       -0.5 to 0.5                         90
spread  NOT ENOUGH DATA                           0.8 to 1.25

- It is open.
- Nothing is known.
- A note.

Of no difference at all, and no part of the decision: centre p <0.0001 (plain test p 0.0120), NOT
VALID. It looked bad.
`
	if got != want {
		t.Errorf("got\n%s\nwant\n%s", got, want)
	}
	if nothing := written(t, func(text *report.Text) { text.Change(nil) }); nothing != "" {
		t.Errorf("no change test writes %q", nothing)
	}
}

func TestComponentsSayWhatTheyRestOn(t *testing.T) {
	parts := []limits.Component{
		{Name: "WITHIN", Sigma: 0.2},
		{Name: "BETWEEN", Truncated: true, DegreesOfFreedom: 4, Interval: &limits.Interval{Upper: 0.3}},
	}
	for kind, want := range map[chart.Kind]string{chart.RunMeans: "target", chart.U: "from the centre, by counting"} {
		got := written(t, func(text *report.Text) { text.Components(kind, parts, 2) })
		for _, line := range []string{want, "estimate below zero, taken as 0", "0.00 to 0.30", "is no proof that there is none"} {
			if !strings.Contains(got, line) {
				t.Errorf("%v: %q is not in\n%s", kind, line, got)
			}
		}
	}
}

// How the lines of a point follow is said for every kind whose points differ, and for no other.
func TestPointsSayHowTheirLinesFollow(t *testing.T) {
	spread := &chart.Spread{Bands: []chart.Band{{From: 0, Sigma: 1}}, AbsoluteBelow: 2, AbsoluteSigma: 0.5}
	for _, c := range []struct {
		kind  chart.Kind
		model chart.Model
		want  string
	}{
		{chart.Individuals, chart.Model{}, ""},
		{chart.XbarR, chart.Model{}, "A subgroup of fewer than 4 readings"},
		{chart.RunMeans, chart.Model{BetweenSigma: 0.25}, "root of (0.25 squared + process sigma squared over n)"},
		{chart.P, chart.Model{CountMethod: chart.Normal, Inspected: 50}, "those above hold for 50"},
		{chart.P, chart.Model{CountMethod: chart.Normal, Inspected: 50, Inflation: 1.5}, "root of (centre times (1 - centre) over n), times 1.5"},
		{chart.U, chart.Model{CountMethod: chart.Normal, Inspected: 2, BetweenSigma: 3}, "root of (centre over n + 3 squared)"},
		{chart.C, chart.Model{CountMethod: chart.Normal, Inspected: 1}, "root of the centre"},
		{chart.NP, chart.Model{CountMethod: chart.Exact, Inspected: 50}, "if counts are binomial with the centre"},
		{chart.RelativeRange, chart.Model{Spread: spread}, "Below a mean of 2 the plain range is plotted, with a sigma of 0.5"},
		{chart.DuplicateRange, chart.Model{Spread: &chart.Spread{S0: 0.1, B: 0.02}}, "root of (0.1 squared + (0.02 times the mean of the set) squared)"},
		{chart.Individuals, chart.Model{Transform: chart.Transform{Kind: chart.Log}}, "is judged as such a bound"},
		{chart.XbarS, chart.Model{Levels: []chart.Level{{Material: "low", Reference: 1, Sigma: 2}}}, "at its reference + its sigma times the lines above"},
	} {
		got := strings.Join(strings.Fields(written(t, func(text *report.Text) { text.Points(c.kind, 4, &c.model) })), " ")
		if !strings.Contains(got, c.want) || c.want == "" && got != "" {
			t.Errorf("%v, %+v: %q is not in %q", c.kind, c.model, c.want, got)
		}
	}
}
