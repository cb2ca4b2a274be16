package changetest

import (
	"fmt"

	"limitary/internal/limits"
)

// Error tells which field of a request is wrong, what it held, and what to give instead. Fields are named as in Request;
// what package limits refuses of the groups keeps its fields, which are named alike.
type Error = limits.Error

func refuse(field string, value any, format string, args ...any) error {
	return &Error{Field: field, Value: fmt.Sprint(value), Problem: fmt.Sprintf(format, args...)}
}
