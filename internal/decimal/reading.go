package decimal

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Bound says whether a reading is a measured value or only a bound on one.
type Bound uint8

const (
	// Measured is an ordinary value.
	Measured Bound = iota
	// Below is a less-than result, "<0.05": the value lies below the figure.
	Below
	// Above is a greater-than result, ">2400": the value lies above the figure.
	Above
)

// Reading is one value read from text.
type Reading struct {
	// Value is the float64 nearest to the text, finite, in the unit of the chart.
	Value float64
	Bound Bound
	// Places is the number of decimals as written: 2 for "0.30".
	Places int
}

const (
	// textBytesMax bounds a reading's text: sign, bound, 17 digits, zeros and exponent fit with room.
	textBytesMax = 48
	// digitsMax bounds the significant digits: with 17 every float64 can be written, with more none is told apart.
	digitsMax = 17
)

// TextError tells what is wrong with the text of a reading and what to write instead.
type TextError struct{ Text, Problem string }

func (e *TextError) Error() string { return fmt.Sprintf("reading %q: %s", e.Text, e.Problem) }

// ParseReading reads a reading: an optional "<" or ">", an optional sign, digits with at most one decimal point, and
// optionally a power of ten ("1.2e-3"). Spaces around it are allowed; thousands separators, units and words are not.
func ParseReading(text string) (Reading, error) {
	var r Reading
	fail := func(format string, args ...any) (Reading, error) {
		return Reading{}, &TextError{clip(text), fmt.Sprintf(format, args...)}
	}
	if len(text) > textBytesMax {
		return fail("%d bytes long, the limit is %d", len(text), textBytesMax)
	}
	s := strings.TrimSpace(text)
	if s == "" {
		return fail("is empty")
	}
	switch s[0] {
	case '<':
		r.Bound, s = Below, strings.TrimSpace(s[1:])
	case '>':
		r.Bound, s = Above, strings.TrimSpace(s[1:])
	}
	digits, places, problem := scan(s)
	if problem != "" {
		return fail("%s", problem)
	}
	if digits > digitsMax {
		return fail("%d significant digits, the limit is %d", digits, digitsMax)
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil || math.IsInf(v, 0) {
		return fail("is larger than %.3g, the largest value that can be held", math.MaxFloat64)
	}
	if v == 0 && digits > 0 {
		return fail("is nearer to zero than %.3g, the smallest value that can be held", math.SmallestNonzeroFloat64)
	}
	r.Value, r.Places = v+0, places // adding zero makes the zero of "-0.0" one without sign
	return r, nil
}

func clip(s string) string {
	if len(s) > textBytesMax {
		return s[:textBytesMax] + "..."
	}
	return s
}

// scan checks the form of an unbounded number and counts its significant digits and decimals.
func scan(s string) (digits, places int, problem string) {
	mantissa, exponent, hasExponent := strings.Cut(strings.ToLower(s), "e")
	if mantissa != "" && (mantissa[0] == '+' || mantissa[0] == '-') {
		mantissa = mantissa[1:]
	}
	point, any := false, false
	for _, c := range mantissa {
		switch {
		case c >= '0' && c <= '9':
			any = true
			if digits > 0 || c != '0' {
				digits++
			}
			if point {
				places++
			}
		case c == '.' && !point:
			point = true
		case c == ',':
			return 0, 0, "has a comma; write a point for the decimal and no thousands separator"
		default:
			return 0, 0, "is not a number; write digits with a point for the decimal, and < or > before a bound"
		}
	}
	if !any {
		return 0, 0, "has no digits"
	}
	if hasExponent {
		e, err := strconv.Atoi(exponent)
		if err != nil || e < -400 || e > 400 {
			return 0, 0, "has a power of ten that is not a whole number from -400 to 400"
		}
		places = max(places-e, 0)
	}
	return digits, places, ""
}
