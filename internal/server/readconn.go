package server

import (
	"context"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/metadata"
	"google.golang.org/protobuf/proto"
)

// sharedBytesMax bounds the requests that are compared with others: those of reads are small.
const sharedBytesMax = 1 << 10

// readConn is a connection on which the same read by the same key, asked for at the same time, is made once: the cells of a
// workbook ask for the numbers of few charts again and again. Nobody gets an answer that was asked for before they came.
type readConn struct {
	grpc.ClientConnInterface
	reads *shared[string, proto.Message]
}

func newReadConn(conn grpc.ClientConnInterface, timeout time.Duration) *readConn {
	return &readConn{conn, newShared[string, proto.Message](timeout)}
}

// Invoke implements grpc.ClientConnInterface.
func (c *readConn) Invoke(ctx context.Context, method string, args, reply any, options ...grpc.CallOption) error {
	key, same := readKey(ctx, method, args)
	into, ok := reply.(proto.Message)
	if !same || !ok {
		return c.ClientConnInterface.Invoke(ctx, method, args, reply, options...)
	}
	got, err := c.reads.do(ctx, key, func(found context.Context) (proto.Message, error) {
		out := into.ProtoReflect().New().Interface()
		sent, _ := metadata.FromOutgoingContext(ctx)
		return out, c.ClientConnInterface.Invoke(metadata.NewOutgoingContext(found, sent), method, args, out, options...)
	})
	if reached, ok := ctx.Value(reachedKey{}).(*bool); ok {
		*reached = true
	}
	if err == nil {
		proto.Merge(into, got)
	}
	return err
}

// readKey tells reads apart by method, key and request. A method that needs no role only reads.
func readKey(ctx context.Context, method string, args any) (string, bool) {
	roles, known := permissions[method]
	m, ok := args.(proto.Message)
	if !known || len(roles) > 0 || !ok || proto.Size(m) > sharedBytesMax {
		return "", false
	}
	data, err := proto.MarshalOptions{Deterministic: true}.Marshal(m)
	sent, _ := metadata.FromOutgoingContext(ctx)
	who := sent.Get("authorization")
	if err != nil || len(who) != 1 {
		return "", false
	}
	return method + "\x00" + who[0] + "\x00" + string(data), true
}
