package server

import (
	"context"
	"crypto/rand"
	"encoding/hex"
	"fmt"
	"log/slog"
	"regexp"
	"runtime/debug"
	"strings"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/peer"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/protoadapt"
	"google.golang.org/protobuf/types/known/durationpb"

	"limitary/internal/definition"
	"limitary/service"
)

// guard holds the interceptors and what they share.
type guard struct {
	log                 *slog.Logger
	now                 func() time.Time
	timeout, timeoutMax time.Duration
	slots               chan struct{}
	keys                *keyring
	unary               []grpc.UnaryServerInterceptor
}

func newGuard(o Options, find keyFinder) *guard {
	g := &guard{log: o.Log, now: o.Now, timeout: o.Timeout, timeoutMax: o.TimeoutMax, slots: make(chan struct{}, o.CallsMax), keys: newKeyring(find)}
	g.unary = []grpc.UnaryServerInterceptor{g.observe, recoverPanic, g.admit, g.bound, g.authenticate}
	return g
}

// call is what the log says of one call; interceptors further in fill it.
type call struct {
	id, principal, key string
}

type callKey struct{}

func callFrom(ctx context.Context) *call {
	c, _ := ctx.Value(callKey{}).(*call)
	return c
}

const (
	requestIDHeader = "x-request-id"
	faceHeader      = "x-limitary-face"
)

var requestIDForm = regexp.MustCompile(`^[A-Za-z0-9._-]{1,64}$`)

// requestID takes the caller's id where it is one that can go into a log, else makes one.
func requestID(given string) string {
	if requestIDForm.MatchString(given) {
		return given
	}
	var b [12]byte
	_, _ = rand.Read(b[:]) // never fails
	return hex.EncodeToString(b[:])
}

func header(ctx context.Context, name string) string {
	if v := metadata.ValueFromIncomingContext(ctx, name); len(v) > 0 {
		return v[0]
	}
	return ""
}

// observe gives the call its id, turns what comes back into a status and logs it.
func (g *guard) observe(ctx context.Context, req any, info *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (any, error) {
	begin := g.now()
	c := &call{id: requestID(header(ctx, requestIDHeader))}
	ctx = context.WithValue(ctx, callKey{}, c)
	_ = grpc.SetHeader(ctx, metadata.Pairs(requestIDHeader, c.id)) // fails only once the answer has begun
	resp, err := handler(ctx, req)
	s, private := service.ToStatus(err, c.id)
	g.record(ctx, c, info.FullMethod, s, private, g.now().Sub(begin))
	if err != nil {
		return nil, s.Err()
	}
	return resp, nil
}

func (g *guard) record(ctx context.Context, c *call, method string, s *status.Status, private error, took time.Duration) {
	level := slog.LevelInfo
	attrs := []slog.Attr{
		slog.String("request_id", c.id), slog.String("method", method), slog.String("code", s.Code().String()),
		slog.Float64("took_ms", float64(took.Microseconds())/1000),
	}
	if face := header(ctx, faceHeader); face != "" {
		attrs = append(attrs, slog.String("face", face))
	} else if p, ok := peer.FromContext(ctx); ok && p.Addr != nil {
		attrs = append(attrs, slog.String("face", "grpc"), slog.String("peer", p.Addr.String()))
	}
	if c.principal != "" {
		attrs = append(attrs, slog.String("principal", c.principal), slog.String("key", c.key))
	}
	if s.Code() != codes.OK {
		attrs = append(attrs, slog.String("reason", service.ReasonOf(s)), slog.String("text", s.Message()))
	}
	if private != nil {
		attrs = append(attrs, slog.String("cause", private.Error()))
		if s.Code() == codes.Internal {
			level = slog.LevelError
		}
	}
	if strings.HasPrefix(method, "/grpc.health.") && s.Code() == codes.OK {
		level = slog.LevelDebug
	}
	g.log.LogAttrs(ctx, level, "call", attrs...)
}

// recoverPanic turns a fault of the program into an error of one call.
func recoverPanic(ctx context.Context, req any, _ *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (resp any, err error) {
	defer func() {
		if p := recover(); p != nil {
			err = fmt.Errorf("panic: %v\n%s", p, debug.Stack())
		}
	}()
	return handler(ctx, req)
}

// retryAfter is what a caller turned away for want of room is asked to wait.
const retryAfter = time.Second

// admit refuses a call where too many are in work. Health is always answered.
func (g *guard) admit(ctx context.Context, req any, info *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (any, error) {
	if isOpen(info.FullMethod) {
		return handler(ctx, req)
	}
	select {
	case g.slots <- struct{}{}:
		defer func() { <-g.slots }()
		return handler(ctx, req)
	default:
		return nil, busy(cap(g.slots), callFrom(ctx).id).Err()
	}
}

// bound gives the call a deadline: its own, but not too far away.
func (g *guard) bound(ctx context.Context, req any, _ *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (any, error) {
	timeout := g.timeoutMax
	if _, has := ctx.Deadline(); !has {
		timeout = g.timeout
	}
	ctx, cancel := context.WithTimeout(ctx, timeout)
	defer cancel()
	return handler(ctx, req)
}

// authenticate finds who calls and whether the key allows it.
func (g *guard) authenticate(ctx context.Context, req any, info *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (any, error) {
	if isOpen(info.FullMethod) {
		return handler(ctx, req)
	}
	who, err := g.keys.actor(ctx, header(ctx, "authorization"))
	if err != nil {
		return nil, err
	}
	c := callFrom(ctx)
	c.principal, c.key = who.Principal, who.Key.ID
	if err := allow(info.FullMethod, who.Key); err != nil {
		return nil, err
	}
	return handler(service.WithActor(ctx, who), req)
}

// stream guards the streams there are: health and reflection, which need no key.
func (g *guard) stream(srv any, ss grpc.ServerStream, info *grpc.StreamServerInfo, handler grpc.StreamHandler) (err error) {
	if !isOpen(info.FullMethod) {
		return status.Error(codes.Unimplemented, "there is no such stream")
	}
	defer func() {
		if p := recover(); p != nil {
			g.log.LogAttrs(ss.Context(), slog.LevelError, "call", slog.String("method", info.FullMethod), slog.String("cause", fmt.Sprintf("panic: %v\n%s", p, debug.Stack())))
			err = status.Error(codes.Internal, "a fault of the service")
		}
	}()
	return handler(srv, ss)
}

// isOpen tells the methods that need no key: they show the contract and whether the service is there.
func isOpen(method string) bool {
	return strings.HasPrefix(method, "/grpc.health.v1.Health/") || strings.HasPrefix(method, "/grpc.reflection.")
}

func busy(most int, id string) *status.Status {
	s := status.Newf(codes.ResourceExhausted, "%d calls are in work, which is the limit; repeating this one later is safe", most)
	return withInfo(s, definition.Unavailable, id, &errdetails.RetryInfo{RetryDelay: durationpb.New(retryAfter)})
}

// withInfo gives a status of the server's own making the details that every refusal has.
func withInfo(s *status.Status, why definition.Reason, id string, more ...protoadapt.MessageV1) *status.Status {
	details := append([]protoadapt.MessageV1{
		&errdetails.ErrorInfo{Reason: "ERROR_REASON_" + string(why), Domain: service.Domain},
		&errdetails.RequestInfo{RequestId: id},
	}, more...)
	full, err := s.WithDetails(details...)
	if err != nil {
		return s // a status of OK, or a detail that cannot be encoded: there is none here
	}
	return full
}
