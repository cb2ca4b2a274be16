package resultfile

import (
	"fmt"
	"strings"
	"unicode/utf8"
)

// Error tells what is wrong with a file, where, and what to do about it.
type Error struct {
	// Line counts from 1; 0 where no single line is at fault.
	Line int
	// Column is the name of the column, or "column 3" where it has none; empty where no single column is at fault.
	Column string
	// Value is the text found, shortened; empty where there is none to show.
	Value string
	// Problem and Advice are sentences without capital and stop. Advice may be empty.
	Problem, Advice string
}

func (e *Error) Error() string {
	var b strings.Builder
	sep := ""
	put := func(format string, args ...any) {
		b.WriteString(sep)
		fmt.Fprintf(&b, format, args...)
		sep = ", "
	}
	if e.Line > 0 {
		put("line %d", e.Line)
	}
	if e.Column != "" {
		put("column %q", e.Column)
	}
	if e.Value != "" {
		put("value %q", e.Value)
	}
	if b.Len() > 0 {
		b.WriteString(": ")
	}
	b.WriteString(e.Problem)
	if e.Advice != "" {
		b.WriteString("; ")
		b.WriteString(e.Advice)
	}
	return b.String()
}

// shownBytesMax bounds the text of a file repeated in a message.
const shownBytesMax = 60

// clip shortens text for a message, at a character.
func clip(text []byte) string {
	s := strings.ToValidUTF8(string(text[:min(len(text), 4*shownBytesMax)]), "\uFFFD")
	if len(s) <= shownBytesMax {
		return s
	}
	cut := shownBytesMax
	for cut > 0 && !utf8.RuneStart(s[cut]) {
		cut--
	}
	return s[:cut] + "..."
}

// namesShownMax bounds the column names listed in a message.
const namesShownMax = 20

// listed quotes names for a message.
func listed(names []string) string {
	var b strings.Builder
	for i, n := range names {
		if i == namesShownMax {
			fmt.Fprintf(&b, " and %d more", len(names)-i)
			break
		}
		if i > 0 {
			b.WriteString(", ")
		}
		fmt.Fprintf(&b, "%q", clip([]byte(n)))
	}
	return b.String()
}
