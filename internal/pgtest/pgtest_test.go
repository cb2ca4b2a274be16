package pgtest_test

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"limitary/internal/pgtest"
)

// brokenMigration has the test binary, run once more by a test, fail in its migration.
const brokenMigration = "LIMITARY_PGTEST_BROKEN_MIGRATION"

func TestMain(m *testing.M) { pgtest.Main(m, migrate) }

// migrate stands for the migrations of the store: a table, a login with few rights, a grant
// and a setting on the database itself.
func migrate(ctx context.Context, ownerURL string) error {
	if os.Getenv(brokenMigration) != "" {
		return errors.New("the migration is broken")
	}
	conn, err := pgx.Connect(ctx, ownerURL)
	if err != nil {
		return err
	}
	_, err = conn.Exec(ctx, `
		create role limitary_service login;
		create table kept (n bigint primary key);
		grant select, insert on kept to limitary_service;
		do $$ begin
			execute format('revoke temporary on database %I from public', current_database());
			execute format('alter database %I set lock_timeout to ''1234ms''', current_database());
		end $$`)
	return errors.Join(err, conn.Close(ctx))
}

func mustConnect(tb testing.TB, url string) *pgx.Conn {
	tb.Helper()
	conn, err := pgx.Connect(tb.Context(), url)
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() { _ = conn.Close(context.Background()) })
	return conn
}

func mustCount(tb testing.TB, url string) (n int) {
	tb.Helper()
	if err := mustConnect(tb, url).QueryRow(tb.Context(), `select count(*) from kept`).Scan(&n); err != nil {
		tb.Fatal(err)
	}
	return n
}

func insert(tb testing.TB, conn *pgx.Conn, n int) error {
	_, err := conn.Exec(tb.Context(), `insert into kept values ($1)`, n)
	return err
}

func wantCode(tb testing.TB, err error, want string) {
	tb.Helper()
	var refusal *pgconn.PgError
	if !errors.As(err, &refusal) || refusal.Code != want {
		tb.Errorf("got %v, want SQLSTATE %s", err, want)
	}
}

func TestNewDatabasesAreMigratedEmptyAndApart(t *testing.T) {
	for i := range 4 {
		t.Run(fmt.Sprint(i), func(t *testing.T) {
			t.Parallel()
			first, second := pgtest.New(t), pgtest.New(t)
			if err := insert(t, mustConnect(t, first.ServiceURL()), 1); err != nil {
				t.Fatal(err)
			}
			if got, want := mustCount(t, first.OwnerURL()), 1; got != want {
				t.Errorf("first: got %d rows, want %d", got, want)
			}
			if got, want := mustCount(t, second.OwnerURL()), 0; got != want {
				t.Errorf("second: got %d rows, want %d", got, want)
			}
		})
	}
}

func TestDatabaseIsDroppedWithItsTest(t *testing.T) {
	var url string
	t.Run("a test that leaves a connection", func(t *testing.T) {
		url = pgtest.New(t).OwnerURL()
		if _, err := pgx.Connect(context.Background(), url); err != nil {
			t.Fatal(err)
		}
	})
	_, err := pgx.Connect(t.Context(), url)
	wantCode(t, err, "3D000") // invalid_catalog_name
}

func TestServiceHasTheRightsOfProduction(t *testing.T) {
	t.Parallel()
	conn := mustConnect(t, pgtest.New(t).ServiceURL())
	_, err := conn.Exec(t.Context(), `delete from kept`)
	wantCode(t, err, "42501") // insufficient_privilege
	_, err = conn.Exec(t.Context(), `create temporary table t ()`)
	wantCode(t, err, "42501") // revoked on the database itself
	var got string
	if err := conn.QueryRow(t.Context(), `show lock_timeout`).Scan(&got); err != nil || got != "1234ms" {
		t.Errorf("setting of the database: got %q, %v, want 1234ms", got, err)
	}
}

func TestCutEndsConnectionsAndTakesNewOnes(t *testing.T) {
	t.Parallel()
	db, other := pgtest.New(t), pgtest.New(t)
	cut, kept := mustConnect(t, db.ServiceURL()), mustConnect(t, other.ServiceURL())
	if got, want := db.Cut(), 1; got != want {
		t.Errorf("got %d connections cut, want %d", got, want)
	}
	if err := insert(t, cut, 1); err == nil {
		t.Error("the connection was not cut")
	}
	if err := insert(t, kept, 1); err != nil {
		t.Errorf("another database's connection: %v", err)
	}
	if err := insert(t, mustConnect(t, db.ServiceURL()), 1); err != nil {
		t.Errorf("a new connection: %v", err)
	}
}

func TestRefusedUntilAllowed(t *testing.T) {
	t.Parallel()
	db := pgtest.New(t)
	conn := mustConnect(t, db.ServiceURL())
	if got, want := db.Refuse(), 1; got != want {
		t.Errorf("got %d connections cut, want %d", got, want)
	}
	if err := insert(t, conn, 1); err == nil {
		t.Error("the connection was not cut")
	}
	for _, url := range []string{db.ServiceURL(), db.OwnerURL()} {
		_, err := pgx.Connect(t.Context(), url)
		wantCode(t, err, "55000") // object_not_in_prerequisite_state: not accepting connections
	}
	db.Allow()
	if got, want := mustCount(t, db.ServiceURL()), 0; got != want {
		t.Errorf("got %d rows, want %d", got, want)
	}
}

func TestClusterKeepsWhatIsCommitted(t *testing.T) {
	t.Parallel()
	c := pgtest.StartCluster(t)
	for round, end := range []struct {
		name string
		end  func()
	}{{"stopped", c.Stop}, {"killed", c.Kill}, {"killed again", c.Kill}} {
		conn := mustConnect(t, c.ServiceURL())
		if err := insert(t, conn, round); err != nil {
			t.Fatal(err)
		}
		open, err := conn.Begin(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		if _, err := open.Exec(t.Context(), `insert into kept values (100)`); err != nil {
			t.Fatal(err)
		}
		end.end()
		if err := open.Commit(t.Context()); err == nil {
			t.Errorf("%s: got a commit after the end, want none", end.name)
		}
		c.Start()
		if got, want := mustCount(t, c.OwnerURL()), round+1; got != want {
			t.Errorf("%s: got %d rows, want %d", end.name, got, want)
		}
	}
}

// A suite without its database must not look like one that passed.
func TestSuiteWithoutItsDatabaseFails(t *testing.T) {
	t.Parallel()
	for name, c := range map[string]struct{ env, want string }{
		"cluster that cannot start":   {"TMPDIR=" + filepath.Join(t.TempDir(), "nowhere"), "nowhere"},
		"migration that does not run": {brokenMigration + "=yes", "migrating the template: the migration is broken"},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			cmd := exec.CommandContext(t.Context(), os.Args[0], "-test.run=^$")
			cmd.Env = append(os.Environ(), c.env)
			out, err := cmd.CombinedOutput()
			var exit *exec.ExitError
			if !errors.As(err, &exit) || exit.ExitCode() != 1 {
				t.Fatalf("got %v, want exit code 1; it printed:\n%s", err, out)
			}
			if !strings.Contains(string(out), "pgtest: ") || !strings.Contains(string(out), c.want) {
				t.Errorf("got %q, want it to say %q", out, c.want)
			}
		})
	}
}
