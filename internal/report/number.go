package report

import (
	"fmt"
	"strconv"

	"limitary/internal/decimal"
)

// Fixed writes x with exactly the published decimals, or in its shortest form where nothing is rounded.
func Fixed(x float64, places int) string {
	if places == decimal.Unrounded {
		return Shortest(x)
	}
	return strconv.FormatFloat(decimal.Round(x, places), 'f', places, 64)
}

// FixedOr writes *x as Fixed does, or what stands for its absence.
func FixedOr(x *float64, places int, absent string) string {
	if x == nil {
		return absent
	}
	return Fixed(*x, places)
}

// Shortest writes the shortest decimal that reads back as x.
func Shortest(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

// Significant writes x with at most so many significant digits.
func Significant(x float64, digits int) string { return strconv.FormatFloat(x, 'g', digits, 64) }

// Count writes a number with its noun: "1 result", "3 results".
func Count(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}
