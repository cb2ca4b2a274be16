package store

import (
	"bytes"
	"crypto/sha256"
	"encoding/base64"
	"encoding/json"
	"errors"

	"limitary/internal/definition"
)

// Page asks for a part of a list. Size 0 is PageSizeDefault; the token is that of the page before, empty for the first.
type Page struct {
	Size  int
	Token string
}

const (
	PageSizeDefault = 100
	// PageSizeMax keeps an answer within a few megabytes.
	PageSizeMax = 1000
)

// pageToken is what a token says once decoded: the digest of the list's filter, and the keys of the last item given.
type pageToken struct {
	Filter []byte          `json:"f"`
	After  json.RawMessage `json:"a"`
}

// open reads a page's size and, into after, the place it starts behind. A list's order is that of unchanging keys, so an
// item neither comes twice nor is passed over because others come or go between two pages. Filter is everything that
// selects and orders the list, in JSON; a token given with another is refused. More is false on the first page.
func (p Page) open(filter, after any) (size int, more bool, err error) {
	size = p.Size
	switch {
	case size < 0:
		return 0, false, definition.Invalid("page_size", "%d: want 1 to %d, or 0 for %d", size, PageSizeMax, PageSizeDefault)
	case size > PageSizeMax:
		return 0, false, definition.Invalid("page_size", "%d: the limit is %d", size, PageSizeMax)
	case size == 0:
		size = PageSizeDefault
	}
	if p.Token == "" {
		return size, false, nil
	}
	var token pageToken
	text, err := base64.RawURLEncoding.DecodeString(p.Token)
	if err == nil {
		err = json.Unmarshal(text, &token)
	}
	if err == nil && bytes.Contains(token.After, []byte(`\u0000`)) {
		err = errors.New("a text that no row can have")
	}
	if err == nil {
		err = json.Unmarshal(token.After, after)
	}
	if err != nil {
		return 0, false, definition.Invalid("page_token", "is not one that this service gave")
	}
	if string(token.Filter) != string(filterDigest(filter)) {
		return 0, false, definition.Invalid("page_token", "belongs to a list with another filter; start from the first page")
	}
	return size, true, nil
}

// cut takes the extra item off a list that was read with one more than the page has, and gives the token of the next
// page; empty where this is the last.
func cut[T any](list []T, size int, filter any, after func(T) any) ([]T, string, error) {
	if len(list) <= size {
		return list, "", nil
	}
	list = list[:size]
	last, err := json.Marshal(after(list[size-1]))
	if err != nil {
		return nil, "", err
	}
	text, err := json.Marshal(pageToken{filterDigest(filter), last})
	if err != nil {
		return nil, "", err
	}
	return list, base64.RawURLEncoding.EncodeToString(text), nil
}

func filterDigest(filter any) []byte {
	text, err := json.Marshal(filter)
	if err != nil {
		panic(err) // filters are texts, numbers and times
	}
	sum := sha256.Sum256(text)
	return sum[:]
}
