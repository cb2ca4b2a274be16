package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"net"
	"path/filepath"
	"syscall"

	_ "time/tzdata" // charts name time zones, and a fresh container has no list of them

	"limitary/internal/install"
	"limitary/internal/server"
	"limitary/internal/store"
)

const tryAbout = `Starts everything with nothing set up: a private, durable PostgreSQL, the service, and the invented laboratories of
Fellmark Water, posted through the service's own API. It prints the addresses, fresh keys and three calls to try, and
serves until it is stopped. What was posted is there again at the next start, however this one ended.

Where PostgreSQL's server programs are missing, root on Debian gets them installed, without a cluster on port 5432;
anyone else is told what to run. With --database the database given is brought up to date and used instead, as its
owner; it must be empty or hold the demo already.`

func runTry(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "try [flags]", tryAbout)
	s := tryFlags(f, env)
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	dataGiven := false
	f.Visit(func(g *flag.Flag) { dataGiven = dataGiven || g.Name == "data" })
	if dataGiven && s.database.url != "" {
		return f.wrong("--database and --data exclude each other")
	}
	if err := s.check(env); err != nil {
		return f.wrong("%v", err)
	}
	if err := s.canListen(); err != nil {
		return fail(env, "%v", err)
	}
	db, err := openTry(ctx, env, &s.database)
	if err != nil {
		return fail(env, "%v", err)
	}
	err = serve(ctx, env, s, db, func(ctx context.Context, srv *server.Server, st *store.Store) error {
		return tryDemo(ctx, env, s.database, srv, st)
	})
	if err = errors.Join(err, db.close()); err != nil {
		return fail(env, "%v", err)
	}
	return exitOK
}

// tryFlags are the few of serve's flags that a newcomer needs; the others have the values they have there. What differs is
// a directory of its own, so that the demo never gets into the database that "limitary serve" uses, and a log that leaves
// the screen to the text for the newcomer.
func tryFlags(f *flagSet, env *environment) *serveFlags {
	s := &serveFlags{}
	s.add(newFlags(env, "serve", ""))
	s.logLevel = "warn"
	f.StringVar(&s.server.HTTPAddress, "http", server.DefaultHTTPAddress, "`ADDR` for HTTP")
	f.StringVar(&s.server.GRPCAddress, "grpc", server.DefaultGRPCAddress, "`ADDR` for gRPC")
	f.BoolVar(&s.server.BehindProxy, "behind-proxy", false, "listening beyond this machine is meant, and a proxy in front does TLS")
	f.StringVar(&s.database.url, "database", "", "`URL` of a PostgreSQL database, as its owner")
	f.StringVar(&s.database.data, "data", tryDataDir(env), "`DIR` of a private PostgreSQL, made if need be, where no URL is given")
	return s
}

func tryDataDir(env *environment) string {
	if dir := defaultDataDir(env); dir != "" {
		return dir + "-try"
	}
	return ""
}

// portsAreFree finds out before anything is started whether both addresses can be listened on.
func portsAreFree(httpAddress, grpcAddress string) error {
	for _, each := range []struct{ flag, address string }{{"--http", httpAddress}, {"--grpc", grpcAddress}} {
		l, err := net.Listen("tcp", each.address)
		switch {
		case errors.Is(err, syscall.EADDRINUSE):
			return fmt.Errorf("%s %s: the port is in use, perhaps by another limitary. Stop that, or choose other ports, for instance "+
				"--http 127.0.0.1:7420 --grpc 127.0.0.1:7421 (port 0 takes any free one)", each.flag, each.address)
		case err != nil:
			return fmt.Errorf("%s %s: %w", each.flag, each.address, err)
		}
		defer l.Close() // held until both are known to be free: they may be one and the same
	}
	return nil
}

// openTry makes sure of the server programs and opens the database. A database named in the environment is not used: the
// demo goes where it is sent on purpose, or into a directory of its own.
func openTry(ctx context.Context, env *environment, flags *databaseFlags) (*database, error) {
	if flags.url != "" {
		flags.data = ""
		db, err := flags.open(ctx, env)
		if err == nil {
			db.private = true // the owner's address was given so that we migrate
		}
		return db, err
	}
	if _, err := install.Ensure(ctx, filepath.Join(flags.data, "data"), env.Stderr); err != nil {
		return nil, err
	}
	return flags.open(ctx, env)
}
