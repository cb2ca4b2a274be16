package store_test

import (
	"context"
	"errors"
	"net/url"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"limitary/internal/pgtest"
	"limitary/internal/store"
)

// history are the tables that are only ever added to.
var history = []string{"principals", "keys", "key_revocations", "chart_revisions", "versions", "version_decisions", "marks", "mark_voids",
	"results", "result_revisions", "verdicts", "signal_events", "signal_notes", "track_releases", "changes", "change_decisions", "requests", "audit"}

func TestServiceLoginCannotAlterHistory(t *testing.T) {
	t.Parallel()
	conn := mustConnect(t, pgtest.New(t).ServiceURL())
	for _, table := range history {
		for _, sql := range []string{`DELETE FROM ` + table, `TRUNCATE ` + table, `DROP TABLE ` + table,
			`ALTER TABLE ` + table + ` DISABLE TRIGGER ALL`, `UPDATE ` + table + ` SET entry = 1`} {
			if strings.Contains(sql, "SET entry") && (table == "principals" || table == "requests") {
				sql = `UPDATE ` + table + ` SET ` + map[string]string{"principals": "name = 'x'", "requests": "method = 'x'"}[table]
			}
			_, err := conn.Exec(t.Context(), sql)
			var pg *pgconn.PgError
			if !errors.As(err, &pg) || pg.Code != "42501" { // insufficient_privilege
				t.Errorf("%s: got %v, want it refused", sql, err)
			}
		}
	}
}

// Even the owner's own statements are stopped, unless the owner takes the guard away first.
func TestGuardStopsTheOwnerToo(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	f.mustChart(individuals("nitrate"))
	conn := f.owner()
	for _, sql := range []string{`UPDATE keys SET roles = '{admin}'`, `DELETE FROM audit`, `TRUNCATE audit`, `UPDATE requests SET method = ''`,
		`DELETE FROM chart_revisions`} {
		_, err := conn.Exec(t.Context(), sql)
		wantCode(t, err, "42501")
	}
}

func TestOwnersConnectionServesWithTheServicesRights(t *testing.T) {
	t.Parallel()
	db := pgtest.New(t)
	s := mustOpen(t, db.OwnerURL())
	if err := s.Ready(t.Context()); err != nil {
		t.Errorf("not ready: %v", err)
	}
	if got := store.LoginOf(t.Context(), s); got != pgtest.Service {
		t.Errorf("got login %q, want %q", got, pgtest.Service)
	}
}

func TestLoginThatCouldAlterHistoryIsNotReady(t *testing.T) {
	t.Parallel()
	c := pgtest.StartCluster(t) // roles belong to the whole server
	conn := mustConnect(t, c.OwnerURL())
	mustExec(t, conn, `CREATE ROLE careless LOGIN; GRANT SELECT ON ALL TABLES IN SCHEMA public TO careless; GRANT DELETE ON audit TO careless`)
	err := mustOpen(t, strings.Replace(c.ServiceURL(), pgtest.Service, "careless", 1)).Ready(t.Context())
	if err == nil || !strings.Contains(err.Error(), "careless") || !strings.Contains(err.Error(), "audit") {
		t.Errorf("got %v, want an error that names login and table", err)
	}
}

// On a hosted database the owner of the schema is no superuser.
func TestOrdinaryOwnerMigratesAndServes(t *testing.T) {
	t.Parallel()
	c := pgtest.StartCluster(t)
	conn := mustConnect(t, c.OwnerURL())
	mustExec(t, conn, `DROP OWNED BY limitary_service; DROP ROLE limitary_service; CREATE ROLE lab LOGIN`)
	mustExec(t, conn, `CREATE DATABASE lab OWNER lab`)
	address, err := url.Parse(c.OwnerURL())
	if err != nil {
		t.Fatal(err)
	}
	address.Path, address.User = "/lab", url.User("lab")
	if _, err := store.Migrate(t.Context(), address.String()); err == nil || !strings.Contains(err.Error(), "CREATE ROLE limitary_service LOGIN") {
		t.Errorf("got %v, want an error that says what an administrator has to run", err)
	}
	mustExec(t, conn, `ALTER ROLE lab CREATEROLE`)
	if n, err := store.Migrate(t.Context(), address.String()); err != nil || n == 0 {
		t.Fatalf("got %d steps, %v", n, err)
	}
	s := mustOpen(t, address.String())
	if err := s.Ready(t.Context()); err != nil {
		t.Errorf("not ready: %v", err)
	}
	want(t, "login", store.LoginOf(t.Context(), s), pgtest.Service)
}

// The database itself keeps author and approver apart, whatever the service does.
func TestOwnVersionCannotBeApprovedEvenByRawSQL(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustPropose(limits{chart: c, from: day(0)})
	conn := mustConnect(t, f.db.ServiceURL())
	decide := func(author, by string) error {
		_, err := conn.Exec(context.Background(), `INSERT INTO version_decisions (chart_id, number, decision, step, author, decided_by, recorded_at, entry)
			SELECT chart_id, number, 'APPROVED', 1, $1, $2, now(), 99 FROM versions`, author, by)
		return err
	}
	wantCode(t, decide("ann", "ann"), "23514")                                              // check: second person
	wantCode(t, decide("bob", "ann"), "23503")                                              // bob is not the author
	_, err := conn.Exec(t.Context(), `UPDATE versions SET author = 'bob' WHERE number = 1`) // history
	wantCode(t, err, "42501")
	_, err = conn.Exec(t.Context(), `INSERT INTO version_decisions (chart_id, number, decision, step, author, decided_by, recorded_at, entry)
		SELECT chart_id, number, 'WITHDRAWN', 2, 'ann', 'bob', now(), 99 FROM versions`)
	wantCode(t, err, "23514") // not approved
	if err := decide("ann", "bob"); err != nil {
		t.Errorf("another principal: %v", err)
	}
}

func TestDatabaseThatIsGoneIsUnavailable(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	f.mustChart(individuals("nitrate"))
	f.db.Cut()
	if _, err := f.GetChart(t.Context(), f.ann, "nitrate"); err != nil {
		t.Errorf("after a cut, with the database back: %v", err)
	}
	f.db.Refuse()
	_, err := f.GetChart(t.Context(), f.ann, "nitrate")
	if !store.Unavailable(err) {
		t.Errorf("read: got %v, want it unavailable", err)
	}
	_, err = f.CreateChart(t.Context(), f.ann, req(), individuals("lead"))
	if !store.Unavailable(err) {
		t.Errorf("write: got %v, want it unavailable", err)
	}
	if err := f.Ready(t.Context()); !store.Unavailable(err) {
		t.Errorf("Ready: got %v, want it unavailable", err)
	}
	f.db.Allow()
	if err := f.Ready(t.Context()); err != nil {
		t.Errorf("back again: %v", err)
	}
}

func TestEndOfTheCallersTimeIsNotUnavailable(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	_, err := f.GetChart(ctx, f.ann, "nitrate")
	if !errors.Is(err, context.Canceled) || store.Unavailable(err) {
		t.Errorf("got %v, want context.Canceled and not unavailable", err)
	}
}

func TestDatabaseThatHoldsALockTooLongIsLeftInTime(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	tx, err := f.owner().Begin(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = tx.Rollback(context.Background()) }()
	if _, err := tx.Exec(t.Context(), `SELECT FROM charts FOR UPDATE`); err != nil {
		t.Fatal(err)
	}
	impatient := mustOpen(t, f.db.ServiceURL()+"&statement_timeout=50")
	_, err = impatient.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, retitled("x"))
	wantReason(t, err, "DEADLINE")
	if err := tx.Rollback(t.Context()); err != nil && !errors.Is(err, pgx.ErrTxClosed) {
		t.Fatal(err)
	}
	if _, err = impatient.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, retitled("x")); err != nil {
		t.Errorf("once the lock is free: %v", err)
	}
}
