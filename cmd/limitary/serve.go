package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"time"

	"limitary/internal/server"
	"limitary/internal/store"
)

const serveAbout = `Serves gRPC, REST with the OpenAPI document, and spreadsheets under /sheet/, until it is stopped. Without the
address of a database it runs a private, durable PostgreSQL of its own and keeps its schema up to date; a database given
by its address must have been brought up to date with "limitary migrate".

Listening beyond this machine needs --tls-cert and --tls-key, or --behind-proxy where a proxy in front does TLS.`

// serveFlags are what "serve" can be told.
type serveFlags struct {
	database databaseFlags
	server   server.Options
	logLevel string
	maxConns int
}

func (s *serveFlags) add(f *flagSet) {
	s.database.add(f)
	f.StringVar(&s.server.HTTPAddress, "http", server.DefaultHTTPAddress, "`ADDR` for HTTP")
	f.StringVar(&s.server.GRPCAddress, "grpc", server.DefaultGRPCAddress, "`ADDR` for gRPC")
	f.StringVar(&s.server.TLSCert, "tls-cert", "", "`FILE` with the certificate chain, PEM")
	f.StringVar(&s.server.TLSKey, "tls-key", "", "`FILE` with the certificate's key, PEM")
	f.BoolVar(&s.server.BehindProxy, "behind-proxy", false, "a proxy in front does TLS")
	f.IntVar(&s.server.CallsMax, "calls-max", server.DefaultCallsMax, "`N` calls in work at once; more are turned away")
	f.Int64Var(&s.server.BodyBytesMax, "body-bytes-max", server.DefaultBodyBytesMax, "`N` bytes of a request at most")
	f.DurationVar(&s.server.Timeout, "timeout", server.DefaultTimeout, "time for a call that brings no deadline")
	f.DurationVar(&s.server.TimeoutMax, "timeout-max", server.DefaultTimeoutMax, "time for a call that brings a longer deadline")
	f.DurationVar(&s.server.Drain, "drain", server.DefaultDrain, "time for calls in work when the service is stopped")
	f.IntVar(&s.server.SheetRate, "sheet-rate", server.DefaultSheetRate, "`N` sheet reads a second for each key, once the burst is used up")
	f.IntVar(&s.server.SheetBurst, "sheet-burst", server.DefaultSheetBurst, "`N` sheet reads at once for each key: cells of a workbook that recalculates")
	f.IntVar(&s.server.SheetCallsMax, "sheet-calls-max", 0, "`N` sheet reads in work at once, so that they leave room for posting (default half the processors, at least 2)")
	f.IntVar(&s.maxConns, "database-connections", 0, "`N` connections to the database at most (default 16)")
	f.StringVar(&s.logLevel, "log-level", "info", "debug, info, warn or error")
}

// check reports what is wrong with the flags together.
func (s *serveFlags) check(env *environment) error {
	var level slog.Level
	if err := level.UnmarshalText([]byte(s.logLevel)); err != nil {
		return fmt.Errorf("--log-level %q: want debug, info, warn or error", s.logLevel)
	}
	if s.server.CallsMax < 1 || s.server.BodyBytesMax < 1 || s.maxConns < 0 {
		return errors.New("--calls-max and --body-bytes-max want 1 or more, --database-connections 0 or more")
	}
	if s.server.SheetRate < 1 || s.server.SheetBurst < 1 || s.server.SheetCallsMax < 0 {
		return errors.New("--sheet-rate and --sheet-burst want 1 or more, --sheet-calls-max 0 or more")
	}
	for _, d := range []time.Duration{s.server.Timeout, s.server.TimeoutMax, s.server.Drain} {
		if d <= 0 {
			return errors.New("--timeout, --timeout-max and --drain want more than 0")
		}
	}
	s.server.Log = server.NewLog(env.Stderr, level)
	s.server.Now = env.Now
	return nil
}

// canListen reports what is wrong with the addresses, or that one of them is taken.
func (s *serveFlags) canListen() error {
	if err := s.server.Check(); err != nil {
		return err
	}
	return portsAreFree(s.server.HTTPAddress, s.server.GRPCAddress)
}

func runServe(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "serve [flags]", serveAbout)
	var s serveFlags
	s.add(f)
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	if err := s.check(env); err != nil {
		return f.wrong("%v", err)
	}
	// A database is neither made nor started for a service that could not listen.
	if err := s.canListen(); err != nil {
		return fail(env, "%v", err)
	}
	db, err := s.database.open(ctx, env)
	if err != nil {
		return fail(env, "%v", err)
	}
	err = serve(ctx, env, &s, db, nil)
	if err = errors.Join(err, db.close()); err != nil {
		return fail(env, "%v", err)
	}
	return exitOK
}

// serve opens the store and serves until the context ends. Started, where given, is called once calls are answered; what
// it returns ends the service.
func serve(ctx context.Context, env *environment, flags *serveFlags, db *database, started func(context.Context, *server.Server, *store.Store) error) error {
	if err := db.migrate(ctx, env); err != nil {
		return fmt.Errorf("migrating: %w", err)
	}
	s, err := store.Open(ctx, db.serviceURL, store.Options{MaxConns: flags.maxConns, Log: flags.server.Log})
	if err != nil {
		return err
	}
	defer s.Close()
	if err := s.Ready(ctx); err != nil {
		return fmt.Errorf("the database is not ready: %w", err)
	}
	srv, err := server.New(s, flags.server)
	if err != nil {
		return err
	}
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	if db.cluster != nil {
		go func() { // a service without its own database can only end, and be started again
			select {
			case <-db.cluster.Done():
				cancel(fmt.Errorf("the private PostgreSQL has ended: %w", errors.Join(db.cluster.Err(), errDatabaseEnded)))
			case <-ctx.Done():
			}
		}()
	}
	fmt.Fprintf(env.Stderr, "serving HTTP on %s and gRPC on %s\n", srv.HTTPAddress(), srv.GRPCAddress())
	if started != nil {
		go func() {
			if err := started(ctx, srv, s); err != nil {
				cancel(err)
			}
		}()
	}
	err = srv.Run(ctx)
	if cause := context.Cause(ctx); err == nil && cause != nil && !errors.Is(cause, context.Canceled) {
		err = cause
	}
	fmt.Fprintln(env.Stderr, "stopped")
	return err
}

var errDatabaseEnded = errors.New("its log in the data directory tells more")
