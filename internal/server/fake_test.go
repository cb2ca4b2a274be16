package server

import (
	"bytes"
	"context"
	"errors"
	"log/slog"
	"net/http"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/service"
)

// These tests are about the server alone: what stands behind it is a service that does what the test says.

// fakeRules answers ListRules as the test says.
type fakeRules struct {
	pb.UnimplementedRuleServiceServer
	answer func(context.Context) error
}

func (f *fakeRules) ListRules(ctx context.Context, _ *pb.ListRulesRequest) (*pb.ListRulesResponse, error) {
	if err := f.answer(ctx); err != nil {
		return nil, err
	}
	return &pb.ListRulesResponse{Judges: []int32{1}}, nil
}

type harness struct {
	*Server
	token  string
	log    *safeBuffer
	client pb.RuleServiceClient
	conn   *grpc.ClientConn
	ended  chan error
}

type safeBuffer struct {
	mu  sync.Mutex
	buf bytes.Buffer
}

func (b *safeBuffer) Write(p []byte) (int, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.Write(p)
}

func (b *safeBuffer) String() string {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.String()
}

// start runs a server whose ListRules does what answer does and whose readiness is ready.
func start(t *testing.T, o Options, answer, ready func(context.Context) error) *harness {
	t.Helper()
	id, token, _, err := service.NewToken(bytes.NewReader(make([]byte, 64)))
	if err != nil {
		t.Fatal(err)
	}
	h := &harness{token: token, log: &safeBuffer{}, ended: make(chan error, 1)}
	o.HTTPAddress, o.GRPCAddress, o.Log = "127.0.0.1:0", "127.0.0.1:0", NewLog(h.log, slog.LevelDebug)
	b := backend{
		register: func(r grpc.ServiceRegistrar) { pb.RegisterRuleServiceServer(r, &fakeRules{answer: answer}) },
		key: func(_ context.Context, given string, _ []byte) (definition.Key, error) {
			if given != id {
				return definition.Key{}, definition.Refuse(definition.Unauthenticated, "no such key")
			}
			return definition.Key{ID: id, Principal: "someone", Roles: []definition.Permission{definition.Reader}}, nil
		},
		ready: ready,
	}
	if h.Server, err = newServer(b, o); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	go func() { h.ended <- h.Run(ctx) }()
	t.Cleanup(func() {
		cancel()
		if err := <-h.ended; err != nil {
			t.Error("Run ended with", err)
		}
	})
	if h.conn, err = grpc.NewClient(h.GRPCAddress(), grpc.WithTransportCredentials(insecure.NewCredentials())); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = h.conn.Close() })
	h.client = pb.NewRuleServiceClient(h.conn)
	return h
}

func fine(context.Context) error { return nil }

var errNotReady = errors.New("the schema is stale")

func (h *harness) authorized(ctx context.Context) context.Context {
	return metadata.AppendToOutgoingContext(ctx, "authorization", "Bearer "+h.token)
}

// get asks over HTTP; the body of the answer is given as text.
func (h *harness) get(t *testing.T, path string, headers ...string) (*http.Response, string) {
	t.Helper()
	req, err := http.NewRequestWithContext(context.Background(), http.MethodGet, "http://"+h.HTTPAddress()+path, http.NoBody)
	if err != nil {
		t.Fatal(err)
	}
	req.Header.Set("Authorization", "Bearer "+h.token)
	for i := 0; i < len(headers); i += 2 {
		req.Header.Set(headers[i], headers[i+1])
	}
	client := http.Client{Transport: &http.Transport{DisableKeepAlives: true}, Timeout: time.Minute}
	resp, err := client.Do(req)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	var body bytes.Buffer
	if _, err := body.ReadFrom(resp.Body); err != nil {
		t.Fatal(err)
	}
	return resp, body.String()
}
