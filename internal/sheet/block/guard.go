package block

import (
	"strings"
	"unicode/utf8"
)

// triggers begin texts that spreadsheet programs may take for a formula (common practice), in their full-width forms too.
const triggers = "=+-@\t\r\n＝＋－＠"

// alive reports a text that a spreadsheet program may take for a formula: a trigger, after any apostrophes.
func alive(s string) bool {
	r, _ := utf8.DecodeRuneInString(strings.TrimLeft(s, "'"))
	return r != utf8.RuneError && strings.ContainsRune(triggers, r)
}

// Guard puts an apostrophe before a text that a spreadsheet program may take for a formula. A text that already has
// apostrophes before such a beginning gets one more, so that Unguard always gives back what was guarded.
func Guard(s string) string {
	if alive(s) {
		return "'" + s
	}
	return s
}

// Unguard takes the apostrophe of Guard off.
func Unguard(s string) string {
	if strings.HasPrefix(s, "'") && alive(s) {
		return s[1:]
	}
	return s
}

// GuardUnlessNumber guards a text of which it is not known whether it is a number: numbers, signed ones too, stay as they are.
func GuardUnlessNumber(s string) string {
	if numeric.MatchString(s) {
		return s
	}
	return Guard(s)
}

// IsNumber reports a plain decimal number with a point or none.
func IsNumber(s string) bool { return numeric.MatchString(s) && !strings.Contains(s, ",") }
