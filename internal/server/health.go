package server

import (
	"context"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/status"
)

const (
	// liveService is the name to ask for whether the process lives; every other known name asks whether it is ready.
	liveService = "live"
	// readyTimeout bounds the question to the database, watchInterval is how often a watcher's answer is looked at again.
	readyTimeout  = 3 * time.Second
	watchInterval = 5 * time.Second
)

// health answers whether the service is there. Live is the process itself; ready is the database with the schema of this
// build behind it, asked anew each time, and not being on the way down.
type health struct {
	healthpb.UnimplementedHealthServer
	ready    func(context.Context) error
	asks     *shared[struct{}, struct{}]
	stopping <-chan struct{}
	services map[string]bool
}

func newHealth(ready func(context.Context) error, stopping <-chan struct{}) *health {
	return &health{ready: ready, asks: newShared[struct{}, struct{}](readyTimeout), stopping: stopping, services: map[string]bool{"": true}}
}

// register adds the health service; the names of all services registered so far can be asked for.
func (h *health) register(g *grpc.Server) {
	for name := range g.GetServiceInfo() {
		h.services[name] = true
	}
	healthpb.RegisterHealthServer(g, h)
}

// isReady is nil where calls can be answered.
func (h *health) isReady(ctx context.Context) error {
	select {
	case <-h.stopping:
		return status.Error(codes.Unavailable, "the service is stopping")
	default:
	}
	_, err := h.asks.do(ctx, struct{}{}, func(ctx context.Context) (struct{}, error) { return struct{}{}, h.ready(ctx) })
	return err
}

func (h *health) status(ctx context.Context, name string) (healthpb.HealthCheckResponse_ServingStatus, bool) {
	switch {
	case name == liveService:
		return healthpb.HealthCheckResponse_SERVING, true
	case !h.services[name]:
		return healthpb.HealthCheckResponse_SERVICE_UNKNOWN, false
	case h.isReady(ctx) != nil:
		return healthpb.HealthCheckResponse_NOT_SERVING, true
	}
	return healthpb.HealthCheckResponse_SERVING, true
}

// Check answers for the service of a name: "" or any service for ready, "live" for live.
func (h *health) Check(ctx context.Context, in *healthpb.HealthCheckRequest) (*healthpb.HealthCheckResponse, error) {
	s, known := h.status(ctx, in.GetService())
	if !known {
		return nil, status.Errorf(codes.NotFound, "there is no service %q", in.GetService())
	}
	return &healthpb.HealthCheckResponse{Status: s}, nil
}

// Watch sends the status now and whenever it has changed.
func (h *health) Watch(in *healthpb.HealthCheckRequest, out grpc.ServerStreamingServer[healthpb.HealthCheckResponse]) error {
	tick := time.NewTicker(watchInterval)
	defer tick.Stop()
	last := healthpb.HealthCheckResponse_ServingStatus(-1)
	for {
		if s, _ := h.status(out.Context(), in.GetService()); s != last {
			if err := out.Send(&healthpb.HealthCheckResponse{Status: s}); err != nil {
				return err
			}
			last = s
		}
		select {
		case <-out.Context().Done():
			return out.Context().Err()
		case <-h.stopping:
			return out.Send(&healthpb.HealthCheckResponse{Status: healthpb.HealthCheckResponse_NOT_SERVING})
		case <-tick.C:
		}
	}
}
