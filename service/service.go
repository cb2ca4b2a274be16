// Package service implements the services of the contract over gRPC: it turns messages into domain values, checks what
// can be checked before the database is asked, calls store, limits and judge, and turns the answers back.
//
// Each family of methods has its own file, and so has each conversion between wire and domain. Methods return domain
// errors; ToStatus, which the server applies once for all of them, is the one place where an error becomes a code, a
// reason and a text. Field paths in errors are those of the contract, in its own spelling ("results[3].measured_at").
//
// Nothing here keeps state between calls.
package service

import (
	"context"
	"crypto/sha256"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// Register adds all services to a gRPC server. Now is the clock that expiry times of new keys are checked against;
// everything recorded is timed by the database.
func Register(r grpc.ServiceRegistrar, s *store.Store, now func() time.Time) {
	pb.RegisterRuleServiceServer(r, &RuleService{})
	pb.RegisterChartServiceServer(r, &ChartService{store: s})
	pb.RegisterLimitServiceServer(r, &LimitService{store: s})
	pb.RegisterEvaluationServiceServer(r, &EvaluationService{store: s})
	pb.RegisterSignalServiceServer(r, &SignalService{store: s})
	pb.RegisterKeyServiceServer(r, &KeyService{store: s, now: now})
}

type actorKey struct{}

// WithActor says who makes the calls under the context.
func WithActor(ctx context.Context, a store.Actor) context.Context {
	return context.WithValue(ctx, actorKey{}, a)
}

// ActorFrom gives who makes the call; ok is false where nobody was authenticated.
func ActorFrom(ctx context.Context) (a store.Actor, ok bool) {
	a, ok = ctx.Value(actorKey{}).(store.Actor)
	return a, ok
}

// actor gives who makes the call. The interceptor lets no call through without one; a call past it sees nothing.
func actor(ctx context.Context) (store.Actor, error) {
	a, ok := ActorFrom(ctx)
	if !ok {
		return a, definition.Refuse(definition.Unauthenticated, "the call carries no key")
	}
	return a, nil
}

// request makes a write safe to repeat. The digest covers the message as it was understood, so the same request over
// either transport is the same.
func request(ctx context.Context, id string, m proto.Message) (store.Request, error) {
	if err := definition.CheckText("request_id", id, 1, RequestIDBytesMax); err != nil {
		return store.Request{}, err
	}
	b, err := proto.MarshalOptions{Deterministic: true}.Marshal(m)
	if err != nil {
		return store.Request{}, err
	}
	sum := sha256.Sum256(b)
	method, _ := grpc.Method(ctx)
	if method == "" {
		method = string(m.ProtoReflect().Descriptor().FullName())
	}
	return store.Request{ID: id, Method: method, Digest: sum[:]}, nil
}

// writer gives who asks and the repeatable request in one go.
func writer(ctx context.Context, id string, m proto.Message) (store.Actor, store.Request, error) {
	a, err := actor(ctx)
	if err != nil {
		return a, store.Request{}, err
	}
	r, err := request(ctx, id, m)
	return a, r, err
}
