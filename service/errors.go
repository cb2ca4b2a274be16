package service

import (
	"context"
	"errors"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/protoadapt"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// Domain is the domain of every ErrorInfo.
const Domain = "limitary"

// codeOf gives each reason its code. The codes are chosen for their HTTP face too: FAILED_PRECONDITION is 400, ABORTED
// and ALREADY_EXISTS are 409.
var codeOf = map[definition.Reason]codes.Code{
	definition.InvalidField:        codes.InvalidArgument,
	definition.TooManyItems:        codes.InvalidArgument,
	definition.Unauthenticated:     codes.Unauthenticated,
	definition.RoleMissing:         codes.PermissionDenied,
	definition.NotFound:            codes.NotFound,
	definition.AlreadyExists:       codes.AlreadyExists,
	definition.RevisionMismatch:    codes.Aborted,
	definition.RequestIDReused:     codes.AlreadyExists,
	definition.ChartArchived:       codes.FailedPrecondition,
	definition.WrongState:          codes.FailedPrecondition,
	definition.DigestMismatch:      codes.FailedPrecondition,
	definition.SamePrincipal:       codes.PermissionDenied,
	definition.Retroactive:         codes.FailedPrecondition,
	definition.PatternsNotAccepted: codes.FailedPrecondition,
	definition.Conflict:            codes.AlreadyExists,
	definition.WrongUnit:           codes.InvalidArgument,
	definition.WrongReadingCount:   codes.InvalidArgument,
	definition.TimeInFuture:        codes.InvalidArgument,
	definition.TimeWithoutOffset:   codes.InvalidArgument,
	definition.NoVersionInForce:    codes.FailedPrecondition,
	definition.LimitsNotComputable: codes.InvalidArgument,
	definition.NothingToDo:         codes.FailedPrecondition,
	definition.BatchRefused:        codes.Aborted,
	definition.Unavailable:         codes.Unavailable,
	definition.Internal:            codes.Internal,
	definition.SourceNotOwn:        codes.PermissionDenied,
	definition.CautionNotAccepted:  codes.FailedPrecondition,
	definition.Deadline:            codes.DeadlineExceeded,
}

// reasonPrefix turns a domain reason into the name of its enum value.
const reasonPrefix = "ERROR_REASON_"

// reasonToProto gives the contract's value of a reason.
func reasonToProto(r definition.Reason) pb.ErrorReason {
	return pb.ErrorReason(pb.ErrorReason_value[reasonPrefix+string(r)])
}

// ToStatus turns what a method returned into the status its caller gets. Private is the cause where it must not be told:
// the caller reads a general text and the request id, the log holds the rest.
func ToStatus(err error, requestID string) (s *status.Status, private error) {
	var refusal *definition.Error
	switch {
	case err == nil:
		return status.New(codes.OK, ""), nil
	case errors.As(err, &refusal):
		if _, known := codeOf[refusal.Reason]; known {
			return refusalStatus(refusal, requestID), nil
		}
	case errors.Is(err, context.DeadlineExceeded):
		return withInfo(codes.DeadlineExceeded, "the deadline passed before the answer; repeating the request is safe", definition.Deadline, requestID), err
	case errors.Is(err, context.Canceled):
		return withInfo(codes.Canceled, "the caller went away before the answer; repeating the request is safe", definition.Deadline, requestID), err
	case store.Unavailable(err):
		return withInfo(codes.Unavailable, "the database cannot be reached; repeating the request later is safe", definition.Unavailable, requestID), err
	}
	if s, ok := status.FromError(err); ok { // made by the transport or by the server itself
		return s, nil
	}
	return withInfo(codes.Internal, "a fault of the service; its log tells more under request id "+requestID, definition.Internal, requestID), err
}

func withInfo(code codes.Code, text string, why definition.Reason, requestID string) *status.Status {
	return detailed(status.New(code, text), info(why, nil), &errdetails.RequestInfo{RequestId: requestID})
}

func refusalStatus(e *definition.Error, requestID string) *status.Status {
	details := []protoadapt.MessageV1{info(e.Reason, e.Meta), &errdetails.RequestInfo{RequestId: requestID}}
	if e.Field != "" {
		details = append(details, &errdetails.BadRequest{FieldViolations: []*errdetails.BadRequest_FieldViolation{
			{Field: e.Field, Description: e.Text, Reason: reasonPrefix + string(e.Reason)},
		}})
	}
	return detailed(status.New(codeOf[e.Reason], e.Error()), details...)
}

func info(why definition.Reason, meta map[string]string) *errdetails.ErrorInfo {
	return &errdetails.ErrorInfo{Reason: reasonPrefix + string(why), Domain: Domain, Metadata: meta}
}

func detailed(s *status.Status, details ...protoadapt.MessageV1) *status.Status {
	full, err := s.WithDetails(details...)
	if err != nil {
		return s // only a status of OK or a detail that cannot be encoded does that
	}
	return full
}

// ReasonOf gives the reason a status carries, "" where it has none.
func ReasonOf(s *status.Status) string {
	for _, d := range s.Details() {
		if i, ok := d.(*errdetails.ErrorInfo); ok && i.Domain == Domain {
			return i.Reason
		}
	}
	return ""
}

// under moves a refusal below a parent field; other errors pass.
func under(parent string, err error) error {
	var e *definition.Error
	if errors.As(err, &e) {
		return e.At(parent)
	}
	return err
}
