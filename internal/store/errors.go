package store

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"strings"

	"github.com/jackc/pgx/v5/pgconn"

	"limitary/internal/definition"
)

// PostgreSQL's error codes used here, from the appendix "PostgreSQL Error Codes" of its manual.
const (
	uniqueViolation      = "23505"
	foreignKeyViolation  = "23503"
	checkViolation       = "23514"
	serializationFailure = "40001"
	deadlockDetected     = "40P01"
	queryCanceled        = "57014"
	idleTransactionEnded = "25P03"
	readOnlyTransaction  = "25006"
	objectNotReady       = "55000"
	insufficientRights   = "42501"
	undefinedTable       = "42P01"
)

// byConstraint tells what a broken constraint means to the caller. The code checks all of this before it writes; the
// schema says it again, and two writers at once learn it from the schema.
var byConstraint = map[string]definition.Error{
	"principals_name_fold":            {Reason: definition.AlreadyExists, Field: "principal", Text: "there is a principal of this name already but for upper and lower case"},
	"charts_name_key":                 {Reason: definition.AlreadyExists, Field: "name", Text: "there is a chart of this name already"},
	"tracks_lot_key":                  {Reason: definition.AlreadyExists, Field: "lot", Text: "this lot has a track already"},
	"keys_pkey":                       {Reason: definition.AlreadyExists, Field: "id", Text: "there is a key of this id already"},
	"keys_expiry":                     {Reason: definition.InvalidField, Field: "expire_time", Text: "is not in the future"},
	"key_revocations_pkey":            {Reason: definition.NothingToDo, Field: "id", Text: "the key is revoked already"},
	"version_decisions_pkey":          {Reason: definition.WrongState, Text: "the version has been decided on already"},
	"version_decisions_withdraw":      {Reason: definition.WrongState, Text: "the version is not approved"},
	"version_decisions_second_person": {Reason: definition.SamePrincipal, Text: "the author of a version cannot approve it"},
	"mark_voids_pkey":                 {Reason: definition.WrongState, Text: "the mark is void already"},
	"marks_second_person":             {Reason: definition.SamePrincipal, Text: "whoever asked for a mark cannot confirm it"},
	"mark_voids_second_person":        {Reason: definition.SamePrincipal, Text: "whoever asked for the void of a mark cannot confirm it"},
	"result_revisions_second_person":  {Reason: definition.SamePrincipal, Text: "whoever asked for a change cannot confirm it"},
	"change_decisions_pkey":           {Reason: definition.WrongState, Text: "the change has been decided on already"},
	"change_decisions_second_person":  {Reason: definition.SamePrincipal, Text: "whoever asked for a change cannot decide on it"},
	"versions_author_fkey":            {Reason: definition.Unauthenticated, Text: "the principal is not known; only holders of keys write"},
	"version_decisions_by_fkey":       {Reason: definition.Unauthenticated, Text: "the principal is not known; only holders of keys write"},
	"changes_author_fkey":             {Reason: definition.Unauthenticated, Text: "the principal is not known; only holders of keys write"},
	"change_decisions_by_fkey":        {Reason: definition.Unauthenticated, Text: "the principal is not known; only holders of keys write"},
	"result_revisions_void_confirmed": {Reason: definition.SamePrincipal, Text: "a void needs another principal's confirmation"},
	"signal_notes_length":             {Reason: definition.InvalidField, Field: "text", Text: "want 1 to 4000 bytes"},
	"track_releases_reason":           {Reason: definition.InvalidField, Field: "reason", Text: "want 1 to 4000 bytes"},
	"changes_reason":                  {Reason: definition.InvalidField, Field: "reason", Text: "want 1 to 4000 bytes"},
	"changes_reason_code":             {Reason: definition.InvalidField, Field: "reason_code", Text: "want 1 to 200 bytes"},
}

// safeToRepeat are the unique constraints that only a race with another writer breaks: run again, the transaction sees
// what that writer committed.
var safeToRepeat = map[string]bool{
	"requests_pkey":       true,
	"principals_name_key": true,
	"results_natural_key": true,
	"audit_pkey":          true,
}

// retryable reports whether a transaction failed for a reason that may not come again, and is safe to repeat.
func retryable(err error) bool {
	var pg *pgconn.PgError
	if errors.As(err, &pg) {
		switch pg.Code {
		case serializationFailure, deadlockDetected:
			return true
		case uniqueViolation:
			return safeToRepeat[pg.ConstraintName]
		}
		return false
	}
	var lost *lostError
	return errors.As(err, &lost) || pgconn.SafeToRetry(err) && !contextEnded(err)
}

// lostError is a connection that went away in a transaction that is safe to repeat, whether it was committed or not.
type lostError struct{ err error }

func (e *lostError) Error() string { return e.err.Error() }
func (e *lostError) Unwrap() error { return e.err }

// unavailableError is a database that cannot be reached now. It does not unwrap: a connection attempt that timed out
// must not be taken for the end of the caller's own time.
type unavailableError struct{ err error }

func (e *unavailableError) Error() string { return e.err.Error() }

// Unavailable reports whether an error means that the database cannot be reached or cannot work now, so that the same
// call may succeed later. What was being written is either stored whole or not at all; the same request is safe to send
// again.
func Unavailable(err error) bool {
	var known *unavailableError
	return errors.As(err, &known) || !contextEnded(err) && (connectionLost(err) || overloaded(err))
}

func contextEnded(err error) bool {
	return errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded)
}

// connectionLost reports an error of the connection rather than of a statement.
func connectionLost(err error) bool {
	var pg *pgconn.PgError
	if errors.As(err, &pg) {
		switch {
		case strings.HasPrefix(pg.Code, "08"): // connection exception
			return true
		case strings.HasPrefix(pg.Code, "57P"): // shut down, crashed, starting, dropped
			return true
		case pg.Code == idleTransactionEnded, pg.Code == readOnlyTransaction:
			return true
		}
	}
	var connect *pgconn.ConnectError
	var network net.Error
	return errors.As(err, &connect) || errors.As(err, &network) || pgconn.SafeToRetry(err) ||
		errors.Is(err, pgconn.ErrConnClosed) || errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, net.ErrClosed)
}

// overloaded reports a database that gave up for want of room or because others were in the way.
func overloaded(err error) bool {
	var pg *pgconn.PgError
	if !errors.As(err, &pg) {
		return false
	}
	return strings.HasPrefix(pg.Code, "53") || strings.HasPrefix(pg.Code, "58") || // insufficient resources; system error
		pg.Code == serializationFailure || pg.Code == deadlockDetected || pg.Code == objectNotReady
}

// wrap is deferred by every public method: refusals pass, the end of the caller's own context passes, what PostgreSQL
// refused is told in the contract's words where they have any, and everything else is marked as unavailable or not and
// says which method failed.
func wrap(ctx context.Context, err *error, method string) {
	var refusal *definition.Error
	switch {
	case *err == nil, errors.As(*err, &refusal):
	case ctx.Err() != nil && contextEnded(*err):
	case translated(*err) != nil:
		*err = translated(*err)
	case ctx.Err() == nil && (connectionLost(*err) || overloaded(*err)):
		*err = &unavailableError{fmt.Errorf("store: %s: %w", method, *err)}
	default:
		*err = fmt.Errorf("store: %s: %w", method, *err)
	}
}

// translated gives the refusal that an error of PostgreSQL means, nil where it means none.
func translated(err error) error {
	var pg *pgconn.PgError
	if !errors.As(err, &pg) {
		return nil
	}
	switch pg.Code {
	case uniqueViolation, foreignKeyViolation, checkViolation:
		if refusal, known := byConstraint[pg.ConstraintName]; known {
			return &refusal
		}
	case queryCanceled:
		return definition.Refuse(definition.Deadline, "the database did not finish in %v; the request is safe to repeat", statementTimeout)
	}
	return nil
}

func noLot(chart, lot string) *definition.Error {
	return &definition.Error{Reason: definition.NotFound, Field: "lot", Text: fmt.Sprintf("chart %q has no track for lot %q", chart, lot)}
}

func noVersion(chart string, number int) *definition.Error {
	return &definition.Error{Reason: definition.NotFound, Field: "version", Text: fmt.Sprintf("chart %q has no version %d", chart, number)}
}

func archived(name string) *definition.Error {
	return &definition.Error{Reason: definition.ChartArchived, Field: "chart", Text: fmt.Sprintf("%q is archived; nothing of it changes any more", name)}
}
