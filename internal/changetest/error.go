package changetest

import (
	"errors"
	"fmt"

	"limitary/internal/limits"
)

// Error tells which field of a request is wrong, what it held, and what to give instead.
type Error struct {
	// Field is a path such as "groups[3].readings[1]" or "inForce.sigma".
	Field string
	// Value is the refused value as text.
	Value string
	// Problem says what is wrong and what would be right.
	Problem string
}

func (e *Error) Error() string {
	if e.Value == "" {
		return fmt.Sprintf("%s: %s", e.Field, e.Problem)
	}
	return fmt.Sprintf("%s: %s: %s", e.Field, e.Value, e.Problem)
}

func refuse(field string, value any, format string, args ...any) error {
	return &Error{field, fmt.Sprint(value), fmt.Sprintf(format, args...)}
}

// ours turns a refusal of the groups by package limits into one of this package; its fields are named alike.
func ours(err error) error {
	var refused *limits.Error
	if errors.As(err, &refused) {
		return &Error{refused.Field, refused.Value, refused.Problem}
	}
	return err
}
