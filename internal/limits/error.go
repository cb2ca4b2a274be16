package limits

import "fmt"

// Error tells which field of a request is wrong, what it held, and what to give instead.
type Error struct {
	// Field is a path such as "groups[3].readings[1]".
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
