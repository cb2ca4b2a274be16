package definition

import "fmt"

// Reason says why something was refused, in the contract's words (the ErrorReason of the same name).
type Reason string

// The reasons. Their meaning is told once, in the contract.
const (
	InvalidField        Reason = "INVALID_FIELD"
	TooManyItems        Reason = "TOO_MANY_ITEMS"
	Unauthenticated     Reason = "UNAUTHENTICATED"
	RoleMissing         Reason = "ROLE_MISSING"
	NotFound            Reason = "NOT_FOUND"
	AlreadyExists       Reason = "ALREADY_EXISTS"
	RevisionMismatch    Reason = "REVISION_MISMATCH"
	RequestIDReused     Reason = "REQUEST_ID_REUSED"
	ChartArchived       Reason = "CHART_ARCHIVED"
	WrongState          Reason = "WRONG_STATE"
	DigestMismatch      Reason = "DIGEST_MISMATCH"
	SamePrincipal       Reason = "SAME_PRINCIPAL"
	Retroactive         Reason = "RETROACTIVE"
	PatternsNotAccepted Reason = "PATTERNS_NOT_ACCEPTED"
	Conflict            Reason = "CONFLICT"
	WrongUnit           Reason = "WRONG_UNIT"
	WrongReadingCount   Reason = "WRONG_READING_COUNT"
	TimeInFuture        Reason = "TIME_IN_FUTURE"
	TimeWithoutOffset   Reason = "TIME_WITHOUT_OFFSET"
	NoVersionInForce    Reason = "NO_VERSION_IN_FORCE"
	LimitsNotComputable Reason = "LIMITS_NOT_COMPUTABLE"
	NothingToDo         Reason = "NOTHING_TO_DO"
	BatchRefused        Reason = "BATCH_REFUSED"
	Unavailable         Reason = "UNAVAILABLE"
	Internal            Reason = "INTERNAL"
	SourceNotOwn        Reason = "SOURCE_NOT_OWN"
	CautionNotAccepted  Reason = "CAUTION_NOT_ACCEPTED"
	Deadline            Reason = "DEADLINE"
)

// Error is a refusal with a reason a program can branch on and a text for people: field, value, limit.
type Error struct {
	Reason Reason
	// Field is the contract's path of the field at fault, such as "results[3].readings[0]"; empty where none is.
	Field string
	Text  string
	// Meta are figures a program may want, such as the number of results a retroactive approval touches.
	Meta map[string]string
}

func (e *Error) Error() string {
	if e.Field == "" {
		return e.Text
	}
	return e.Field + ": " + e.Text
}

// Invalid makes the error of a malformed field.
func Invalid(field, format string, args ...any) *Error {
	return &Error{Reason: InvalidField, Field: field, Text: fmt.Sprintf(format, args...)}
}

// Refuse makes an error of any reason that no field is to blame for.
func Refuse(reason Reason, format string, args ...any) *Error {
	return &Error{Reason: reason, Text: fmt.Sprintf(format, args...)}
}

// At gives the error with its field moved below a parent: "readings[0]" below "results[3]".
func (e *Error) At(parent string) *Error {
	moved := *e
	moved.Field = parent
	if e.Field != "" {
		moved.Field += "." + e.Field
	}
	return &moved
}
