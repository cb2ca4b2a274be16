package store_test

import (
	"net/url"
	"strings"
	"sync"
	"testing"
	"testing/fstest"

	"limitary/internal/pgtest"
	"limitary/internal/store"
)

// emptied is a database as it is before the first migration.
func emptied(t *testing.T) *pgtest.Database {
	t.Helper()
	db := pgtest.New(t)
	mustExec(t, mustConnect(t, db.OwnerURL()), `DROP SCHEMA public CASCADE; CREATE SCHEMA public`)
	return db
}

func TestMigratingTwiceTakesTheStepsOnce(t *testing.T) {
	t.Parallel()
	db := emptied(t)
	first, err := store.Migrate(t.Context(), db.OwnerURL())
	if err != nil || first == 0 {
		t.Fatalf("first: got %d steps, %v", first, err)
	}
	again, err := store.Migrate(t.Context(), db.OwnerURL())
	if err != nil || again != 0 {
		t.Errorf("second: got %d steps, %v, want none", again, err)
	}
	if err := mustOpen(t, db.ServiceURL()).Ready(t.Context()); err != nil {
		t.Errorf("not ready: %v", err)
	}
}

func TestMigrationsAtOnceTakeTheStepsOnce(t *testing.T) {
	t.Parallel()
	db := emptied(t)
	var mu sync.Mutex
	var all sync.WaitGroup
	total := 0
	for range 6 {
		all.Go(func() {
			n, err := store.Migrate(t.Context(), db.OwnerURL())
			if err != nil {
				t.Error(err)
			}
			mu.Lock()
			defer mu.Unlock()
			total += n
		})
	}
	all.Wait()
	var want int
	if err := mustConnect(t, db.OwnerURL()).QueryRow(t.Context(), `SELECT count(*) FROM schema_migrations`).Scan(&want); err != nil {
		t.Fatal(err)
	}
	if total != want || want == 0 {
		t.Errorf("got %d steps taken by all, want %d", total, want)
	}
}

func TestSchemaOfAnotherBuildIsRefused(t *testing.T) {
	t.Parallel()
	for name, c := range map[string]struct{ sql, want string }{
		"newer": {`INSERT INTO schema_migrations (number, name, checksum) SELECT max(number) + 1, 'later.sql', 'x' FROM schema_migrations`, "newer build"},
		"other": {`UPDATE schema_migrations SET checksum = 'x' WHERE number = 1`, "not the one of this build"},
		"holed": {`UPDATE schema_migrations SET number = 1 + (SELECT max(number) FROM schema_migrations) WHERE number = 1`, ""},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			db := pgtest.New(t)
			mustExec(t, mustConnect(t, db.OwnerURL()), c.sql)
			if _, err := store.Migrate(t.Context(), db.OwnerURL()); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("Migrate: got %v, want an error with %q", err, c.want)
			}
			if err := mustOpen(t, db.ServiceURL()).Ready(t.Context()); err == nil || !strings.Contains(err.Error(), c.want) {
				t.Errorf("Ready: got %v, want an error with %q", err, c.want)
			}
		})
	}
}

func TestDatabaseWithoutSchemaIsNotReady(t *testing.T) {
	t.Parallel()
	db := emptied(t)
	err := mustOpen(t, db.OwnerURL()).Ready(t.Context())
	if err == nil || !strings.Contains(err.Error(), "limitary migrate") {
		t.Errorf("got %v, want an error that names the command", err)
	}
}

func TestFailedStepLeavesNothingAndIsTakenLater(t *testing.T) {
	t.Parallel()
	db := emptied(t)
	files := fstest.MapFS{
		"0001_first.sql":  {Data: []byte(`CREATE TABLE first (n int)`)},
		"0002_second.sql": {Data: []byte(`CREATE TABLE second (n int); SELECT 1/0`)},
	}
	applied, err := store.MigrateFiles(t.Context(), db.OwnerURL(), files)
	if err == nil || !strings.Contains(err.Error(), "0002_second.sql") || applied != 1 {
		t.Fatalf("got %d steps, %v, want 1 and an error that names the second", applied, err)
	}
	conn := mustConnect(t, db.OwnerURL())
	var second *string
	if err := conn.QueryRow(t.Context(), `SELECT to_regclass('second')::text`).Scan(&second); err != nil || second != nil {
		t.Errorf("half a step was kept: %v, %v", second, err)
	}
	files["0002_second.sql"] = &fstest.MapFile{Data: []byte(`CREATE TABLE second (n int)`)}
	if applied, err = store.MigrateFiles(t.Context(), db.OwnerURL(), files); err != nil || applied != 1 {
		t.Errorf("after the repair: got %d steps, %v, want 1", applied, err)
	}
}

func TestMigrationFilesAreNumberedWithoutHoles(t *testing.T) {
	t.Parallel()
	for name, want := range map[string]string{"0002_late.sql": "0001", "1_short.sql": "0001_what.sql", "0001_UPPER.sql": "0001_what.sql"} {
		_, err := store.MigrateFiles(t.Context(), "", fstest.MapFS{name: {}})
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: got %v, want an error with %q", name, err, want)
		}
	}
}

// The first migration of a cluster makes the role while another database's does the same.
func TestDatabasesOfOneServerMigrateAtOnce(t *testing.T) {
	t.Parallel()
	c := pgtest.StartCluster(t)
	conn := mustConnect(t, c.OwnerURL())
	mustExec(t, conn, `DROP OWNED BY limitary_service; DROP ROLE limitary_service`)
	var urls []string
	for _, name := range []string{"one", "two", "three"} {
		mustExec(t, conn, `CREATE DATABASE `+name)
		address, err := url.Parse(c.OwnerURL())
		if err != nil {
			t.Fatal(err)
		}
		address.Path = "/" + name
		urls = append(urls, address.String())
	}
	var all sync.WaitGroup
	for _, url := range urls {
		all.Go(func() {
			if n, err := store.Migrate(t.Context(), url); err != nil || n == 0 {
				t.Errorf("%s: got %d steps, %v", url, n, err)
			}
		})
	}
	all.Wait()
}
