package demo_test

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"

	"limitary/internal/definition"
	"limitary/internal/demo"
	"limitary/internal/pgtest"
	"limitary/internal/server"
	"limitary/internal/store"
	"limitary/service"
)

func TestMain(m *testing.M) {
	pgtest.Main(m, func(ctx context.Context, url string) error {
		_, err := store.Migrate(ctx, url)
		return err
	})
}

// served is a service over a database of its own, with the keys of the demo.
type served struct {
	store  *store.Store
	conn   *grpc.ClientConn
	tokens demo.Tokens
}

// serve starts a whole service, listeners and all, on a fresh database.
func serve(t *testing.T) *served {
	t.Helper()
	s, err := store.Open(t.Context(), pgtest.New(t).ServiceURL(), store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(s.Close)
	srv, err := server.New(s, server.Options{HTTPAddress: "127.0.0.1:0", GRPCAddress: "127.0.0.1:0"})
	if err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- srv.Run(ctx) }()
	t.Cleanup(func() {
		stop()
		if err := <-ended; err != nil {
			t.Errorf("the server ended with %v", err)
		}
	})
	conn, err := grpc.NewClient(srv.GRPCAddress(), grpc.WithTransportCredentials(insecure.NewCredentials()))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	return &served{store: s, conn: conn, tokens: demo.Tokens{
		Admin: makeKey(t, s, definition.Admin), Author: makeKey(t, s, definition.Author), Approver: makeKey(t, s, definition.Approver),
		Poster: makeKey(t, s, definition.Poster), Reviewer: makeKey(t, s, definition.Reviewer),
	}}
}

// makeKey makes a key of a principal named for its role.
func makeKey(t *testing.T, s *store.Store, role definition.Permission) string {
	t.Helper()
	id, token, hash, err := service.NewToken(rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	sum := sha256.Sum256([]byte(id))
	k := definition.Key{ID: id, Principal: "demo-" + string(role), Roles: []definition.Permission{role}, ExpiresAt: time.Now().Add(time.Hour)}
	_, _, err = s.CreateKey(t.Context(), store.Actor{Principal: "test"}, store.Request{ID: id, Method: "test", Digest: sum[:]}, k, hash)
	if err != nil {
		t.Fatal(err)
	}
	return token
}

// base is the moment the demo is loaded at. It lies before any clock that a test may run under, so that nothing is in the
// future.
var base = time.Date(2024, time.May, 6, 9, 30, 0, 0, time.UTC)

// as makes the calls under a context with a key.
func as(t *testing.T, token string) context.Context {
	return metadata.AppendToOutgoingContext(t.Context(), "authorization", "Bearer "+token)
}
