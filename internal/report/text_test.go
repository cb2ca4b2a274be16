package report_test

import (
	"bytes"
	"errors"
	"strings"
	"testing"
	"unicode/utf8"

	"limitary/internal/decimal"
	"limitary/internal/report"
)

func TestTableAligns(t *testing.T) {
	var out bytes.Buffer
	text := report.NewText(&out)
	table := report.NewTable(">line", "id", "empty", ">value", "unit")
	table.Row("9", "Ä1", "", "10.5", "µg/L")
	table.Row("10", "B", "", "9.25", "µg/L")
	text.Table(table)
	if err := text.Flush(); err != nil {
		t.Fatal(err)
	}
	want := "line  id  value  unit\n   9  Ä1   10.5  µg/L\n  10  B    9.25  µg/L\n"
	if got := out.String(); got != want {
		t.Errorf("got\n%s\nwant\n%s", got, want)
	}
}

func TestParagraphsAreWrapped(t *testing.T) {
	var out bytes.Buffer
	text := report.NewText(&out)
	long := strings.Repeat("seven77 ", 40) + strings.Repeat("x", 150)
	text.Item(long)
	text.Pairs(report.Pair{Label: "label", Value: long}, report.Pair{Label: "left out"})
	if err := text.Flush(); err != nil {
		t.Fatal(err)
	}
	for line := range strings.Lines(out.String()) {
		if n := utf8.RuneCountInString(strings.TrimRight(line, "\n")); n > 100 && !strings.Contains(line, "xxx") {
			t.Errorf("a line of %d characters: %q", n, line)
		}
	}
	if got := strings.Count(out.String(), "seven77"); got != 80 {
		t.Errorf("got %d words, want 80: wrapping lost some", got)
	}
	if strings.Contains(out.String(), "left out") {
		t.Error("a pair without a value is written")
	}
}

type broken struct{}

func (broken) Write([]byte) (int, error) { return 0, errors.New("disk full") }

func TestWriteErrorIsGiven(t *testing.T) {
	text := report.NewText(broken{})
	text.Title("x")
	if err := text.Flush(); err == nil || err.Error() != "disk full" {
		t.Errorf("got %v, want disk full", err)
	}
}

func TestForeign(t *testing.T) {
	for _, c := range []struct{ in, want string }{
		{"plain µ", "plain µ"},
		{"a\x1b[31mb\x00\x7f", "a\uFFFD[31mb\uFFFD\uFFFD"},
		{"tab\tand\nline", "tab and line"},
		{"\u202eright to left", "\uFFFDright to left"},
		{strings.Repeat("é", 41), strings.Repeat("é", 40) + "..."},
	} {
		if got := report.Foreign(c.in); got != c.want {
			t.Errorf("%q: got %q, want %q", c.in, got, c.want)
		}
	}
}

func TestFixed(t *testing.T) {
	for _, c := range []struct {
		x      float64
		places int
		want   string
	}{
		{2.675, 2, "2.68"}, // half-way by its decimal, below by its binary form
		{-0.001, 2, "0.00"},
		{299852.4, 2, "299852.40"},
		{1e21, 0, "1000000000000000000000"},
		{0.1, decimal.Unrounded, "0.1"},
	} {
		if got := report.Fixed(c.x, c.places); got != c.want {
			t.Errorf("%v to %d: got %q, want %q", c.x, c.places, got, c.want)
		}
	}
}

func TestCount(t *testing.T) {
	for n, want := range map[int]string{0: "0 results", 1: "1 result", 2: "2 results"} {
		if got := report.Count(n, "result"); got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
}
