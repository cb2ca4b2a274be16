package book

import (
	"fmt"
	"regexp"
	"strings"

	"github.com/xuri/excelize/v2"
)

// format is what a cell's number format tells.
type format struct {
	// date is a date or a time of day; plain shows a number as the number it is, rounding aside; whole is General or 0.
	date, plain, whole bool
	// places is how many decimals are shown, -1 where the format does not say.
	places int
	code   string
}

// builtIn has the codes of the built-in formats for numbers (ECMA-376 part 1, 18.8.30; from memory).
var builtIn = map[int]string{0: "General", 1: "0", 2: "0.00", 3: "#,##0", 4: "#,##0.00", 9: "0%", 10: "0.00%", 11: "0.00E+00", 12: "# ?/?", 13: "# ??/??",
	37: "#,##0 ;(#,##0)", 38: "#,##0 ;[Red](#,##0)", 39: "#,##0.00;(#,##0.00)", 40: "#,##0.00;[Red](#,##0.00)", 46: "[h]:mm:ss", 48: "##0.0E+0", 49: "@"}

// formatOf reads a number format. The numbers of built-in formats for dates and times are 14 to 22, 27 to 36, 45, 47 and 50
// to 58 (ECMA-376 part 1, 18.8.30; from memory); 46 is an elapsed time.
func formatOf(style *excelize.Style) format {
	n := style.NumFmt
	if style.CustomNumFmt != nil {
		return formatOfCode(*style.CustomNumFmt)
	}
	if n >= 14 && n <= 22 || n >= 27 && n <= 36 || n == 45 || n == 47 || n >= 50 && n <= 58 {
		return format{date: true, places: -1, code: fmt.Sprint("built-in ", n)}
	}
	if code, ok := builtIn[n]; ok {
		return formatOfCode(code)
	}
	return format{places: -1, code: fmt.Sprint("built-in ", n)}
}

var (
	// powerOfTen is what E means in a number, as against the year of an era.
	powerOfTen = regexp.MustCompile(`[Ee][+-]`)
	dayHalf    = regexp.MustCompile(`(?i)am/pm|a/p`)
	// numberForm is one section: a sign, digits with thousands separators between them, decimals, a power of ten.
	numberForm = regexp.MustCompile(`^(\(?[-+]?)((?:[#0](?:,?[#0])*)?)(?:\.([#0]*))?(?:[Ee][+-][#0]+)?(\)?)$`)
)

func formatOfCode(code string) format {
	f := format{places: -1, code: code}
	if strings.EqualFold(code, "General") {
		f.plain, f.whole = true, true
		return f
	}
	sections := bare(code)
	if len(sections) > 3 {
		sections = sections[:3] // the fourth is for texts
	}
	all := ""
	for _, s := range sections {
		all += dayHalf.ReplaceAllString(powerOfTen.ReplaceAllString(s.text, ""), "") + ";"
		if s.elapsed {
			return f
		}
	}
	f.date = strings.ContainsAny(strings.ToLower(all), "ymdhs") && !strings.Contains(strings.ToLower(all), "general")
	f.whole = code == "0"
	f.plain, f.places = plain(sections)
	return f
}

// plain tells whether the sections, for positive, negative and zero values in this order, all show the value itself, and with
// how many decimals.
func plain(sections []section) (ok bool, places int) {
	for i, s := range sections {
		m := numberForm.FindStringSubmatch(s.text)
		if m == nil || !strings.ContainsAny(m[0], "#0") || strings.HasPrefix(m[1], "(") != (m[4] == ")") {
			return false, -1
		}
		negative := strings.ContainsAny(m[1], "(-")
		if (i == 1) != (negative || i == 1 && s.coloured) || i == 1 && strings.Contains(m[1], "+") {
			return false, -1 // it would show a sign that the value does not have
		}
		here := len(m[3])
		if strings.ContainsAny(m[0], "Ee") || strings.Contains(m[3], "#") {
			here = -1
		}
		if i == 0 {
			places = here
		} else if places != here {
			places = -1
		}
	}
	return true, places
}

// section is a section of a format without what only decorates it.
type section struct {
	text              string
	coloured, elapsed bool
}

var (
	colourForm  = regexp.MustCompile(`(?i)^\[(?:black|blue|cyan|green|magenta|red|white|yellow|color ?[0-9]{1,2})\]$`)
	localeForm  = regexp.MustCompile(`^\[\$-[0-9A-Fa-f]+\]$`)
	elapsedForm = regexp.MustCompile(`(?i)^\[(?:h+|m+|s+)\]$`)
	token       = regexp.MustCompile(`(?s)^(?:"[^"]*"?|\\.|_.|\*.|\[[^\]]*\]?|.)`)
)

// literal stands for text that a format adds.
const literal = "\x00"

// bare cuts a format into sections and takes colours, locales, paddings, fills and spaces off.
func bare(code string) []section {
	out := []section{{}}
	for code != "" {
		t := token.FindString(code)
		if t == "" {
			t = code[:1]
		}
		code = code[len(t):]
		s := &out[len(out)-1]
		switch {
		case t == ";":
			out = append(out, section{})
		case t[0] == '_' || t[0] == '*', localeForm.MatchString(t):
		case colourForm.MatchString(t):
			s.coloured = true
		case elapsedForm.MatchString(t):
			s.elapsed = true
		case t[0] == '"':
			s.text += literalOf(strings.Trim(t, `"`))
		case t[0] == '\\':
			s.text += literalOf(t[1:])
		case t[0] == '[':
			s.text += literal
		default:
			s.text += strings.Trim(t, spaces)
		}
	}
	return out
}

const spaces = " \u00a0\u202f"

// literalOf gives signs and brackets as they are, nothing for spaces, and literal for all else.
func literalOf(s string) string {
	switch s = strings.Trim(s, spaces); s {
	case "", "-", "+", "(", ")":
		return s
	}
	return literal
}
