package sheet

import (
	"errors"
	"fmt"
	"net/http"
	"regexp"
	"strings"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"limitary/internal/sheet/block"
)

// refusal is what the caller can put right; status 0 is 400.
type refusal struct {
	status int
	text   string
}

// Error implements error.
func (r *refusal) Error() string { return r.text }

func refuse(format string, args ...any) error { return &refusal{text: fmt.Sprintf(format, args...)} }

// asRefusal makes a refusal of an error whose text is for the caller.
func asRefusal(err error) error {
	if err == nil {
		return nil
	}
	return refuse("%s", err.Error())
}

// clip shortens a text for an error and keeps it on one line.
func clip(s string) string {
	s = strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, s)
	if r := []rune(s); len(r) > 60 {
		return string(r[:60]) + "..."
	}
	return s
}

// tokenLike is what may be a key's token, whole or cut off.
var tokenLike = regexp.MustCompile(`(?i)\blim_[a-z0-9_]{8,}`)

// redact takes what may be a key's token out of a text: a refusal is shown, logged and sent on.
func redact(text string) string { return tokenLike.ReplaceAllString(text, "lim_(redacted)") }

// statuses give the codes of the API their status. Expected are those that a one-cell read answers as text, and a block
// that asks for it.
var statuses = map[codes.Code]struct {
	status   int
	expected bool
}{
	codes.InvalidArgument:    {http.StatusBadRequest, true},
	codes.NotFound:           {http.StatusNotFound, true},
	codes.FailedPrecondition: {http.StatusBadRequest, true},
	codes.OutOfRange:         {http.StatusBadRequest, true},
	codes.Unauthenticated:    {http.StatusUnauthorized, false},
	codes.PermissionDenied:   {http.StatusForbidden, false},
	codes.ResourceExhausted:  {http.StatusTooManyRequests, false},
	codes.Unavailable:        {http.StatusServiceUnavailable, false},
	codes.DeadlineExceeded:   {http.StatusGatewayTimeout, false},
	codes.Aborted:            {http.StatusConflict, false},
	codes.AlreadyExists:      {http.StatusConflict, false},
}

// inner is the path of a field of a call that the handler made by itself, which its caller knows nothing of.
var inner = regexp.MustCompile(`^evaluations\[[0-9]+\](?:[a-z_.]*(?:\[[0-9]+\])?\.?)*?([a-z_]*): `)

// outside is the text of an error of such a call as its caller understands it.
func outside(text string) string {
	m := inner.FindStringSubmatch(text)
	if m == nil {
		return text
	}
	text = text[len(m[0]):]
	if strings.HasPrefix(text, "is ") || strings.HasPrefix(text, "are ") {
		text = m[1] + " " + text
	}
	if strings.HasSuffix(text, "takes counts") {
		text += wantInspected
	}
	return text
}

// explain gives an error its status and its line.
func explain(err error) (code int, text string, expected bool) {
	var own *refusal
	var blocked *block.Error
	switch {
	case errors.As(err, &own):
		if own.status != 0 {
			return own.status, own.text, own.status == http.StatusUnprocessableEntity
		}
		return http.StatusBadRequest, own.text, true
	case errors.As(err, &blocked):
		return http.StatusBadRequest, blocked.Error(), true
	}
	s := status.Convert(err)
	if known, ok := statuses[s.Code()]; ok {
		return known.status, outside(s.Message()), known.expected
	}
	return http.StatusInternalServerError, "a fault of the service; its log tells more", false
}

// reasonOf gives the reason of an error of the API, such as "NO_VERSION_IN_FORCE".
func reasonOf(err error) string {
	for _, d := range status.Convert(err).Details() {
		if info, ok := d.(*errdetails.ErrorInfo); ok {
			return strings.TrimPrefix(info.Reason, "ERROR_REASON_")
		}
	}
	return ""
}
