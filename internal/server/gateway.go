package server

import (
	"context"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"strconv"
	"strings"

	"github.com/grpc-ecosystem/grpc-gateway/v2/runtime"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/protoadapt"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/service"
)

// dialMemory connects the gateway to the services. The passthrough scheme keeps the name resolver out.
func (s *Server) dialMemory() error {
	conn, err := grpc.NewClient("passthrough:///limitary",
		grpc.WithContextDialer(func(ctx context.Context, _ string) (net.Conn, error) { return s.memory.DialContext(ctx) }),
		grpc.WithTransportCredentials(insecure.NewCredentials()),
		grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(innerBytesMax), grpc.MaxCallSendMsgSize(innerBytesMax)),
		grpc.WithUnaryInterceptor(markReached))
	s.gateway = conn
	return err
}

// newGateway makes the REST face of all services.
func (s *Server) newGateway() (*runtime.ServeMux, error) {
	table, err := newQueryTable()
	if err != nil {
		return nil, err
	}
	mux := runtime.NewServeMux(
		runtime.WithMarshalerOption(runtime.MIMEWildcard, strictJSON{}),
		runtime.WithErrorHandler(s.writeError),
		runtime.WithRoutingErrorHandler(s.routingError),
		runtime.WithIncomingHeaderMatcher(incomingHeader),
		runtime.WithOutgoingHeaderMatcher(outgoingHeader),
		runtime.WithOutgoingTrailerMatcher(func(string) (string, bool) { return "", false }),
		runtime.WithMetadata(func(context.Context, *http.Request) metadata.MD { return metadata.Pairs(faceHeader, "rest") }),
		runtime.WithMiddlewares(s.checkQuery(table)),
		runtime.WithDisablePathLengthFallback(),
		runtime.WithDisableHTTPMethodOverride(),
		runtime.WithUnescapingMode(runtime.UnescapingModeAllCharacters))
	for _, register := range []func(context.Context, *runtime.ServeMux, *grpc.ClientConn) error{
		pb.RegisterRuleServiceHandler, pb.RegisterChartServiceHandler, pb.RegisterLimitServiceHandler,
		pb.RegisterEvaluationServiceHandler, pb.RegisterSignalServiceHandler, pb.RegisterKeyServiceHandler,
	} {
		if err := register(context.Background(), mux, s.gateway); err != nil {
			return nil, err
		}
	}
	return mux, nil
}

func incomingHeader(name string) (string, bool) {
	switch strings.ToLower(name) {
	case requestIDHeader: // Authorization is passed by the gateway itself
		return requestIDHeader, true
	}
	return "", false
}

func outgoingHeader(name string) (string, bool) {
	if name == requestIDHeader {
		return http.CanonicalHeaderKey(requestIDHeader), true
	}
	return "", false
}

// checkQuery refuses query parameters that a call does not have; the gateway would pass over them.
func (s *Server) checkQuery(table queryTable) runtime.Middleware {
	return func(next runtime.HandlerFunc) runtime.HandlerFunc {
		return func(w http.ResponseWriter, r *http.Request, params map[string]string) {
			if r.URL.RawQuery != "" {
				if err := s.queryProblem(table, r); err != nil {
					s.writeStatus(w, r, err)
					return
				}
			}
			next(w, r, params)
		}
	}
}

func (s *Server) queryProblem(table queryTable, r *http.Request) *status.Status {
	id := r.Header.Get(requestIDHeader)
	given, err := parseQuery(r)
	if err != nil {
		return withInfo(status.Newf(codes.InvalidArgument, "the query part of the address cannot be read: %v", err), definition.InvalidField, id)
	}
	pattern, _ := runtime.HTTPPattern(r.Context())
	name, known := table.unknown(r.Method, pattern.String(), given)
	if name == "" {
		return nil
	}
	text := "is no query parameter of this call, which has none"
	if len(known) > 0 {
		text = "is no query parameter of this call; it has " + strings.Join(known, ", ")
	}
	return withInfo(status.Newf(codes.InvalidArgument, "%s: %s", name, text), definition.InvalidField, id, violation(name, text))
}

func violation(field, text string) protoadapt.MessageV1 {
	return &errdetails.BadRequest{FieldViolations: []*errdetails.BadRequest_FieldViolation{
		{Field: field, Description: text, Reason: "ERROR_REASON_" + string(definition.InvalidField)},
	}}
}

// writeError answers with what a call, or the gateway before it, came to.
func (s *Server) writeError(_ context.Context, _ *runtime.ServeMux, _ runtime.Marshaler, w http.ResponseWriter, r *http.Request, err error) {
	st := status.Convert(err)
	if service.ReasonOf(st) == "" {
		st = s.complete(st, r)
	}
	s.writeStatus(w, r, st)
}

// complete gives a status made by gateway or transport the reason that every refusal has.
func (s *Server) complete(st *status.Status, r *http.Request) *status.Status {
	id := r.Header.Get(requestIDHeader)
	switch st.Code() {
	case codes.InvalidArgument:
		if field, problem := parameterProblem(st.Message()); field != "" {
			return withInfo(status.Newf(codes.InvalidArgument, "%s: %s", field, problem), definition.InvalidField, id, violation(field, problem))
		}
		if field := fieldInProblem(st.Message()); field != "" {
			return withInfo(st, definition.InvalidField, id, violation(field, st.Message()))
		}
		return withInfo(st, definition.InvalidField, id)
	case codes.NotFound, codes.Unimplemented:
		return withInfo(st, definition.NotFound, id)
	case codes.DeadlineExceeded, codes.Canceled:
		return withInfo(st, definition.Deadline, id)
	case codes.Unavailable:
		return withInfo(st, definition.Unavailable, id)
	case codes.ResourceExhausted:
		return withInfo(st, tooLarge, id)
	}
	s.options.Log.LogAttrs(r.Context(), slog.LevelError, "gateway", slog.String("request_id", id), slog.String("cause", st.String()))
	return withInfo(status.New(codes.Internal, "a fault of the service; its log tells more under request id "+id), definition.Internal, id)
}

// tooLarge is the reason of a message with too many bytes. Only the server knows it: the rest of the program sees what
// has come through.
const tooLarge definition.Reason = "TOO_LARGE"

// routingError answers where no call has the path, or none with the method.
func (s *Server) routingError(_ context.Context, _ *runtime.ServeMux, _ runtime.Marshaler, w http.ResponseWriter, r *http.Request, code int) {
	id := r.Header.Get(requestIDHeader)
	switch code {
	case http.StatusMethodNotAllowed:
		st := withInfo(status.Newf(codes.Unimplemented, "%s has no method %s", r.URL.Path, r.Method), definition.NotFound, id)
		s.writeStatusAs(w, r, st, code)
	case http.StatusNotFound:
		s.writeStatus(w, r, withInfo(status.Newf(codes.NotFound, "there is no %s; /openapi.json lists what there is", r.URL.Path), definition.NotFound, id))
	default:
		s.writeStatusAs(w, r, withInfo(status.Newf(codes.InvalidArgument, "the address cannot be read"), definition.InvalidField, id), code)
	}
}

func (s *Server) writeStatus(w http.ResponseWriter, r *http.Request, st *status.Status) {
	code := runtime.HTTPStatusFromCode(st.Code())
	if service.ReasonOf(st) == "ERROR_REASON_"+string(tooLarge) {
		code = http.StatusRequestEntityTooLarge
	}
	s.writeStatusAs(w, r, st, code)
}

// writeStatusAs writes a google.rpc.Status as JSON.
func (s *Server) writeStatusAs(w http.ResponseWriter, r *http.Request, st *status.Status, code int) {
	data, err := protojson.Marshal(st.Proto())
	if err != nil { // a detail of a type that is not linked in
		data = fmt.Appendf(nil, `{"code":%d,"message":%q}`, st.Code(), "the error could not be written")
	}
	h := w.Header()
	h.Set("Content-Type", "application/json")
	h.Set("Content-Length", strconv.Itoa(len(data)))
	h.Set(requestIDHeader, r.Header.Get(requestIDHeader))
	switch st.Code() {
	case codes.Unauthenticated:
		h.Set("WWW-Authenticate", `Bearer realm="limitary"`)
	case codes.ResourceExhausted, codes.Unavailable:
		if code != http.StatusRequestEntityTooLarge {
			h.Set("Retry-After", strconv.Itoa(int(retryAfter.Seconds())))
		}
	}
	w.WriteHeader(code)
	_, _ = w.Write(data)
	if reached, ok := r.Context().Value(reachedKey{}).(*bool); ok && !*reached {
		s.options.Log.LogAttrs(r.Context(), slog.LevelInfo, "refused", slog.String("request_id", r.Header.Get(requestIDHeader)),
			slog.String("method", r.Method), slog.String("path", r.URL.Path), slog.String("code", st.Code().String()),
			slog.String("reason", service.ReasonOf(st)), slog.String("text", st.Message()), slog.String("peer", r.RemoteAddr))
	}
}
