package server

import (
	"context"
	"errors"
	"net"
	"net/http"
	"regexp"
	"runtime"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/reflect/protoregistry"

	pb "limitary/api/limitary/v1"
	"limitary/service"
)

func wantStatus(t *testing.T, what string, err error, code codes.Code, reason string) *status.Status {
	t.Helper()
	s := status.Convert(err)
	if s.Code() != code || service.ReasonOf(s) != reason {
		t.Errorf("%s: got %s %q (%s), want %s %q", what, s.Code(), service.ReasonOf(s), s.Message(), code, reason)
	}
	return s
}

func TestEveryMethodSaysWhoMayCallIt(t *testing.T) {
	found := map[string]bool{}
	protoregistry.GlobalFiles.RangeFilesByPackage("limitary.v1", func(f protoreflect.FileDescriptor) bool {
		for i := range f.Services().Len() {
			s := f.Services().Get(i)
			for j := range s.Methods().Len() {
				name := "/" + string(s.FullName()) + "/" + string(s.Methods().Get(j).Name())
				found[name] = true
				if _, known := permissions[name]; !known {
					t.Errorf("nobody has said who may call %s", name)
				}
			}
		}
		return true
	})
	for name := range permissions {
		if !found[name] {
			t.Errorf("%s is in the table and not in the contract", name)
		}
	}
	if len(found) == 0 {
		t.Error("the contract has no methods")
	}
}

func TestAFaultIsToldInGeneralWordsAndLogged(t *testing.T) {
	for name, answer := range map[string]func(context.Context) error{
		"panic": func(context.Context) error { panic("table keys at 10.0.0.7") },
		"error": func(context.Context) error { return errors.New("table keys at 10.0.0.7") },
	} {
		t.Run(name, func(t *testing.T) {
			h := start(t, Options{}, answer, fine)
			ctx := metadata.AppendToOutgoingContext(h.authorized(context.Background()), requestIDHeader, "my-own-id.1")
			_, err := h.client.ListRules(ctx, &pb.ListRulesRequest{})
			s := wantStatus(t, "grpc", err, codes.Internal, "ERROR_REASON_INTERNAL")
			if strings.Contains(s.String(), "10.0.0.7") || !strings.Contains(s.Message(), "my-own-id.1") {
				t.Errorf("got %q, want the request id and not the cause", s.Message())
			}
			resp, body := h.get(t, "/v1/rules", requestIDHeader, "my-own-id.2")
			if resp.StatusCode != http.StatusInternalServerError || strings.Contains(body, "10.0.0.7") || resp.Header.Get(requestIDHeader) != "my-own-id.2" {
				t.Errorf("got %d, id %q: %s", resp.StatusCode, resp.Header.Get(requestIDHeader), body)
			}
			for _, id := range []string{"my-own-id.1", "my-own-id.2"} {
				if !regexp.MustCompile(`"level":"ERROR".*` + id + `.*10\.0\.0\.7`).MatchString(h.log.String()) {
					t.Errorf("the log does not tell the cause under %s:\n%s", id, h.log)
				}
			}
		})
	}
}

func TestRequestIDsThatAreNoneAreReplaced(t *testing.T) {
	h := start(t, Options{}, fine, fine)
	for _, given := range []string{"", "two words", strings.Repeat("x", 65), `"},{"`} {
		var headers metadata.MD
		_, err := h.client.ListRules(metadata.AppendToOutgoingContext(h.authorized(context.Background()), requestIDHeader, given), &pb.ListRulesRequest{}, grpc.Header(&headers))
		if err != nil {
			t.Fatal(err)
		}
		if got := headers.Get(requestIDHeader); len(got) != 1 || got[0] == given || !requestIDForm.MatchString(got[0]) {
			t.Errorf("%q: got the ids %q", given, got)
		}
	}
}

func TestTooManyCallsAtOnceAreTurnedAway(t *testing.T) {
	entered, release := make(chan struct{}), make(chan struct{})
	h := start(t, Options{CallsMax: 1}, func(context.Context) error { entered <- struct{}{}; <-release; return nil }, fine)
	first := make(chan error, 1)
	go func() {
		_, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{})
		first <- err
	}()
	<-entered
	_, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{})
	wantStatus(t, "grpc", err, codes.ResourceExhausted, "ERROR_REASON_UNAVAILABLE")
	resp, body := h.get(t, "/v1/rules")
	if resp.StatusCode != http.StatusTooManyRequests || resp.Header.Get("Retry-After") == "" || !strings.Contains(body, "ERROR_REASON_UNAVAILABLE") {
		t.Errorf("rest: got %d, Retry-After %q: %s", resp.StatusCode, resp.Header.Get("Retry-After"), body)
	}
	if _, err := healthpb.NewHealthClient(h.conn).Check(context.Background(), &healthpb.HealthCheckRequest{}); err != nil {
		t.Error("health is not answered:", err)
	}
	close(release)
	if err := <-first; err != nil {
		t.Error("the first call:", err)
	}
	go func() { <-entered }()
	if _, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{}); err != nil {
		t.Error("there is room again, and the call is refused:", err)
	}
}

func TestDeadlines(t *testing.T) {
	t.Run("a call that brings none gets one", func(t *testing.T) {
		h := start(t, Options{Timeout: time.Millisecond}, func(ctx context.Context) error { <-ctx.Done(); return ctx.Err() }, fine)
		_, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{})
		wantStatus(t, "grpc", err, codes.DeadlineExceeded, "ERROR_REASON_DEADLINE")
		if resp, body := h.get(t, "/v1/rules"); resp.StatusCode != http.StatusGatewayTimeout || !strings.Contains(body, "ERROR_REASON_DEADLINE") {
			t.Errorf("rest: got %d: %s", resp.StatusCode, body)
		}
	})
	t.Run("one too far away is brought nearer", func(t *testing.T) {
		left := make(chan time.Duration, 1)
		h := start(t, Options{TimeoutMax: time.Minute}, func(ctx context.Context) error {
			at, _ := ctx.Deadline()
			left <- time.Until(at)
			return nil
		}, fine)
		ctx, cancel := context.WithTimeout(h.authorized(context.Background()), 24*time.Hour)
		defer cancel()
		if _, err := h.client.ListRules(ctx, &pb.ListRulesRequest{}); err != nil {
			t.Fatal(err)
		}
		if got := <-left; got > time.Minute {
			t.Errorf("got %v left, want a minute at most", got)
		}
	})
}

func TestStoppingLetsCallsInWorkEnd(t *testing.T) {
	entered, release := make(chan struct{}, 2), make(chan struct{})
	h := start(t, Options{Drain: time.Minute}, func(context.Context) error { entered <- struct{}{}; <-release; return nil }, fine)
	overGRPC, overREST := make(chan error, 1), make(chan int, 1)
	go func() {
		_, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{})
		overGRPC <- err
	}()
	<-entered
	go func() { resp, _ := h.get(t, "/v1/rules"); overREST <- resp.StatusCode }()
	<-entered
	h.Close()
	for _, address := range []string{h.HTTPAddress(), h.GRPCAddress()} { // nobody new is let in
		for {
			conn, err := net.Dial("tcp", address)
			if err != nil {
				break
			}
			_ = conn.Close()
			runtime.Gosched()
		}
	}
	close(release)
	if err := <-overGRPC; err != nil {
		t.Error("the gRPC call in work:", err)
	}
	if code := <-overREST; code != http.StatusOK {
		t.Error("the REST call in work got", code)
	}
	err := <-h.ended
	h.ended <- err
	if err != nil {
		t.Error("Run ended with", err)
	}
}

func TestStoppingCutsCallsThatDoNotEnd(t *testing.T) {
	entered := make(chan struct{}, 1)
	h := start(t, Options{Drain: time.Millisecond}, func(ctx context.Context) error { entered <- struct{}{}; <-ctx.Done(); return ctx.Err() }, fine)
	call := make(chan error, 1)
	go func() {
		_, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{})
		call <- err
	}()
	<-entered
	h.Close()
	if err := <-call; err == nil {
		t.Error("the call was answered")
	}
	h.ended <- <-h.ended
}

func TestHealthTellsLiveFromReady(t *testing.T) {
	for name, c := range map[string]struct {
		ready    func(context.Context) error
		code     int
		ordinary healthpb.HealthCheckResponse_ServingStatus
	}{
		"ready":     {fine, http.StatusOK, healthpb.HealthCheckResponse_SERVING},
		"not ready": {func(context.Context) error { return errNotReady }, http.StatusServiceUnavailable, healthpb.HealthCheckResponse_NOT_SERVING},
	} {
		t.Run(name, func(t *testing.T) {
			h := start(t, Options{}, fine, c.ready)
			if resp, body := h.get(t, "/healthz"); resp.StatusCode != http.StatusOK || body != "live\n" {
				t.Errorf("/healthz: got %d %q", resp.StatusCode, body)
			}
			if resp, body := h.get(t, "/readyz"); resp.StatusCode != c.code || strings.Contains(body, "schema") {
				t.Errorf("/readyz: got %d %q, want %d and no cause", resp.StatusCode, body, c.code)
			}
			client := healthpb.NewHealthClient(h.conn)
			for service, want := range map[string]healthpb.HealthCheckResponse_ServingStatus{
				"": c.ordinary, "limitary.v1.RuleService": c.ordinary, "live": healthpb.HealthCheckResponse_SERVING,
			} {
				got, err := client.Check(context.Background(), &healthpb.HealthCheckRequest{Service: service})
				if err != nil || got.Status != want {
					t.Errorf("%q: got %v %v, want %v", service, got.GetStatus(), err, want)
				}
			}
			if _, err := client.Check(context.Background(), &healthpb.HealthCheckRequest{Service: "other"}); status.Code(err) != codes.NotFound {
				t.Errorf("an unknown service: got %v", err)
			}
			watch, err := client.Watch(context.Background(), &healthpb.HealthCheckRequest{})
			if err != nil {
				t.Fatal(err)
			}
			if got, err := watch.Recv(); err != nil || got.Status != c.ordinary {
				t.Errorf("watch: got %v %v, want %v", got.GetStatus(), err, c.ordinary)
			}
			h.Close()
			if c.ordinary == healthpb.HealthCheckResponse_SERVING {
				if got, err := watch.Recv(); err != nil || got.Status != healthpb.HealthCheckResponse_NOT_SERVING {
					t.Errorf("on the way down the watch got %v %v", got.GetStatus(), err)
				}
			}
		})
	}
}
