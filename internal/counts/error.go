package counts

import (
	"fmt"
	"math"
	"strconv"
)

// Error tells which input is wrong, what it held, and what to give instead.
type Error struct {
	// Field is a path such as "samples[3].count".
	Field string
	// Value is the refused value as text.
	Value string
	// Problem says what is wrong and what would be right.
	Problem string
}

func (e *Error) Error() string {
	return fmt.Sprintf("%s: %s: %s", e.Field, e.Value, e.Problem)
}

func refuse(field string, value float64, format string, args ...any) *Error {
	return &Error{field, strconv.FormatFloat(value, 'g', -1, 64), fmt.Sprintf(format, args...)}
}

// checkRange refuses what does not lie from least to most, NaN among it.
func checkRange(field string, value, least, most float64) error {
	if !(value >= least && value <= most) {
		return refuse(field, value, "must be a number from %g to %g", least, most)
	}
	return nil
}

// checkWhole refuses what is no whole number from least to most.
func checkWhole(field string, value, least, most float64) error {
	if !(value >= least && value <= most) || value != math.Trunc(value) {
		return refuse(field, value, "must be a whole number from %g to %g", least, most)
	}
	return nil
}
