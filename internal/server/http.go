package server

import (
	"bytes"
	"context"
	"crypto/tls"
	"errors"
	"io"
	"log"
	"log/slog"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"limitary/api"
	"limitary/internal/definition"
	"limitary/service"
)

// Times and sizes of HTTP that no caller needs to exceed.
const (
	headerTimeout  = 10 * time.Second
	bodyTimeout    = 2 * time.Minute
	idleTimeout    = 2 * time.Minute
	headerBytesMax = 64 << 10
	// firstRead is how much room a body gets on its word alone.
	firstRead = 64 << 10
)

func (s *Server) newHTTP(h *health, secure *tls.Config) error {
	if err := s.dialMemory(); err != nil {
		return err
	}
	gateway, err := s.newGateway()
	if err != nil {
		return err
	}
	mux := http.NewServeMux()
	mux.HandleFunc("GET /healthz", func(w http.ResponseWriter, _ *http.Request) { writeText(w, http.StatusOK, "live\n") })
	mux.HandleFunc("GET /readyz", func(w http.ResponseWriter, r *http.Request) {
		if err := h.isReady(r.Context()); err != nil {
			s.options.Log.LogAttrs(r.Context(), slog.LevelWarn, "not ready", slog.String("cause", err.Error()))
			writeText(w, http.StatusServiceUnavailable, "not ready\n")
			return
		}
		writeText(w, http.StatusOK, "ready\n")
	})
	mux.HandleFunc("GET /openapi.json", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", "application/json")
		_, _ = w.Write(api.OpenAPI)
	})
	mux.Handle("/v1/", s.bodies(gateway))
	mux.HandleFunc("/", func(w http.ResponseWriter, r *http.Request) {
		s.routingError(r.Context(), nil, nil, w, r, http.StatusNotFound)
	})
	sheets := s.newSheets()
	handler := http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if strings.HasPrefix(r.URL.Path, sheetPath) { // before the mux, which would redirect with the address, and its key, in the answer
			sheets.ServeHTTP(w, r)
			return
		}
		mux.ServeHTTP(w, r)
	})
	s.http = &http.Server{
		Handler: s.identify(handler), TLSConfig: secure,
		ReadHeaderTimeout: headerTimeout, ReadTimeout: bodyTimeout, IdleTimeout: idleTimeout,
		WriteTimeout: bodyTimeout + s.options.TimeoutMax, MaxHeaderBytes: headerBytesMax,
		ErrorLog: log.New(logWriter{s.options.Log}, "", 0),
	}
	return nil
}

// logWriter takes the lines that net/http writes about broken connections.
type logWriter struct{ log *slog.Logger }

func (w logWriter) Write(p []byte) (int, error) {
	w.log.LogAttrs(context.Background(), slog.LevelDebug, "http", slog.String("text", Redact(strings.TrimSpace(string(p)))))
	return len(p), nil
}

func writeText(w http.ResponseWriter, code int, text string) {
	w.Header().Set("Content-Type", "text/plain; charset=utf-8")
	w.Header().Set("Cache-Control", "no-store")
	w.WriteHeader(code)
	_, _ = io.WriteString(w, text)
}

type reachedKey struct{}

// markReached notes that a request has come through to a service, whose own line in the log then tells of it.
func markReached(ctx context.Context, method string, req, reply any, cc *grpc.ClientConn, invoke grpc.UnaryInvoker, opts ...grpc.CallOption) error {
	if reached, ok := ctx.Value(reachedKey{}).(*bool); ok {
		*reached = true
	}
	return invoke(ctx, method, req, reply, cc, opts...)
}

// identify gives every request its id before anything can go wrong.
func (s *Server) identify(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		id := requestID(r.Header.Get(requestIDHeader))
		r.Header.Set(requestIDHeader, id)
		h := w.Header()
		h.Set(requestIDHeader, id)
		h.Set("X-Content-Type-Options", "nosniff")
		reached := false
		next.ServeHTTP(w, r.WithContext(context.WithValue(r.Context(), reachedKey{}, &reached)))
	})
}

// bodies lets a request through to the gateway with its whole body in memory. What can be refused without reading the
// body is refused first: too many at once, no key, too many bytes. A body that is long, or does not say how long it is, is
// read only for a key that is valid; for a short one that is not worth asking the database twice.
func (s *Server) bodies(next http.Handler) http.Handler {
	slots := make(chan struct{}, s.options.CallsMax)
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Cache-Control", "no-store")
		id := r.Header.Get(requestIDHeader)
		_, _, err := credentialsOf(r.Header.Get("Authorization"))
		long := r.ContentLength < 0 || r.ContentLength > firstRead
		if !long && err == nil { // a short body is read before it takes a slot, so that nobody holds one by being slow to send
			within(w, shortBodyTimeout)
			defer within(w, 0)
			b, st := s.read(w, r)
			if st != nil {
				s.writeStatus(w, r, st)
				return
			}
			r.Body = b
			within(w, 0)
		}
		select {
		case slots <- struct{}{}:
			defer func() { <-slots }()
		default:
			s.writeStatus(w, r, busy(cap(slots), id))
			return
		}
		if err == nil && long {
			_, err = s.calls.keys.actor(r.Context(), r.Header.Get("Authorization"))
		}
		if err != nil {
			if r.ContentLength != 0 {
				w.Header().Set("Connection", "close") // the body is not going to be read
			}
			st, _ := service.ToStatus(err, id)
			s.writeStatus(w, r, st)
			return
		}
		if r.ContentLength > s.options.BodyBytesMax {
			w.Header().Set("Connection", "close") // the body is not going to be read
			s.writeStatus(w, r, tooManyBytes(r.ContentLength, s.options.BodyBytesMax, id))
			return
		}
		if long {
			b, st := s.read(w, r)
			if st != nil {
				s.writeStatus(w, r, st)
				return
			}
			r.Body = b
		}
		next.ServeHTTP(w, r)
	})
}

func tooManyBytes(n, most int64, id string) *status.Status {
	text := "the body is longer than the limit of " + strconv.FormatInt(most, 10) + " bytes"
	if n >= 0 {
		text = "the body has " + strconv.FormatInt(n, 10) + " bytes, the limit is " + strconv.FormatInt(most, 10)
	}
	return withInfo(status.New(codes.ResourceExhausted, text), tooLarge, id)
}

// read takes in the body.
func (s *Server) read(w http.ResponseWriter, r *http.Request) (*body, *status.Status) {
	id := r.Header.Get(requestIDHeader)
	var buf bytes.Buffer
	buf.Grow(int(min(max(r.ContentLength, 0)+bytes.MinRead, firstRead)))
	_, err := buf.ReadFrom(http.MaxBytesReader(w, r.Body, s.options.BodyBytesMax))
	var over *http.MaxBytesError
	switch {
	case errors.As(err, &over):
		return nil, tooManyBytes(-1, s.options.BodyBytesMax, id)
	case err != nil:
		return nil, withInfo(status.Newf(codes.InvalidArgument, "the body could not be read: %v", err), definition.InvalidField, id)
	}
	return &body{bytes: buf.Bytes(), Reader: bytes.NewReader(buf.Bytes())}, nil
}

// body is a request body in memory.
type body struct {
	*bytes.Reader
	bytes []byte
}

// Close implements io.Closer.
func (*body) Close() error { return nil }

func parseQuery(r *http.Request) (url.Values, error) { return url.ParseQuery(r.URL.RawQuery) }
