package resultfile

import (
	"bytes"
	"errors"
	"fmt"
	"strings"

	"limitary/internal/decimal"
)

// digitsQuickMax and placesQuickMax bound the quick way of reading a number: the digits and the power of ten are then
// both exact in float64, so that their quotient is the float64 nearest to the text.
const (
	digitsQuickMax = 15
	placesQuickMax = 22
)

var tens = [placesQuickMax + 1]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15,
	1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}

// point is what a number's text says of the decimal: the mark it holds, and whether the mark can only be a decimal.
type point struct {
	mark byte // '.', ',' or 0
	sure bool
}

// quick reads plain digits with at most one mark. It declines whatever else the text holds.
func quick(text []byte) (r decimal.Reading, p point, ok bool) {
	i, negative := 0, false
	if len(text) > 0 && (text[0] == '-' || text[0] == '+') {
		negative = text[0] == '-'
		i = 1
	}
	first := i
	whole, markAt, digits := uint64(0), -1, 0
	for ; i < len(text); i++ {
		c := text[i]
		switch {
		case c >= '0' && c <= '9':
			whole = whole*10 + uint64(c-'0')
			if whole > 0 {
				digits++
				if digits > digitsQuickMax {
					return r, p, false
				}
			}
		case (c == '.' || c == ',') && markAt < 0:
			markAt = i
			p.mark = c
		default:
			return r, p, false
		}
	}
	places := 0
	if markAt >= 0 {
		places = len(text) - markAt - 1
		before := markAt - first
		p.sure = places != 3 || before < 1 || before > 3 || text[first] == '0'
	}
	if places > placesQuickMax || len(text)-first == min(markAt+1, 1) || len(text) > 40 {
		return r, p, false
	}
	r.Value, r.Places = float64(whole)/tens[places], places
	if negative && whole > 0 {
		r.Value = -r.Value
	}
	return r, p, true
}

// slow reads every form of a reading, by way of decimal.ParseReading.
func slow(text []byte) (decimal.Reading, point, error) {
	p, problem := inspect(text)
	if problem != "" {
		return decimal.Reading{}, p, errors.New(problem)
	}
	if p.mark == ',' {
		text = bytes.Replace(text, []byte{','}, []byte{'.'}, 1)
	}
	r, err := decimal.ParseReading(string(text))
	var bad *decimal.TextError
	if errors.As(err, &bad) {
		err = errors.New(bad.Problem)
	}
	return r, p, err
}

// inspect finds the decimal mark of a number's text.
func inspect(text []byte) (p point, problem string) {
	points, commas := bytes.Count(text, []byte{'.'}), bytes.Count(text, []byte{','})
	switch {
	case points+commas == 0:
		return p, ""
	case points+commas > 1 && numeric(string(text)):
		return p, "has a thousands separator"
	case points > 1 || commas > 1 || points > 0 && commas > 0:
		return p, "is not a number"
	case points == 1:
		p.mark = '.'
	default:
		p.mark = ','
	}
	number := strings.TrimLeft(string(bytes.TrimSpace(text)), "<>+- ")
	before, after, _ := strings.Cut(number, string(p.mark))
	p.sure = len(after) != 3 || len(before) < 1 || len(before) > 3 || before[0] == '0' || strings.ContainsAny(after, "eE")
	return p, ""
}

// numeric reports whether a text is meant as a number, with whatever decimal and thousands separators.
func numeric(text string) bool {
	if len(text) > 60 {
		return false
	}
	points, commas := strings.Count(text, "."), strings.Count(text, ",")
	switch {
	case points > 1 && commas > 1:
		return false
	case points > 1 && commas == 0: // a date, 12.01.2026, as likely as a number
		return false
	case points > 1:
		text = strings.ReplaceAll(text, ".", "")
	case commas > 1 || points == 1 && commas == 1:
		text = strings.ReplaceAll(text, ",", "")
	}
	_, err := decimal.ParseReading(strings.Replace(text, ",", ".", 1))
	return err == nil
}

// evidence collects what the values say of the decimal of the file.
type evidence struct {
	decimal   byte // asked for or settled; 0 while open
	asked     bool
	sure      bool
	delimiter byte
	// line, column and value of the first text with a mark, to speak of.
	line   int
	column string
	value  string
}

// note takes in one value that holds a mark.
func (e *evidence) note(p point, line int, column string, text []byte) *Error {
	if e.decimal == 0 {
		e.decimal, e.line, e.column, e.value = p.mark, line, column, clip(text)
	}
	if p.mark == e.decimal {
		e.sure = e.sure || p.sure
		return nil
	}
	bad := &Error{Line: line, Column: column, Value: clip(text)}
	if e.asked {
		bad.Problem = fmt.Sprintf("has a %s, and the decimal is said to be a %s", markName(p.mark), markName(e.decimal))
		bad.Advice = fmt.Sprintf("write it with a %s and without thousands separators, or say --decimal %s", markName(e.decimal), markName(p.mark))
		return bad
	}
	bad.Problem = fmt.Sprintf("has a %s, but line %d has %q with a %s", markName(p.mark), e.line, e.value, markName(e.decimal))
	bad.Advice = "write all values with the same decimal and without thousands separators"
	return bad
}

// settle refuses a file whose only marks may be decimals or thousands separators.
func (e *evidence) settle() *Error {
	if e.decimal == 0 || e.sure || e.asked || e.decimal == '.' && e.delimiter != ';' {
		return nil
	}
	small, large := strings.Replace(e.value, ",", ".", 1), strings.Replace(e.value, string(e.decimal), "", 1)
	return &Error{Line: e.line, Column: e.column, Value: e.value,
		Problem: fmt.Sprintf("can be %s or %s, and no other value tells which", small, large),
		Advice: fmt.Sprintf("say --decimal %s if it is %s; if it is %s, write the values without thousands separators",
			markName(e.decimal), small, large)}
}

func markName(mark byte) string {
	if mark == ',' {
		return "comma"
	}
	return "point"
}
