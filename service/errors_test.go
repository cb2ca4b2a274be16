package service_test

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/service"
)

// The codes are the contract: each reason with its gRPC code, written down here once more by hand.
var wantCodes = map[definition.Reason]codes.Code{
	"INVALID_FIELD": codes.InvalidArgument, "TOO_MANY_ITEMS": codes.InvalidArgument, "UNAUTHENTICATED": codes.Unauthenticated,
	"ROLE_MISSING": codes.PermissionDenied, "NOT_FOUND": codes.NotFound, "ALREADY_EXISTS": codes.AlreadyExists,
	"REVISION_MISMATCH": codes.Aborted, "REQUEST_ID_REUSED": codes.AlreadyExists, "CHART_ARCHIVED": codes.FailedPrecondition,
	"WRONG_STATE": codes.FailedPrecondition, "DIGEST_MISMATCH": codes.FailedPrecondition, "SAME_PRINCIPAL": codes.PermissionDenied,
	"RETROACTIVE": codes.FailedPrecondition, "PATTERNS_NOT_ACCEPTED": codes.FailedPrecondition, "CONFLICT": codes.AlreadyExists,
	"WRONG_UNIT": codes.InvalidArgument, "WRONG_READING_COUNT": codes.InvalidArgument, "TIME_IN_FUTURE": codes.InvalidArgument,
	"TIME_WITHOUT_OFFSET": codes.InvalidArgument, "NO_VERSION_IN_FORCE": codes.FailedPrecondition,
	"LIMITS_NOT_COMPUTABLE": codes.InvalidArgument, "NOTHING_TO_DO": codes.FailedPrecondition, "BATCH_REFUSED": codes.Aborted,
	"UNAVAILABLE": codes.Unavailable, "INTERNAL": codes.Internal, "SOURCE_NOT_OWN": codes.PermissionDenied,
	"CAUTION_NOT_ACCEPTED": codes.FailedPrecondition, "DEADLINE": codes.DeadlineExceeded,
}

func TestEveryReasonOfTheContractHasACode(t *testing.T) {
	for name := range pb.ErrorReason_value {
		reason := definition.Reason(strings.TrimPrefix(name, "ERROR_REASON_"))
		if reason == "UNSPECIFIED" || reason == "TOO_LARGE" { // the transport's own
			continue
		}
		want, known := wantCodes[reason]
		if !known {
			t.Errorf("the contract has the reason %s, the table has not", reason)
			continue
		}
		s, private := service.ToStatus(fmt.Errorf("somewhere: %w", &definition.Error{Reason: reason, Field: "a.b", Text: "no"}), "id-1")
		if s.Code() != want || private != nil {
			t.Errorf("%s: got code %s (private %v), want %s", reason, s.Code(), private, want)
		}
		if got := service.ReasonOf(s); got != name {
			t.Errorf("%s: got reason %q in the answer, want %q", reason, got, name)
		}
	}
	if len(wantCodes) != len(pb.ErrorReason_value)-2 {
		t.Errorf("the table has %d reasons, the contract %d", len(wantCodes), len(pb.ErrorReason_value)-2)
	}
}

func TestARefusalNamesFieldTextAndFigures(t *testing.T) {
	s, _ := service.ToStatus(&definition.Error{Reason: definition.Retroactive, Field: "effective_from", Text: "touches 7 results", Meta: map[string]string{"results": "7"}}, "id-2")
	if got, want := s.Message(), "effective_from: touches 7 results"; got != want {
		t.Errorf("got message %q, want %q", got, want)
	}
	var seen int
	for _, d := range s.Details() {
		switch d := d.(type) {
		case *errdetails.ErrorInfo:
			seen++
			if d.Domain != "limitary" || d.Metadata["results"] != "7" {
				t.Errorf("got info %v", d)
			}
		case *errdetails.BadRequest:
			seen++
			if v := d.FieldViolations; len(v) != 1 || v[0].Field != "effective_from" || v[0].Description != "touches 7 results" {
				t.Errorf("got violations %v", d)
			}
		case *errdetails.RequestInfo:
			seen++
			if d.RequestId != "id-2" {
				t.Errorf("got request id %q", d.RequestId)
			}
		}
	}
	if seen != 3 {
		t.Errorf("got %d of the 3 details", seen)
	}
}

func TestWhatIsNoRefusal(t *testing.T) {
	secret := errors.New("relation keys does not exist at 10.0.0.7")
	for _, c := range []struct {
		name    string
		err     error
		code    codes.Code
		reason  string
		private bool
	}{
		{"unknown errors are faults told in general words", secret, codes.Internal, "ERROR_REASON_INTERNAL", true},
		{"a reason outside the contract is a fault", &definition.Error{Reason: "ODD", Text: secret.Error()}, codes.Internal, "ERROR_REASON_INTERNAL", true},
		{"the deadline", fmt.Errorf("reading: %w", context.DeadlineExceeded), codes.DeadlineExceeded, "ERROR_REASON_DEADLINE", true},
		{"a caller who left", fmt.Errorf("reading: %w", context.Canceled), codes.Canceled, "ERROR_REASON_DEADLINE", true},
		{"statuses of the transport pass", status.Error(codes.Unimplemented, "no"), codes.Unimplemented, "", false},
		{"no error", nil, codes.OK, "", false},
	} {
		t.Run(c.name, func(t *testing.T) {
			s, private := service.ToStatus(c.err, "id-3")
			if s.Code() != c.code || service.ReasonOf(s) != c.reason || (private != nil) != c.private {
				t.Errorf("got %s %q private %v, want %s %q private %t", s.Code(), service.ReasonOf(s), private, c.code, c.reason, c.private)
			}
			if strings.Contains(s.String(), "10.0.0.7") {
				t.Errorf("the cause is told: %s", s)
			}
		})
	}
}
