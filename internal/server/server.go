// Package server is everything around the services: listeners, interceptors, the REST gateway, health and the way down.
//
// There are two listeners. One speaks gRPC on its native transport. The other speaks HTTP: REST through the gateway, the
// OpenAPI document, spreadsheets under /sheet/, /healthz (the process lives) and /readyz (the database answers and has the schema of this build).
// The gateway calls the same services over a connection in memory, so that identity, limits, deadlines, logging and the
// error table act once for both faces.
//
// A call walks: request id, log, recovery, number in flight, deadline, key, role, service. Whatever a service returns
// becomes a status in one place, service.ToStatus; what must not be told is logged with the request id.
package server

import (
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"runtime"
	"sync"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials"
	"google.golang.org/grpc/experimental"
	"google.golang.org/grpc/keepalive"
	"google.golang.org/grpc/mem"
	"google.golang.org/grpc/reflection"
	"google.golang.org/grpc/test/bufconn"

	"limitary/internal/store"
	"limitary/service"
)

// Defaults of Options.
const (
	DefaultHTTPAddress = "127.0.0.1:7410"
	DefaultGRPCAddress = "127.0.0.1:7411"
	// DefaultBodyBytesMax holds a million values as JSON.
	DefaultBodyBytesMax = 32 << 20
	// DefaultCallsMax bounds the calls in work at once. More would only queue for the database's connections.
	DefaultCallsMax = 256
	// DefaultTimeout is for calls that bring no deadline of their own, DefaultTimeoutMax for those that bring a longer one.
	DefaultTimeout    = 30 * time.Second
	DefaultTimeoutMax = 5 * time.Minute
	// DefaultSheetRate and DefaultSheetBurst are how many sheet reads a second one key may do, and how many at once: a
	// workbook with 5,000 cells recalculates without waiting.
	DefaultSheetRate  = 200
	DefaultSheetBurst = 5000
	// DefaultDrain is how long calls in work may take to end once the server is told to stop.
	DefaultDrain = 20 * time.Second
)

// Options say where and how to serve. Zero values take the defaults.
type Options struct {
	HTTPAddress, GRPCAddress string
	// TLSCert and TLSKey are files in PEM form; both or neither. They serve both listeners.
	TLSCert, TLSKey string
	// BehindProxy says that something in front does TLS, so that listening beyond the machine without it is allowed.
	BehindProxy bool

	BodyBytesMax        int64
	CallsMax            int
	Timeout, TimeoutMax time.Duration
	Drain               time.Duration

	// SheetRate is in reads a second for each key, SheetBurst in reads. SheetCallsMax bounds the sheet reads in work, so that
	// many workbooks at once leave room for posting; by default half the processors, and at least 2.
	SheetRate, SheetBurst, SheetCallsMax int

	Log *slog.Logger
	Now func() time.Time
}

func (o *Options) fill() {
	set := func(at *time.Duration, d time.Duration) {
		if *at == 0 {
			*at = d
		}
	}
	set(&o.Timeout, DefaultTimeout)
	set(&o.TimeoutMax, DefaultTimeoutMax)
	set(&o.Drain, DefaultDrain)
	count := func(at *int, n int) {
		if *at == 0 {
			*at = n
		}
	}
	count(&o.SheetRate, DefaultSheetRate)
	count(&o.SheetBurst, DefaultSheetBurst)
	count(&o.SheetCallsMax, max(2, runtime.GOMAXPROCS(0)/2))
	count(&o.CallsMax, DefaultCallsMax)
	if o.HTTPAddress == "" {
		o.HTTPAddress = DefaultHTTPAddress
	}
	if o.GRPCAddress == "" {
		o.GRPCAddress = DefaultGRPCAddress
	}
	if o.BodyBytesMax == 0 {
		o.BodyBytesMax = DefaultBodyBytesMax
	}
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	if o.Now == nil {
		o.Now = time.Now
	}
}

// scheme is how callers reach the HTTP listener.
func (o *Options) scheme() string {
	if o.TLSCert != "" || o.BehindProxy {
		return "https"
	}
	return "http"
}

// Server is a running service. New makes its listeners, Run serves until its context ends.
type Server struct {
	options      Options
	httpListener net.Listener
	grpcListener net.Listener
	memory       *bufconn.Listener

	http *http.Server
	// native serves grpcListener, inner the gateway. They are two so that the gateway can finish while the outer one drains.
	native, inner *grpc.Server
	gateway       *grpc.ClientConn
	calls         *guard
	stopping      chan struct{}
	stop          sync.Once
}

// New listens on both addresses. Nothing is answered before Run.
func New(s *store.Store, o Options) (*Server, error) {
	o.fill()
	return newServer(backend{
		register: func(r grpc.ServiceRegistrar) { service.Register(r, s, o.Now) },
		key:      s.KeyBySecret,
		ready:    s.Ready,
	}, o)
}

// backend is what the server needs of the rest of the program.
type backend struct {
	register func(grpc.ServiceRegistrar)
	key      keyFinder
	ready    func(context.Context) error
}

func newServer(b backend, o Options) (*Server, error) {
	o.fill()
	secure, err := o.transport()
	if err != nil {
		return nil, err
	}
	s := &Server{options: o, memory: bufconn.Listen(memoryBytes), stopping: make(chan struct{})}
	s.calls = newGuard(o, b.key)
	if s.httpListener, err = listen(o.HTTPAddress, "http"); err != nil {
		return nil, err
	}
	if s.grpcListener, err = listen(o.GRPCAddress, "grpc"); err != nil {
		return nil, errors.Join(err, s.httpListener.Close())
	}
	health := newHealth(b.ready, s.stopping)
	s.native = s.newGRPC(b, health, o.BodyBytesMax, secure)
	s.inner = s.newGRPC(b, health, innerBytesMax, nil)
	if err := s.newHTTP(health, secure); err != nil {
		return nil, errors.Join(err, s.httpListener.Close(), s.grpcListener.Close())
	}
	return s, nil
}

const (
	// memoryBytes is the buffer of the connection in memory.
	memoryBytes = 1 << 20
	// innerBytesMax bounds messages between gateway and services: a short JSON number takes 8 bytes as a double.
	innerBytesMax = 256 << 20
	// streamsMax bounds the calls of one connection.
	streamsMax = 1000
	// keepaliveMin is how often clients may ask whether the server is there.
	keepaliveMin = 10 * time.Second
)

// buffers holds messages on their way in. A buffer is cleared whole before it is used again, so sizes between those that
// come by default spare much of that: a batch of a few series would else take a megabyte.
var buffers = mem.NewTieredBufferPool(256, 4<<10, 16<<10, 32<<10, 64<<10, 128<<10, 256<<10, 512<<10, 1<<20, 4<<20)

func (s *Server) newGRPC(b backend, h *health, bytesMax int64, secure *tls.Config) *grpc.Server {
	options := []grpc.ServerOption{
		grpc.ChainUnaryInterceptor(s.calls.unary...),
		grpc.ChainStreamInterceptor(s.calls.stream),
		grpc.MaxRecvMsgSize(int(bytesMax)),
		grpc.MaxConcurrentStreams(streamsMax),
		experimental.BufferPool(buffers),
		grpc.KeepaliveEnforcementPolicy(keepalive.EnforcementPolicy{MinTime: keepaliveMin, PermitWithoutStream: true}),
	}
	if secure != nil {
		options = append(options, grpc.Creds(credentials.NewTLS(secure)))
	}
	g := grpc.NewServer(options...)
	b.register(g)
	h.register(g)
	reflection.Register(g)
	return g
}

func listen(address, which string) (net.Listener, error) {
	l, err := net.Listen("tcp", address)
	if err != nil {
		return nil, fmt.Errorf("listening for %s on %s: %w", which, address, err)
	}
	return l, nil
}

// Check reports addresses that cannot be listened on with the TLS there is to be, without listening.
func (o Options) Check() error {
	o.fill()
	_, err := o.transport()
	return err
}

// transport checks that nothing travels beyond the machine in clear, unless a proxy is said to see to it.
func (o *Options) transport() (*tls.Config, error) {
	if (o.TLSCert == "") != (o.TLSKey == "") {
		return nil, errors.New("--tls-cert and --tls-key belong together: give both or neither")
	}
	if o.TLSCert != "" {
		pair, err := tls.LoadX509KeyPair(o.TLSCert, o.TLSKey)
		if err != nil {
			return nil, fmt.Errorf("certificate %s with key %s: %w", o.TLSCert, o.TLSKey, err)
		}
		return &tls.Config{Certificates: []tls.Certificate{pair}, MinVersion: tls.VersionTLS12}, nil
	}
	for _, address := range []string{o.HTTPAddress, o.GRPCAddress} {
		local, err := isLoopback(address)
		if err != nil {
			return nil, err
		}
		if !local && !o.BehindProxy {
			return nil, fmt.Errorf("address %s can be reached from other machines, where keys would travel in clear: "+
				"give --tls-cert and --tls-key, or --behind-proxy where a proxy in front does TLS", address)
		}
	}
	return nil, nil
}

func isLoopback(address string) (bool, error) {
	host, _, err := net.SplitHostPort(address)
	if err != nil {
		return false, fmt.Errorf("address %q: want HOST:PORT, such as %s", address, DefaultHTTPAddress)
	}
	ip := net.ParseIP(host)
	return host == "localhost" || ip != nil && ip.IsLoopback(), nil
}

// HTTPAddress and GRPCAddress are where the listeners really are.
func (s *Server) HTTPAddress() string { return s.httpListener.Addr().String() }

// GRPCAddress is where gRPC is served.
func (s *Server) GRPCAddress() string { return s.grpcListener.Addr().String() }

// Run serves until the context ends or a listener fails, then lets the calls in work end and cuts those that take longer
// than the drain allows.
func (s *Server) Run(ctx context.Context) error {
	failed := make(chan error, 3)
	serve := func(what string, f func() error) {
		go func() {
			if err := f(); err != nil && !errors.Is(err, http.ErrServerClosed) && !errors.Is(err, grpc.ErrServerStopped) {
				failed <- fmt.Errorf("serving %s: %w", what, err)
			}
		}()
	}
	serve("gateway", func() error { return s.inner.Serve(s.memory) })
	serve("grpc", func() error { return s.native.Serve(s.grpcListener) })
	serve("http", s.serveHTTP)
	var err error
	select {
	case <-ctx.Done():
	case <-s.stopping:
	case err = <-failed:
	}
	s.drain()
	return err
}

func (s *Server) serveHTTP() error {
	if s.http.TLSConfig != nil {
		return s.http.ServeTLS(s.httpListener, "", "")
	}
	return s.http.Serve(s.httpListener)
}

// drain stops accepting at once, waits for calls in work, and cuts what is left.
func (s *Server) drain() {
	s.Close()
	ctx, cancel := context.WithTimeout(context.Background(), s.options.Drain)
	defer cancel()
	var outer sync.WaitGroup
	outer.Go(func() {
		if s.http.Shutdown(ctx) != nil {
			_ = s.http.Close()
		}
	})
	outer.Go(func() { stopGRPC(ctx, s.native) })
	outer.Wait()
	stopGRPC(ctx, s.inner)
	_ = s.gateway.Close()
	_ = s.memory.Close()
	_ = s.httpListener.Close()
	_ = s.grpcListener.Close()
}

func stopGRPC(ctx context.Context, g *grpc.Server) {
	done := make(chan struct{})
	go func() { g.GracefulStop(); close(done) }()
	select {
	case <-done:
	case <-ctx.Done():
		g.Stop()
		<-done
	}
}

// Close tells Run to stop. Health answers "not ready" from now on.
func (s *Server) Close() { s.stop.Do(func() { close(s.stopping) }) }
