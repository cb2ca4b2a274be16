package server

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"math"
	"net/http"
	"net/url"
	"runtime/debug"
	"strconv"
	"strings"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"

	"limitary/internal/definition"
	"limitary/internal/sheet"
	"limitary/service"
)

const (
	sheetPath = "/sheet/"
	// sheetBytesMax bounds the body of a sheet request; the block reader has the same bound.
	sheetBytesMax = 8 << 20
	// sheetPatience is how long a read waits for room among the reads in work.
	sheetPatience = 10 * time.Second
	// longBodiesMax bounds the long bodies that are being read, shortBodyTimeout and longBodyTimeout how long a body may take.
	longBodiesMax    = 16
	shortBodyTimeout = 10 * time.Second
	longBodyTimeout  = 60 * time.Second
	// preflightSeconds is how long a browser may remember what other origins are allowed.
	preflightSeconds = "600"
)

// sheets is what stands between the listener and the sheet handler: keys, other origins, the rate of reads, the body.
type sheets struct {
	server *Server
	sheet  http.Handler
	reads  *buckets
	// reading has room for the one-cell reads in work, tables for the reads that take longer, posting for the posts: none of
	// them can hold up another. long has room for the long bodies that are being read.
	reading, tables, posting, long chan struct{}
	// patience is how long a read waits for room.
	patience time.Duration
}

func (s *Server) newSheets() *sheets {
	o := s.options
	return &sheets{
		server: s, sheet: sheet.New(newReadConn(s.gateway, o.Timeout), o.scheme(), o.Now),
		reads:   newBuckets(float64(o.SheetRate), float64(o.SheetBurst), o.Now),
		reading: make(chan struct{}, o.SheetCallsMax), tables: make(chan struct{}, max(1, o.SheetCallsMax/2)), posting: make(chan struct{}, o.CallsMax),
		long:     make(chan struct{}, longBodiesMax),
		patience: sheetPatience,
	}
}

// sheetFault is an answer other than what was asked for.
type sheetFault struct {
	status int
	text   string
	wait   time.Duration
}

func (f *sheetFault) Error() string { return f.text }

// ServeHTTP implements http.Handler.
func (f *sheets) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	defer f.recovered(w, r)
	w.Header().Set("Referrer-Policy", "no-referrer")
	if preflight(w, r) {
		return
	}
	token, err := f.token(r)
	if err != nil {
		f.refuse(w, r, err)
		return
	}
	if err := f.rate(r, token); err != nil {
		f.refuse(w, r, err)
		return
	}
	// A caller who is slow to send or to take is let be slow in nobody's room: the body is read before, and the answer is
	// written after.
	if r.Method == http.MethodPost {
		if err := f.body(w, r, token); err != nil {
			w.Header().Set("Connection", "close") // the body is not going to be read
			f.refuse(w, r, err)
			return
		}
	}
	held := &heldAnswer{header: w.Header(), status: http.StatusOK}
	if err := f.work(held, r, token); err != nil {
		f.refuse(w, r, err)
		return
	}
	w.WriteHeader(held.status)
	_, _ = w.Write(held.body.Bytes()) // a caller who went away gets no answer
}

// work has the request answered, when there is room for it.
func (f *sheets) work(answered *heldAnswer, r *http.Request, token string) error {
	done, err := f.room(r)
	if err != nil {
		return err
	}
	defer done()
	begin := f.server.options.Now()
	ctx := metadata.AppendToOutgoingContext(r.Context(), "authorization", "Bearer "+token,
		requestIDHeader, r.Header.Get(requestIDHeader), faceHeader, "sheet")
	f.sheet.ServeHTTP(answered, r.WithContext(ctx))
	f.record(r, answered.status, f.server.options.Now().Sub(begin))
	return nil
}

// heldAnswer is an answer in memory.
type heldAnswer struct {
	header http.Header
	status int
	body   bytes.Buffer
}

// Header implements http.ResponseWriter.
func (h *heldAnswer) Header() http.Header { return h.header }

// WriteHeader implements http.ResponseWriter.
func (h *heldAnswer) WriteHeader(code int) { h.status = code }

// Write implements http.ResponseWriter.
func (h *heldAnswer) Write(b []byte) (int, error) { return h.body.Write(b) }

// record logs a request that came through, so that verdicts that nobody stored can be counted. The calls it made have lines of
// their own with the same request id. The query is left out: it held the key.
func (f *sheets) record(r *http.Request, status int, took time.Duration) {
	f.server.options.Log.LogAttrs(r.Context(), slog.LevelInfo, "sheet", slog.String("request_id", r.Header.Get(requestIDHeader)),
		slog.String("method", r.Method), slog.String("path", r.URL.Path), slog.Int("status", status),
		slog.Float64("took_ms", float64(took.Microseconds())/1000))
}

// preflight lets other origins read, with a key in a header: no cookie is ever used, so that a page can only do what the key it
// was given may do. Posting results is not for other origins: its preflight gets no word of permission.
func preflight(w http.ResponseWriter, r *http.Request) (answered bool) {
	asked := r.Header.Get("Access-Control-Request-Method")
	posts := sheet.Posts(r) || asked == http.MethodPost && strings.HasPrefix(r.URL.Path, sheetPath+"results/")
	h := w.Header()
	if !posts {
		h.Set("Access-Control-Allow-Origin", "*")
		h.Set("Access-Control-Expose-Headers", "ETag, Retry-After, Content-Disposition, X-Request-Id")
	}
	if r.Method != http.MethodOptions || asked == "" {
		return false
	}
	if !posts {
		h.Set("Access-Control-Allow-Methods", "GET, HEAD, POST")
		h.Set("Access-Control-Allow-Headers", "Authorization, Content-Type, If-None-Match, X-Request-Id")
		h.Set("Access-Control-Max-Age", preflightSeconds)
	}
	w.WriteHeader(http.StatusNoContent)
	return true
}

// token finds the caller's key, and takes one in the address out of it.
func (f *sheets) token(r *http.Request) (string, error) {
	inAddress, given := takeKey(r.URL)
	if r.Method == http.MethodOptions || sheet.Open(r) {
		return "", nil
	}
	authorization := r.Header.Get("Authorization")
	switch {
	case given && authorization != "":
		return "", &sheetFault{status: http.StatusBadRequest, text: "a key is given in the address and in the Authorization header; give it once"}
	case given:
		return inAddress, f.checkAddressKey(r, inAddress)
	}
	if _, _, err := credentialsOf(authorization); err != nil {
		return "", err
	}
	return strings.TrimSpace(authorization[len(bearer):]), nil
}

// takeKey cuts key= out of an address.
func takeKey(u *url.URL) (key string, given bool) {
	var rest []string
	for part := range strings.SplitSeq(u.RawQuery, "&") {
		if text, ok := strings.CutPrefix(part, "key="); ok {
			key, _ = url.PathUnescape(text)
			given = true
			continue
		}
		rest = append(rest, part)
	}
	u.RawQuery = strings.Join(rest, "&")
	return key, given
}

// checkAddressKey lets a key come in an address only where it can do no more than read.
func (f *sheets) checkAddressKey(r *http.Request, token string) error {
	who, err := f.server.calls.keys.actor(r.Context(), bearer+token)
	if err != nil {
		return err
	}
	for _, role := range who.Key.Roles {
		if role != definition.Reader {
			return &sheetFault{status: http.StatusForbidden, text: "key " + who.Key.ID + " has the role " + string(role) +
				" and must never stand in an address, where histories and workbooks keep it: have it revoked, and use a key whose one role is reader"}
		}
	}
	if r.Method == http.MethodPost {
		return &sheetFault{status: http.StatusForbidden, text: "a key in an address is for GET; send it as \"Authorization: Bearer TOKEN\""}
	}
	return nil
}

// rate holds reads to the rate of their key.
func (f *sheets) rate(r *http.Request, token string) error {
	if r.Method == http.MethodOptions || sheet.Posts(r) {
		return nil
	}
	if wait := f.reads.take(sha256.Sum256([]byte(token))); wait > 0 {
		return &sheetFault{status: http.StatusTooManyRequests, wait: wait,
			text: fmt.Sprintf("this key reads more than %d cells at once and %d a second; read a table instead, or wait", f.server.options.SheetBurst, f.server.options.SheetRate)}
	}
	return nil
}

// room waits for room among the requests of its kind in work.
func (f *sheets) room(r *http.Request) (done func(), err error) {
	if r.Method == http.MethodOptions {
		return func() {}, nil
	}
	if sheet.Posts(r) {
		select {
		case f.posting <- struct{}{}:
			return func() { <-f.posting }, nil
		default:
			return nil, &sheetFault{status: http.StatusTooManyRequests, text: "too many posts are in work; repeating this one later is safe", wait: retryAfter}
		}
	}
	in := f.reading
	if r.Method == http.MethodPost || isTable(r.URL.Path) {
		in = f.tables
	}
	if err := f.wait(r.Context(), in); err != nil {
		return nil, err
	}
	return func() { <-in }, nil
}

// wait takes a place in a room, for as long as a read has patience.
func (f *sheets) wait(ctx context.Context, room chan struct{}) error {
	patience := time.NewTimer(f.patience)
	defer patience.Stop()
	select {
	case room <- struct{}{}:
		return nil
	case <-patience.C:
		return &sheetFault{status: http.StatusServiceUnavailable, text: "too many reads are in work; try again", wait: retryAfter}
	case <-ctx.Done():
		return ctx.Err()
	}
}

// isTable reports the path of a table or workbook.
func isTable(path string) bool {
	return strings.HasSuffix(path, ".csv") || strings.HasSuffix(path, ".tsv") || strings.HasSuffix(path, ".xlsx")
}

// body takes the body into memory, for a key that is valid. A body has its time: whoever sends a byte now and then is cut off.
func (f *sheets) body(w http.ResponseWriter, r *http.Request, token string) error {
	most := min(sheetBytesMax, f.server.options.BodyBytesMax)
	if r.ContentLength > most {
		return &sheetFault{status: http.StatusRequestEntityTooLarge, text: fmt.Sprintf("the body has %d bytes, the limit is %d; send it in parts", r.ContentLength, most)}
	}
	if _, err := f.server.calls.keys.actor(r.Context(), bearer+token); err != nil {
		return err
	}
	patience := shortBodyTimeout
	if r.ContentLength < 0 || r.ContentLength > firstRead {
		if err := f.wait(r.Context(), f.long); err != nil {
			return err
		}
		defer func() { <-f.long }()
		patience = longBodyTimeout
	}
	within(w, patience)
	defer within(w, 0)
	data, err := io.ReadAll(http.MaxBytesReader(w, r.Body, most))
	var over *http.MaxBytesError
	switch {
	case errors.As(err, &over):
		return &sheetFault{status: http.StatusRequestEntityTooLarge, text: fmt.Sprintf("the body is longer than the limit of %d bytes; send it in parts", most)}
	case err != nil:
		return &sheetFault{status: http.StatusBadRequest, text: "the body could not be read"}
	}
	r.Body = io.NopCloser(bytes.NewReader(data))
	return nil
}

// within gives a request so long to send its body; 0 takes the bound back, for the requests that follow on the connection.
func within(w http.ResponseWriter, d time.Duration) {
	var at time.Time
	if d > 0 {
		at = time.Now().Add(d)
	}
	_ = http.NewResponseController(w).SetReadDeadline(at) // a writer that knows no deadlines has the server's own
}

// refuse answers a request that did not come through to the handler, and logs it.
func (f *sheets) refuse(w http.ResponseWriter, r *http.Request, err error) {
	id := r.Header.Get(requestIDHeader)
	var fault *sheetFault
	if !errors.As(err, &fault) {
		st, _ := service.ToStatus(err, id)
		fault = &sheetFault{status: sheetStatus(st.Code()), text: st.Message()}
	}
	if fault.wait > 0 {
		w.Header().Set("Retry-After", strconv.Itoa(int(math.Ceil(fault.wait.Seconds()))))
	}
	f.server.options.Log.LogAttrs(r.Context(), slog.LevelInfo, "refused", slog.String("request_id", id), slog.String("face", "sheet"),
		slog.String("method", r.Method), slog.String("path", r.URL.Path), slog.Int("status", fault.status),
		slog.String("text", fault.text), slog.String("peer", r.RemoteAddr))
	sheet.WriteError(w, fault.status, fault.text)
}

// sheetStatus is the HTTP status of what can be wrong with a key or its look-up.
func sheetStatus(code codes.Code) int {
	switch code {
	case codes.Unauthenticated:
		return http.StatusUnauthorized
	case codes.PermissionDenied:
		return http.StatusForbidden
	case codes.Unavailable, codes.Canceled:
		return http.StatusServiceUnavailable
	case codes.DeadlineExceeded:
		return http.StatusGatewayTimeout
	}
	return http.StatusInternalServerError
}

// recovered turns a fault of the program into an error of one request.
func (f *sheets) recovered(w http.ResponseWriter, r *http.Request) {
	p := recover()
	if p == nil {
		return
	}
	id := r.Header.Get(requestIDHeader)
	f.server.options.Log.LogAttrs(context.WithoutCancel(r.Context()), slog.LevelError, "sheet", slog.String("request_id", id),
		slog.String("path", r.URL.Path), slog.String("cause", fmt.Sprintf("panic: %v\n%s", p, debug.Stack())))
	sheet.WriteError(w, http.StatusInternalServerError, "a fault of the service; its log tells more under request id "+id)
}
