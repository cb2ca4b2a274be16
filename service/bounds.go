package service

import (
	"fmt"
	"strings"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"limitary/internal/definition"
	"limitary/internal/store"
)

// Limits on what one call may carry. A call at the limit takes seconds at most; a text that exceeds one names it.
const (
	// ResultsMax bounds the rows of one PostResults: about 5 MB, and one transaction of a second or two.
	ResultsMax = 10_000
	// EvaluationsMax bounds the sequences of one EvaluateBatch.
	EvaluationsMax = 1_000
	// PointsMax bounds the values of one evaluation, and of the data of one computation of limits.
	PointsMax = 100_000
	// PointsTotalMax bounds the values of all evaluations of one call together: 8 MB as doubles.
	PointsTotalMax = 1_000_000
	// VerdictsMax bounds the points answered one by one, with DETAIL_FULL: about 15 MB.
	VerdictsMax = 100_000
	// HitsMax bounds the hits of one answer. More mean that limits and data do not belong together.
	HitsMax = 1_000_000
	// PageSizeDefault and PageSizeMax bound the items of one page of a list.
	PageSizeDefault = 100
	PageSizeMax     = 1_000
	// PageTokenBytesMax bounds a page token; the service's own are far shorter.
	PageTokenBytesMax = 2_000
	// RequestIDBytesMax bounds a request id: a UUID with a prefix.
	RequestIDBytesMax = 64
	// ReasonBytesMax bounds reasons, causes and notes of people.
	ReasonBytesMax = definition.TextBytesMax
	// ReasonCodeBytesMax bounds codes from the laboratory's own lists.
	ReasonCodeBytesMax = 64
	// SignalsMax bounds the signals named in the closing of one occurrence. They are decided on together, so it is far
	// above what can be open on a track before anybody looks: about 1 MB.
	SignalsMax = 100_000
	// ExclusionsMax bounds what one computation or proposal leaves out of the estimate: each with a reason of its own, kept
	// and shown with the version.
	ExclusionsMax = 2_000
	// PatternsMax bounds the patterns accepted in one approval, and the cautions of one proposal.
	PatternsMax = 10_000
)

// tooMany refuses n items where the limit is most.
func tooMany(field string, n, most int, items string) error {
	if n <= most {
		return nil
	}
	return &definition.Error{Reason: definition.TooManyItems, Field: field, Text: fmt.Sprintf("%d %s, the limit is %d", n, items, most)}
}

// readPage checks the paging of a list.
func readPage(size int32, token string) (store.Page, error) {
	switch {
	case size < 0:
		return store.Page{}, definition.Invalid("page_size", "%d: want 1 to %d, or 0 for %d", size, PageSizeMax, PageSizeDefault)
	case size == 0:
		size = PageSizeDefault
	}
	if err := tooMany("page_size", int(size), PageSizeMax, "items a page"); err != nil {
		return store.Page{}, err
	}
	if err := definition.CheckText("page_token", token, 0, PageTokenBytesMax); err != nil {
		return store.Page{}, err
	}
	return store.Page{Size: int(size), Token: token}, nil
}

// readLabels reads filters written key=value.
func readLabels(field string, texts []string) (map[string]string, error) {
	if err := tooMany(field, len(texts), definition.LabelsMax, "labels"); err != nil {
		return nil, err
	}
	out := make(map[string]string, len(texts))
	for i, t := range texts {
		at := fmt.Sprintf("%s[%d]", field, i)
		key, value, ok := strings.Cut(t, "=")
		if !ok || key == "" {
			return nil, definition.Invalid(at, "%q: want a label as key=value", clip(t))
		}
		if had, twice := out[key]; twice && had != value {
			return nil, definition.Invalid(at, "%q: the label %q is asked for with two values", clip(t), key)
		}
		out[key] = value
	}
	return out, definition.CheckLabels(field, out)
}

// readMoment reads an optional timestamp; absent is the zero time.
func readMoment(field string, t *timestamppb.Timestamp) (time.Time, error) {
	if t == nil {
		return time.Time{}, nil
	}
	if err := t.CheckValid(); err != nil {
		return time.Time{}, definition.Invalid(field, "is no time: want one from year 1 to 9999")
	}
	at := t.AsTime()
	if at.Year() < 1900 || at.Year() > 9998 {
		return time.Time{}, definition.Invalid(field, "%s: want a year from 1900 to 9998", at.Format(time.RFC3339))
	}
	if at.Nanosecond()%1000 != 0 {
		return time.Time{}, definition.Invalid(field, "%s: finer than a microsecond, which is the limit", at.Format(time.RFC3339Nano))
	}
	return at, nil
}

// readBetween reads the bounds of a half-open stretch of time.
func readBetween(from, to *timestamppb.Timestamp) (f, t time.Time, err error) {
	if f, err = readMoment("from", from); err != nil {
		return f, t, err
	}
	if t, err = readMoment("to", to); err != nil {
		return f, t, err
	}
	if !f.IsZero() && !t.IsZero() && !f.Before(t) {
		return f, t, definition.Invalid("to", "%s is not after from, %s", t.Format(time.RFC3339Nano), f.Format(time.RFC3339Nano))
	}
	return f, t, nil
}

// checkName checks a text that names something: a lot, a source, a run.
func checkName(field, s string, least int) error {
	return definition.CheckName(field, s, least, definition.NameBytesMax)
}

// checkWhy checks a reason code and a reason; least is 1 where a reason is required.
func checkWhy(code, reason string, least int) error {
	if err := definition.CheckText("reason_code", code, least, ReasonCodeBytesMax); err != nil {
		return err
	}
	return definition.CheckText("reason", reason, least, ReasonBytesMax)
}

// checkID checks the id of something that has one.
func checkID(field string, id int64) error {
	if id < 1 {
		return definition.Invalid(field, "%d: want 1 or more", id)
	}
	return nil
}

// first gives the first error.
func first(errs ...error) error {
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return nil
}

func clip(s string) string {
	if len(s) > 80 {
		return strings.ToValidUTF8(s[:80], "") + "..."
	}
	return s
}
