package server

import (
	"context"
	"runtime"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/metadata"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
)

// slowConn answers GetChart with the chart's name and the number of the call, once it is let go.
type slowConn struct {
	grpc.ClientConnInterface
	mu      sync.Mutex
	calls   []string
	begun   chan struct{}
	release chan struct{}
}

func (c *slowConn) Invoke(ctx context.Context, method string, args, reply any, _ ...grpc.CallOption) error {
	sent, _ := metadata.FromOutgoingContext(ctx)
	c.mu.Lock()
	c.calls = append(c.calls, method+" "+sent.Get("authorization")[0])
	c.mu.Unlock()
	c.begun <- struct{}{}
	<-c.release
	if in, ok := args.(*pb.GetChartRequest); ok {
		reply.(*pb.GetChartResponse).Chart = &pb.Chart{Name: in.Name}
	}
	return nil
}

func asKey(ctx context.Context, key string) context.Context {
	return metadata.AppendToOutgoingContext(ctx, "authorization", "Bearer "+key)
}

// TestTheSameReadAtTheSameTimeIsMadeOnce has one caller's read in work, lets a second wait for the next one, and then tells by the
// waiting read itself that a third would share it. Posts side by side stay two.
func TestTheSameReadAtTheSameTimeIsMadeOnce(t *testing.T) {
	slow := &slowConn{begun: make(chan struct{}, 100), release: make(chan struct{})}
	c := newReadConn(slow, time.Minute)
	in := &pb.GetChartRequest{Name: "nitrate"}
	var group sync.WaitGroup
	ask := func() {
		group.Go(func() {
			got, err := pb.NewChartServiceClient(c).GetChart(asKey(t.Context(), "a"), in)
			if err != nil || got.Chart.GetName() != "nitrate" {
				t.Errorf("got %v, %v", got, err)
			}
		})
	}
	waiting := func() *lookup[proto.Message] {
		key, _ := readKey(asKey(t.Context(), "a"), pb.ChartService_GetChart_FullMethodName, in)
		c.reads.mu.Lock()
		defer c.reads.mu.Unlock()
		return c.reads.groups[key].next
	}
	ask()
	<-slow.begun
	ask()
	for waiting() == nil {
		runtime.Gosched()
	}
	for range 20 {
		ask()
	}
	for range 2 {
		group.Go(func() {
			_, _ = pb.NewEvaluationServiceClient(c).PostResults(asKey(t.Context(), "a"), &pb.PostResultsRequest{})
		})
		<-slow.begun
	}
	if n := len(slow.calls); n != 3 {
		t.Errorf("%d calls are in work, want the one read and both posts: %v", n, slow.calls)
	}
	close(slow.release)
	group.Wait()
}

func TestReadsAreToldApart(t *testing.T) {
	get, list := pb.ChartService_GetChart_FullMethodName, pb.ChartService_ListTracks_FullMethodName
	a := asKey(t.Context(), "a")
	same, shared := readKey(a, get, &pb.GetChartRequest{Name: "nitrate"})
	if again, ok := readKey(a, get, &pb.GetChartRequest{Name: "nitrate"}); !shared || !ok || again != same {
		t.Error("the same read is not shared")
	}
	for name, other := range map[string]func() (string, bool){
		"another key": func() (string, bool) {
			return readKey(asKey(t.Context(), "b"), get, &pb.GetChartRequest{Name: "nitrate"})
		},
		"another request": func() (string, bool) { return readKey(a, get, &pb.GetChartRequest{Name: "lead"}) },
		"another method":  func() (string, bool) { return readKey(a, list, &pb.ListTracksRequest{Chart: "nitrate"}) },
	} {
		if key, ok := other(); !ok || key == same {
			t.Errorf("%s: %t", name, ok)
		}
	}
	for name, none := range map[string]func() (string, bool){
		"a write": func() (string, bool) {
			return readKey(a, pb.EvaluationService_PostResults_FullMethodName, &pb.PostResultsRequest{})
		},
		"nobody": func() (string, bool) { return readKey(t.Context(), get, &pb.GetChartRequest{Name: "nitrate"}) },
		"a long one": func() (string, bool) {
			return readKey(a, get, &pb.GetChartRequest{Name: strings.Repeat("x", sharedBytesMax+1)})
		},
		"no method":   func() (string, bool) { return readKey(a, "/none", &pb.GetChartRequest{}) },
		"no protobuf": func() (string, bool) { return readKey(a, get, "text") },
	} {
		if _, ok := none(); ok {
			t.Errorf("%s is shared", name)
		}
	}
}
