package pgtest

import (
	"context"
	"fmt"
	"sync/atomic"
	"testing"

	"github.com/jackc/pgx/v5"

	"limitary/internal/postgres"
)

// Database is a database of one test. Its methods fail that test where they cannot do
// what they say, and so must be called from its goroutine.
type Database struct {
	tb   testing.TB
	name string
}

var databases atomic.Int64

// New makes a migrated database with no rows but those the migrations put there, and
// drops it when the test ends, whoever is still connected. Tests may call it in parallel
// and more than once.
func New(tb testing.TB) *Database {
	tb.Helper()
	if shared.cluster == nil {
		tb.Fatal("pgtest: the TestMain of this package does not call pgtest.Main")
	}
	db := &Database{tb: tb, name: fmt.Sprintf("limitary_test_%d", databases.Add(1))}
	db.must(clone(tb.Context(), shared.cluster, db.name))
	tb.Cleanup(func() {
		// The test's context has ended by now.
		if err := exec(context.Background(), shared.cluster, "drop database "+db.name+" with (force)"); err != nil {
			tb.Errorf("pgtest: dropping %s: %v", db.name, err)
		}
	})
	return db
}

// clone copies the template. PostgreSQL copies neither the grants nor the settings on
// the database itself, without which the service would have other rights here than in
// production: they are carried over by hand.
func clone(ctx context.Context, c *postgres.Cluster, name string) error {
	return admin(ctx, c, func(conn *pgx.Conn) error {
		// Copying files is several times faster here than the default, which writes every
		// page to the log.
		if _, err := conn.Exec(ctx, "create database "+name+" template "+template+" strategy file_copy"); err != nil {
			return err
		}
		_, err := conn.Exec(ctx, `update pg_database set datacl = t.datacl from pg_database t
			where pg_database.datname = $1 and t.datname = $2`, name, template)
		if err != nil {
			return err
		}
		_, err = conn.Exec(ctx, `insert into pg_db_role_setting (setdatabase, setrole, setconfig)
			select d.oid, s.setrole, s.setconfig
			from pg_db_role_setting s join pg_database t on t.oid = s.setdatabase and t.datname = $2, pg_database d
			where d.datname = $1`, name, template)
		return err
	})
}

// OwnerURL is the address for the owner of the schema, who may do everything.
func (db *Database) OwnerURL() string { return shared.cluster.URL(db.name, postgres.Owner) }

// ServiceURL is the address for the login that the service uses.
func (db *Database) ServiceURL() string { return shared.cluster.URL(db.name, Service) }

// Cut ends every connection to the database, as a network or a restart would, and
// answers how many there were. New ones are taken at once.
func (db *Database) Cut() int {
	db.tb.Helper()
	n, err := cut(db.tb.Context(), shared.cluster, db.name)
	db.must(err)
	return n
}

// Refuse ends every connection and takes no new one, from anybody, until Allow. It
// answers how many it ended.
func (db *Database) Refuse() int {
	db.tb.Helper()
	db.must(exec(db.tb.Context(), shared.cluster, "alter database "+db.name+" with allow_connections false"))
	return db.Cut()
}

// Allow has the database take connections again.
func (db *Database) Allow() {
	db.tb.Helper()
	db.must(exec(db.tb.Context(), shared.cluster, "alter database "+db.name+" with allow_connections true"))
}

func (db *Database) must(err error) {
	db.tb.Helper()
	if err != nil {
		db.tb.Fatalf("pgtest: %s: %v", db.name, err)
	}
}
