package server_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"net"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/metadata"

	pb "limitary/api/limitary/v1"
	"limitary/internal/server"
)

// echoServer answers with the bytes it was sent, decoded and encoded once: what carrying a request costs without doing
// anything for it.
func echoServer(b *testing.B) *grpc.ClientConn {
	b.Helper()
	listener, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		b.Fatal(err)
	}
	s := grpc.NewServer(grpc.MaxRecvMsgSize(64 << 20))
	s.RegisterService(&grpc.ServiceDesc{ServiceName: "echo.Echo", HandlerType: (*any)(nil), Methods: []grpc.MethodDesc{{
		MethodName: "Echo",
		Handler: func(_ any, _ context.Context, decode func(any) error, _ grpc.UnaryServerInterceptor) (any, error) {
			in := new(pb.EvaluateBatchRequest)
			return in, decode(in)
		},
	}}}, struct{}{})
	go func() { _ = s.Serve(listener) }()
	b.Cleanup(s.Stop)
	conn, err := grpc.NewClient(listener.Addr().String(), grpc.WithTransportCredentials(insecure.NewCredentials()),
		grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(64<<20)))
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { _ = conn.Close() })
	return conn
}

// evaluations makes n series of 1,000 points each, in control, judged by the eight rules of nelson-1984.
func evaluations(n int) *pb.EvaluateBatchRequest {
	r := rand.New(rand.NewPCG(20261204, 4))
	zero, one := 0.0, 1.0
	in := &pb.EvaluateBatchRequest{}
	for range n {
		values := make([]float64, 1000)
		for i := range values {
			values[i] = r.NormFloat64()
		}
		in.Evaluations = append(in.Evaluations, &pb.Evaluation{
			Limits: &pb.Evaluation_Inline{Inline: &pb.InlineLimits{Location: &pb.TraceLimits{Centre: &zero, Sigma: &one, RuleSet: "nelson-1984"}}},
			Data:   &pb.Evaluation_Series{Series: &pb.Series{Values: values}},
		})
	}
	return in
}

// rate calls as fast as a number of callers can, for the calls given, and gives calls a second.
func rate(b *testing.B, calls, callers int, call func() error) float64 {
	b.Helper()
	var left atomic.Int64
	left.Store(int64(calls))
	var group sync.WaitGroup
	begin := time.Now()
	for range callers {
		group.Go(func() {
			for left.Add(-1) >= 0 {
				if err := call(); err != nil {
					b.Error(err)
					return
				}
			}
		})
	}
	group.Wait()
	return float64(calls) / time.Since(begin).Seconds()
}

// BenchmarkEvaluateBatch sets judged series beside an echo of the same bytes, in one run: "of_echo" is the rate of the
// first over that of the second. The service is whole, key look-up in the database, roles and log included.
func BenchmarkEvaluateBatch(b *testing.B) {
	for _, c := range []struct{ series, callers int }{{1, 1}, {1, 64}, {16, 16}} {
		b.Run(fmt.Sprintf("series=%d/callers=%d", c.series, c.callers), func(b *testing.B) {
			f := newFixture(b, server.Options{})
			echo := echoServer(b)
			in := evaluations(c.series)
			ctx := metadata.AppendToOutgoingContext(context.Background(), "authorization", "Bearer "+f.tokens["reader"])
			client := pb.NewEvaluationServiceClient(f.conn)
			judged := func() error { _, err := client.EvaluateBatch(ctx, in); return err }
			echoed := func() error { return echo.Invoke(ctx, "/echo.Echo/Echo", in, new(pb.EvaluateBatchRequest)) }
			rate(b, 20, c.callers, judged) // connections and caches are made before the clock runs
			rate(b, 20, c.callers, echoed)
			b.ResetTimer()
			// By turns, so that a noisy moment of the machine hits both.
			var ours, baseline float64
			const turns = 5
			for range turns {
				ours += rate(b, max(1, b.N/turns), c.callers, judged) / turns
				baseline += rate(b, max(1, b.N/turns), c.callers, echoed) / turns
			}
			b.ReportMetric(ours, "calls/s")
			b.ReportMetric(baseline, "echo/s")
			b.ReportMetric(ours/baseline, "of_echo")
		})
	}
}
