package main

import (
	"context"
	"errors"
	"fmt"

	"limitary/internal/postgres"
	"limitary/internal/store"
)

// databaseFlags choose the database: an address, or a directory with a private one.
type databaseFlags struct {
	url, data string
}

// envDatabase is the variable that holds the address where no flag does.
const envDatabase = "LIMITARY_DATABASE_URL"

// serviceLogin is the login that may add to history but not alter it; migrations make it.
const serviceLogin = "limitary_service"

func (d *databaseFlags) add(f *flagSet) {
	f.StringVar(&d.url, "database", "", "`URL` of a PostgreSQL database (default: the variable "+envDatabase+")")
	f.StringVar(&d.data, "data", "", "`DIR` of a private PostgreSQL, made if need be, where no URL is given (default: "+defaultDataDir(f.env)+")")
}

// defaultDataDir is where the private database lives; empty where the environment leaves no place for it.
func defaultDataDir(env *environment) string {
	dir, _ := postgres.DefaultDir(env.Getenv) // open says what is wrong
	return dir
}

// database is one that is there to be used until close.
type database struct {
	// serviceURL is for the service and for commands; ownerURL for migrations.
	serviceURL, ownerURL string
	// private says that we may migrate it: nobody else sees to it.
	private bool
	// cluster is the PostgreSQL this process has started; nil where it is another's.
	cluster *postgres.Cluster
}

// open finds the database: at the address given, in the directory where another process runs it, or started here.
func (d *databaseFlags) open(ctx context.Context, env *environment) (*database, error) {
	url := d.url
	if url == "" && d.data == "" {
		url = env.Getenv(envDatabase)
	}
	if d.url != "" && d.data != "" {
		return nil, errors.New("--database and --data exclude each other")
	}
	if url != "" {
		return &database{serviceURL: url, ownerURL: url}, nil
	}
	dir := d.data
	if dir == "" {
		var err error
		if dir, err = postgres.DefaultDir(env.Getenv); err != nil {
			return nil, fmt.Errorf("%w with --data", err)
		}
	}
	if at, running, err := postgres.Running(ctx, dir); err != nil {
		return nil, err
	} else if running {
		return &database{serviceURL: at(postgres.Database, serviceLogin), ownerURL: at(postgres.Database, postgres.Owner), private: true}, nil
	}
	fmt.Fprintf(env.Stderr, "starting a private PostgreSQL in %s\n", dir)
	cluster, err := postgres.Start(ctx, postgres.Options{Dir: dir, Durable: true, Log: env.Stderr})
	if err != nil {
		return nil, d.howToInstall(err)
	}
	return &database{
		serviceURL: cluster.URL(postgres.Database, serviceLogin), ownerURL: cluster.URL(postgres.Database, postgres.Owner),
		private: true, cluster: cluster,
	}, nil
}

// howToInstall gives the lack of PostgreSQL's server programs in the words of this program, which can install them.
func (d *databaseFlags) howToInstall(err error) error {
	var none *postgres.NotFoundError
	if !errors.As(err, &none) {
		return err
	}
	version, command := fmt.Sprintf("%d or newer", postgres.MinimumVersion), "limitary install"
	if none.Version != 0 { // a directory that is there wants the version that made it
		version = fmt.Sprint(none.Version)
		if d.data != "" {
			command += " --data " + d.data
		}
	}
	return fmt.Errorf("PostgreSQL's server programs, version %s, are not on this machine: run \"%s\" to install them, "+
		"or use a database that is there with --database URL", version, command)
}

// migrate brings a private database up to date. One given by its address is left to "limitary migrate".
func (d *database) migrate(ctx context.Context, env *environment) error {
	if !d.private {
		return nil
	}
	applied, err := store.Migrate(ctx, d.ownerURL)
	if err == nil && applied > 0 {
		fmt.Fprintf(env.Stderr, "the schema is up to date (%d migrations applied)\n", applied)
	}
	return err
}

// close ends a PostgreSQL that was started here.
func (d *database) close() error {
	if d.cluster == nil {
		return nil
	}
	return d.cluster.Stop()
}

// withStore opens database and store for a command that works on them directly.
func withStore(ctx context.Context, env *environment, flags *databaseFlags, work func(*store.Store) int) int {
	db, err := flags.open(ctx, env)
	if err != nil {
		return fail(env, "%v", err)
	}
	code := onDatabase(ctx, env, db, work)
	if err := db.close(); err != nil {
		return fail(env, "stopping PostgreSQL: %v", err)
	}
	return code
}

func onDatabase(ctx context.Context, env *environment, db *database, work func(*store.Store) int) int {
	if err := db.migrate(ctx, env); err != nil {
		return fail(env, "migrating: %v", err)
	}
	s, err := store.Open(ctx, db.serviceURL, store.Options{})
	if err != nil {
		return fail(env, "%v", err)
	}
	defer s.Close()
	if err := s.Ready(ctx); err != nil {
		return fail(env, "the database is not ready: %v", err)
	}
	return work(s)
}
