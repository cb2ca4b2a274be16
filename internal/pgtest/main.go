package pgtest

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/postgres"
)

// Service is the login that the migrations make for the service.
const Service = "limitary_service"

const (
	template = "limitary_template"
	// adminDatabase is where databases are made and dropped from.
	adminDatabase = "postgres"
	// startTimeout turns a server that hangs into a failure; it takes about a second.
	startTimeout = 2 * time.Minute
	// tempPattern names the directories of clusters, and staleAfter is the age at which one that
	// nobody owns was left behind by a test binary that was killed.
	tempPattern = "limitary-pgtest-*"
	staleAfter  = time.Hour
)

// shared is what Main sets up before the first test and takes down after the last.
var shared struct {
	cluster *postgres.Cluster
	migrate func(ctx context.Context, ownerURL string) error
}

// Main is the TestMain of a package whose tests use a database: it starts the
// cluster, migrates the template, runs the tests, stops the cluster and exits. Where the
// cluster cannot be started or migrated, or does not last, it says so on stderr and
// exits with 1, having run no test in the first two cases.
func Main(m *testing.M, migrate func(ctx context.Context, ownerURL string) error) {
	code, err := run(m, migrate)
	if err != nil {
		fmt.Fprintln(os.Stderr, "pgtest:", err)
		code = max(code, 1)
	}
	os.Exit(code)
}

func run(m *testing.M, migrate func(ctx context.Context, ownerURL string) error) (code int, err error) {
	ctx, cancel := context.WithTimeout(context.Background(), startTimeout)
	defer cancel()
	sweep(ctx)
	dir, err := tempDir()
	if err != nil {
		return 0, err
	}
	defer func() { err = errors.Join(err, os.RemoveAll(dir)) }()
	cluster, err := postgres.Start(ctx, postgres.Options{Dir: dir})
	if err != nil {
		return 0, err
	}
	defer func() { err = errors.Join(err, cluster.Stop()) }()
	if err := makeTemplate(ctx, cluster, migrate); err != nil {
		return 0, err
	}
	shared.cluster, shared.migrate = cluster, migrate
	return m.Run(), nil
}

// makeTemplate makes and migrates the database that New copies, and closes it: a
// database in use cannot be copied.
func makeTemplate(ctx context.Context, c *postgres.Cluster, migrate func(context.Context, string) error) error {
	if err := exec(ctx, c, "create database "+template); err != nil {
		return fmt.Errorf("making the template: %w", err)
	}
	if err := migrate(ctx, c.URL(template, postgres.Owner)); err != nil {
		return fmt.Errorf("migrating the template: %w", err)
	}
	if err := exec(ctx, c, "alter database "+template+" with is_template true allow_connections false"); err != nil {
		return fmt.Errorf("closing the template: %w", err)
	}
	// A pool that migrate has closed may take a moment to go.
	_, err := cut(ctx, c, template)
	return err
}

// tempDir makes a directory that the account PostgreSQL runs as can pass through.
func tempDir() (string, error) {
	dir, err := os.MkdirTemp("", tempPattern)
	if err != nil {
		return "", err
	}
	return dir, os.Chmod(dir, 0o711)
}

// sweep removes what test binaries that were killed have left behind, as far as it is
// ours to remove. Their PostgreSQL ended with them.
func sweep(ctx context.Context) {
	dirs, _ := filepath.Glob(filepath.Join(os.TempDir(), tempPattern)) // the pattern is well formed
	for _, dir := range dirs {
		info, err := os.Lstat(dir)
		if err != nil || !info.IsDir() || time.Since(info.ModTime()) < staleAfter {
			continue
		}
		if _, running, err := postgres.Running(ctx, dir); err == nil && !running {
			_ = os.RemoveAll(dir)
		}
	}
}

// exec runs one statement as the owner, on a connection of its own.
func exec(ctx context.Context, c *postgres.Cluster, sql string, args ...any) error {
	return admin(ctx, c, func(conn *pgx.Conn) error {
		_, err := conn.Exec(ctx, sql, args...)
		return err
	})
}

func admin(ctx context.Context, c *postgres.Cluster, f func(*pgx.Conn) error) error {
	conn, err := pgx.Connect(ctx, c.URL(adminDatabase, postgres.Owner))
	if err != nil {
		return err
	}
	return errors.Join(f(conn), conn.Close(ctx))
}

// cut ends every connection to a database and waits until they are gone. It answers
// how many there were.
func cut(ctx context.Context, c *postgres.Cluster, database string) (cut int, err error) {
	err = admin(ctx, c, func(conn *pgx.Conn) error {
		for {
			// The number is how many milliseconds to wait for each to be gone.
			rows, err := conn.Query(ctx, `select pg_terminate_backend(pid, 10000) from pg_stat_activity where datname = $1`, database)
			if err != nil {
				return err
			}
			gone, err := pgx.CollectRows(rows, pgx.RowTo[bool])
			if err != nil {
				return err
			}
			cut += len(gone)
			// One that was only just being made while we looked is seen on another look.
			if len(gone) == 0 {
				return nil
			}
		}
	})
	return cut, err
}
