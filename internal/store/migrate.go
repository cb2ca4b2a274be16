package store

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"regexp"
	"strconv"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"limitary/migrations"
)

// migration is one numbered step of the schema.
type migration struct {
	number         int
	name, sql, sum string
}

// migrateLock is the advisory lock that lets one migration run at a time; any number that nothing else uses.
const migrateLock = 0x6c696d6974617279 // "limitary"

var migrationName = regexp.MustCompile(`^(\d{4})_[a-z0-9_]+\.sql$`)

// embedded reads the migrations built in.
func embedded() ([]migration, error) { return readMigrations(migrations.Files) }

// readMigrations reads NNNN_what.sql files, numbered from 1 without holes.
func readMigrations(files fs.FS) ([]migration, error) {
	names, err := fs.Glob(files, "*.sql") // sorted
	if err != nil {
		return nil, err
	}
	var list []migration
	for _, name := range names {
		parts := migrationName.FindStringSubmatch(name)
		if parts == nil {
			return nil, fmt.Errorf("store: migration %s: want a name like 0001_what.sql", name)
		}
		number, _ := strconv.Atoi(parts[1]) // four digits
		if number != len(list)+1 {
			return nil, fmt.Errorf("store: migration %s: want number %04d next", name, len(list)+1)
		}
		sql, err := fs.ReadFile(files, name)
		if err != nil {
			return nil, err
		}
		sum := sha256.Sum256(sql)
		list = append(list, migration{number, name, string(sql), hex.EncodeToString(sum[:])})
	}
	return list, nil
}

// Migrate brings the schema of a database up to what this build wants, under the login that owns it, and answers how
// many steps it took. It makes the service's login where there is none, and lets the owner act as it. Migrations that
// run at once wait for each other; each step is one transaction. A schema newer than the build is refused.
func Migrate(ctx context.Context, ownerURL string) (applied int, err error) {
	defer wrap(ctx, &err, "Migrate")
	steps, err := embedded()
	if err != nil {
		return 0, err
	}
	return migrate(ctx, ownerURL, steps)
}

func migrate(ctx context.Context, ownerURL string, steps []migration) (applied int, err error) {
	conn, err := pgx.Connect(ctx, ownerURL)
	if err != nil {
		return 0, err
	}
	defer func() { err = errors.Join(err, conn.Close(context.WithoutCancel(ctx))) }() // gives the lock back
	if _, err := conn.Exec(ctx, `SELECT pg_advisory_lock($1)`, int64(migrateLock)); err != nil {
		return 0, err
	}
	if err := prepare(ctx, conn); err != nil {
		return 0, err
	}
	done, err := appliedSteps(ctx, conn)
	if err != nil {
		return 0, err
	}
	if err := compareSteps(done, steps); err != nil {
		return 0, err
	}
	for _, step := range steps[len(done):] {
		if err := step.apply(ctx, conn); err != nil {
			return applied, fmt.Errorf("migration %s: %w", step.name, err)
		}
		applied++
	}
	return applied, nil
}

// prepare makes the service's login, its access to the database, and the table of migrations.
func prepare(ctx context.Context, conn *pgx.Conn) error {
	// Another database of the same server may be making the role at this moment.
	_, err := conn.Exec(ctx, `
		DO $$ BEGIN
			IF NOT EXISTS (SELECT FROM pg_roles WHERE rolname = '`+serviceRole+`') THEN
				CREATE ROLE `+serviceRole+` LOGIN;
			END IF;
		EXCEPTION WHEN duplicate_object OR unique_violation THEN NULL;
		END $$`)
	var pg *pgconn.PgError
	if errors.As(err, &pg) && pg.Code == insufficientRights {
		return fmt.Errorf("the role %s is missing and this login may not make it; have an administrator run: CREATE ROLE %s LOGIN",
			serviceRole, serviceRole)
	}
	if err != nil {
		return err
	}
	// Being a member lets the owner of the schema serve too, with the service's rights. Where it may not be one, only the
	// service's own login can serve.
	_, err = conn.Exec(ctx, `
		DO $$ BEGIN
			IF NOT pg_has_role(current_user, '`+serviceRole+`', 'MEMBER') THEN
				EXECUTE format('GRANT `+serviceRole+` TO %I', current_user);
			END IF;
		EXCEPTION WHEN insufficient_privilege THEN NULL;
		END $$;
		DO $$ BEGIN
			EXECUTE format('GRANT CONNECT ON DATABASE %I TO `+serviceRole+`', current_database());
			EXECUTE format('GRANT USAGE ON SCHEMA %I TO `+serviceRole+`', current_schema());
		END $$;
		CREATE TABLE IF NOT EXISTS schema_migrations (
			number int CONSTRAINT schema_migrations_pkey PRIMARY KEY,
			name text NOT NULL,
			-- SHA-256 of the file, in hexadecimal.
			checksum text NOT NULL,
			applied_at timestamptz NOT NULL DEFAULT clock_timestamp()
		);
		GRANT SELECT ON schema_migrations TO `+serviceRole)
	return err
}

func (m migration) apply(ctx context.Context, conn *pgx.Conn) error {
	return pgx.BeginFunc(ctx, conn, func(tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, m.sql); err != nil {
			return err
		}
		_, err := tx.Exec(ctx, `INSERT INTO schema_migrations (number, name, checksum) VALUES ($1, $2, $3)`, m.number, m.name, m.sum)
		return err
	})
}

// appliedSteps lists the steps a database has, by number.
func appliedSteps(ctx context.Context, q querier) ([]migration, error) {
	rows, err := q.Query(ctx, `SELECT number, name, checksum FROM schema_migrations ORDER BY number`)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (m migration, err error) {
		return m, row.Scan(&m.number, &m.name, &m.sum)
	})
}

// compareSteps reports a database whose steps are not the first ones of those wanted.
func compareSteps(done, wanted []migration) error {
	for i, m := range done {
		switch {
		case m.number > len(wanted):
			return fmt.Errorf("the schema has migration %d (%s), and this build knows %d; use a newer build", m.number, m.name, len(wanted))
		case m.number != i+1:
			return fmt.Errorf("the schema lacks migration %d but has %d", i+1, m.number)
		case m.sum != wanted[i].sum:
			return fmt.Errorf("migration %d of the schema (%s) is not the one of this build (%s)", m.number, m.name, wanted[i].name)
		}
	}
	return nil
}

// checkSchema reports a schema that is not exactly the one wanted.
func checkSchema(ctx context.Context, q querier, wanted []migration) error {
	done, err := appliedSteps(ctx, q)
	var pg *pgconn.PgError
	if errors.As(err, &pg) && pg.Code == undefinedTable {
		done, err = nil, nil
	}
	if err != nil {
		return err
	}
	if err := compareSteps(done, wanted); err != nil {
		return err
	}
	if len(done) < len(wanted) {
		return fmt.Errorf("the schema has %d of the %d migrations this build wants; run limitary migrate", len(done), len(wanted))
	}
	return nil
}
