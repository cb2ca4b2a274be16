package sheet

import (
	"crypto/sha256"
	"encoding/base64"
	"fmt"
	"net/http"
	"slices"
	"strconv"
	"strings"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
	"limitary/internal/sheet/grid"
)

// answer is what a request comes to.
type answer struct {
	contentType string
	body        []byte
	// pinned says that the same request always gets this answer.
	pinned bool
	// digest replaces the body's own where the body holds more than what was asked for, such as the moment it was made.
	digest []byte
	// filename is what a browser saves the answer as.
	filename string
}

const plain = "text/plain; charset=utf-8"

func textAnswer(s string) *answer { return &answer{contentType: plain, body: []byte(s)} }

// pinnedSeconds is how long an answer that never changes may be kept: a year.
const pinnedSeconds = 365 * 24 * 60 * 60

// ServeHTTP implements http.Handler.
func (h *Handler) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	w.Header().Set("Referrer-Policy", "no-referrer")
	rt, args, allowed := find(r)
	if rt == nil {
		notRouted(w, r, allowed)
		return
	}
	a, err := h.serve(rt, args, r)
	if err != nil {
		code, text, expected := explain(err)
		if expected && (rt.cell || rt.takes("refusals") && saysText(r.URL.RawQuery)) {
			a, err = textAnswer("refused: "+redact(strings.ReplaceAll(text, "\n", "; "))), nil
		} else {
			WriteError(w, code, text)
		}
	}
	if err == nil {
		a.write(w, r)
	}
}

func (h *Handler) serve(rt *route, args []string, r *http.Request) (*answer, error) {
	if err := checkAddress(r); err != nil {
		return nil, err
	}
	query, err := parseQuery(r.URL.RawQuery, rt.params)
	if err != nil {
		return nil, err
	}
	if text := query.Get("refusals"); text != "" && text != "text" {
		return nil, refuse("refusals=%s: want text, or nothing for a status", clip(text))
	}
	return rt.serve(h, &request{http: r, args: args, query: query, workbooks: h.workbooks})
}

// saysText reports a query that asks for refusals as text, whatever else is wrong with it.
func saysText(query string) bool { return slices.Contains(strings.Split(query, "&"), "refusals=text") }

// find looks for the route of a request; allowed are the methods of its path where the method is not one of them.
func find(r *http.Request) (found *route, args []string, allowed []string) {
	path, ok := strings.CutPrefix(r.URL.Path, "/sheet/")
	if !ok {
		return nil, nil, nil
	}
	if path == kitPath+"/" {
		path = kitPath
	}
	method := r.Method
	if method == http.MethodHead {
		method = http.MethodGet
	}
	for i := range routes {
		args, ok := routes[i].match(path)
		if !ok {
			continue
		}
		if routes[i].method == method {
			return &routes[i], args, nil
		}
		if allowed = append(allowed, routes[i].method); routes[i].method == http.MethodGet {
			allowed = append(allowed, http.MethodHead)
		}
	}
	return nil, nil, allowed
}

func notRouted(w http.ResponseWriter, r *http.Request, allowed []string) {
	if allowed == nil {
		WriteError(w, http.StatusNotFound, "there is no "+clip(r.URL.Path)+" for sheets")
		return
	}
	allowed = append(allowed, http.MethodOptions)
	w.Header().Set("Allow", strings.Join(allowed, ", "))
	if r.Method == http.MethodOptions {
		w.WriteHeader(http.StatusNoContent)
		return
	}
	WriteError(w, http.StatusMethodNotAllowed, clip(r.URL.Path)+" takes "+strings.Join(allowed, ", "))
}

// retrySeconds is what a caller is asked to wait where the service cannot say better.
const retrySeconds = "1"

// WriteError answers with a line of text, from which what may be a token is taken out.
func WriteError(w http.ResponseWriter, code int, text string) {
	h := w.Header()
	h.Set("Content-Type", plain)
	h.Set("Cache-Control", "no-store")
	switch code {
	case http.StatusUnauthorized:
		h.Set("WWW-Authenticate", `Bearer realm="limitary"`)
	case http.StatusTooManyRequests, http.StatusServiceUnavailable:
		if h.Get("Retry-After") == "" {
			h.Set("Retry-After", retrySeconds)
		}
	}
	w.WriteHeader(code)
	_, _ = w.Write([]byte(redact(text)))
}

// write answers a read with its digest, or with 304 where the caller has it; what was posted is answered as it is.
func (a *answer) write(w http.ResponseWriter, r *http.Request) {
	h := w.Header()
	h.Set("Content-Type", a.contentType)
	h.Add("Vary", "Authorization")
	if a.filename != "" {
		h.Set("Content-Disposition", `attachment; filename="`+a.filename+`"`)
	}
	if r.Method == http.MethodPost {
		h.Set("Cache-Control", "no-store")
		_, _ = w.Write(a.body)
		return
	}
	tag := a.tag()
	h.Set("ETag", tag)
	if h.Set("Cache-Control", "private, no-cache"); a.pinned {
		h.Set("Cache-Control", "private, immutable, max-age="+strconv.Itoa(pinnedSeconds))
	}
	if matches(r.Header.Values("If-None-Match"), tag) {
		h.Del("Content-Type")
		h.Del("Content-Disposition")
		w.WriteHeader(http.StatusNotModified)
		return
	}
	h.Set("Content-Length", strconv.Itoa(len(a.body)))
	if r.Method != http.MethodHead {
		_, _ = w.Write(a.body)
	}
}

func (a *answer) tag() string {
	sum, weak := a.digest, "W/"
	if sum == nil {
		whole := sha256.Sum256(a.body)
		sum, weak = whole[:], ""
	}
	return weak + `"` + base64.RawURLEncoding.EncodeToString(sum) + `"`
}

// matches compares weakly, as If-None-Match does (RFC 9110, 13.1.2).
func matches(given []string, tag string) bool {
	for _, line := range given {
		for each := range strings.SplitSeq(line, ",") {
			if each = strings.TrimSpace(each); each == "*" || strings.TrimPrefix(each, "W/") == strings.TrimPrefix(tag, "W/") {
				return true
			}
		}
	}
	return false
}

// workbook writes tables as a workbook.
func (r *request) workbook(tables []*grid.Table) (data []byte, err error) {
	err = r.withWorkbook(func() (err error) {
		if data, err = book.Write(tables); err != nil {
			err = fmt.Errorf("writing a workbook: %w", err)
		}
		return err
	})
	return data, err
}

// tables answers with one table as text, or with several as a workbook.
func (h *Handler) tables(r *request, format, name string, tables ...*grid.Table) (*answer, error) {
	d, err := r.dialect(format)
	if err != nil {
		return nil, err
	}
	switch format {
	case "csv", "tsv":
		if len(tables) != 1 {
			return nil, refuse("%s: want xlsx", clip(format))
		}
		a := &answer{contentType: "text/csv; charset=utf-8", body: tables[0].Delimited(d), filename: name + "." + format}
		if format == "tsv" {
			a.contentType = "text/tab-separated-values; charset=utf-8"
		}
		return a, nil
	case "xlsx":
		sum := sha256.New()
		for _, t := range tables {
			sum.Write([]byte(t.Name + "\n"))
			sum.Write(t.Delimited(block.Dialect{Delimiter: block.Tab, Decimal: '.'}))
		}
		data, err := r.workbook(append([]*grid.Table{h.about(name)}, tables...))
		if err != nil {
			return nil, err
		}
		return &answer{contentType: book.ContentType, body: data, digest: sum.Sum(nil), filename: name + ".xlsx"}, nil
	}
	return nil, &refusal{status: http.StatusNotFound, text: clip(format) + ": want csv, tsv or xlsx"}
}
