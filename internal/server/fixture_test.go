package server_test

import (
	"bytes"
	"context"
	"crypto/rand"
	"crypto/sha256"
	"log/slog"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	"limitary/internal/definition"
	"limitary/internal/pgtest"
	"limitary/internal/server"
	"limitary/internal/store"
	"limitary/service"
)

// fixture is a service on a database of its own, with a key for each principal a case may act as.
type fixture struct {
	db     *pgtest.Database
	store  *store.Store
	server *server.Server
	conn   *grpc.ClientConn
	tokens map[string]string
	log    *logBuffer
}

// logBuffer collects what the service logs.
type logBuffer struct {
	mu  sync.Mutex
	buf bytes.Buffer
}

func (b *logBuffer) Write(p []byte) (int, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.Write(p)
}

func (b *logBuffer) String() string {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.String()
}

// cast is who there is. One person has two roles; one key is limited to a label, one to a source.
var cast = []definition.Key{
	{Principal: "reader", Roles: []definition.Permission{definition.Reader}},
	{Principal: "poster", Roles: []definition.Permission{definition.Poster}},
	{Principal: "poster2", Roles: []definition.Permission{definition.Poster}},
	{Principal: "sourced", Roles: []definition.Permission{definition.Poster}, Sources: []string{"lims-a"}},
	{Principal: "author", Roles: []definition.Permission{definition.Author}},
	{Principal: "both", Roles: []definition.Permission{definition.Author, definition.Approver, definition.Poster}},
	{Principal: "approver", Roles: []definition.Permission{definition.Approver}},
	{Principal: "reviewer", Roles: []definition.Permission{definition.Reviewer}},
	{Principal: "admin", Roles: []definition.Permission{definition.Admin}},
	{Principal: "ostley", Roles: []definition.Permission{definition.Reader, definition.Author, definition.Admin}, Labels: map[string]string{"site": "ostley"}},
	{Principal: "revoked", Roles: []definition.Permission{definition.Reader}},
}

func newFixture(tb testing.TB, o server.Options) *fixture {
	tb.Helper()
	ctx := context.Background()
	f := &fixture{db: pgtest.New(tb), tokens: map[string]string{}, log: &logBuffer{}}
	o.HTTPAddress, o.GRPCAddress, o.Log = "127.0.0.1:0", "127.0.0.1:0", server.NewLog(f.log, slog.LevelInfo)
	var err error
	if f.store, err = store.Open(ctx, f.db.ServiceURL(), store.Options{}); err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(f.store.Close)
	f.makeKeys(tb)
	if f.server, err = server.New(f.store, o); err != nil {
		tb.Fatal(err)
	}
	running, cancel := context.WithCancel(ctx)
	ended := make(chan error, 1)
	go func() { ended <- f.server.Run(running) }()
	tb.Cleanup(func() {
		cancel()
		if err := <-ended; err != nil {
			tb.Error("the server ended with", err)
		}
	})
	f.conn, err = grpc.NewClient(f.server.GRPCAddress(), grpc.WithTransportCredentials(insecure.NewCredentials()),
		grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(64<<20), grpc.MaxCallSendMsgSize(64<<20)))
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() { _ = f.conn.Close() })
	return f
}

func (f *fixture) makeKeys(tb testing.TB) {
	tb.Helper()
	ctx, root := context.Background(), store.Actor{Principal: "fixture"}
	for _, k := range cast {
		id, token, hash, err := service.NewToken(rand.Reader)
		if err != nil {
			tb.Fatal(err)
		}
		k.ID, k.ExpiresAt = id, time.Now().Add(24*time.Hour).UTC().Truncate(time.Second)
		if _, _, err := f.store.CreateKey(ctx, root, onceOnly(id), k, hash); err != nil {
			tb.Fatal(err)
		}
		f.tokens[k.Principal] = token
		if k.Principal == "revoked" {
			if _, err := f.store.RevokeKey(ctx, root, onceOnly(id+"/revoke"), id); err != nil {
				tb.Fatal(err)
			}
		}
	}
	_, unknown, _, err := service.NewToken(rand.Reader)
	if err != nil {
		tb.Fatal(err)
	}
	f.tokens["unknown"], f.tokens["malformed"] = unknown, "lim_not_a_token"
}

func onceOnly(id string) store.Request {
	sum := sha256.Sum256([]byte(id))
	return store.Request{ID: id, Method: "fixture", Digest: sum[:]}
}
