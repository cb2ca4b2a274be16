// Package store keeps charts, versions, results, verdicts and signals in PostgreSQL, and holds every line of SQL.
//
// History is only ever added to; what is current is kept beside it and can be computed from it again. Public methods own
// their transaction. A method that writes takes its locks first, in statements of their own and always in the same order
// (request id, chart, tracks by id, audit chains by id), and reads only after, so that it sees all that was committed
// before it. A method that reads sees one state of the database.
//
// Every method that names a chart takes the Actor who asks; a chart outside the labels of the actor's key is NOT_FOUND.
// What an actor's roles allow is for the caller to check.
//
// Refusals are *definition.Error. Unavailable tells a database that cannot be reached from other failures.
package store

import (
	"context"
	"fmt"
	"log/slog"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"
)

// Options of a store; the zero value serves.
type Options struct {
	// MaxConns bounds the connections to the database; 0 is maxConnsDefault.
	MaxConns int
	// Log hears of transactions that the database gave up and that may be run again; nil is silence.
	Log *slog.Logger
}

const (
	// maxConnsDefault lets a few replicas share PostgreSQL's usual hundred connections.
	maxConnsDefault = 16
	// statementTimeout ends a statement that will not end; the longest honest ones judge a chunk or write a batch.
	statementTimeout = time.Minute
	// idleTimeout ends a transaction whose service has died in the middle, and with it its locks.
	idleTimeout = time.Minute
	// connectTimeout tells a database that does not answer from a slow one.
	connectTimeout = 5 * time.Second
	// serviceRole is the login that may add to history but not alter it.
	serviceRole = "limitary_service"
)

// Store is safe for concurrent use. It keeps nothing between calls but caches of what never changes.
type Store struct {
	pool       *pgxpool.Pool
	log        *slog.Logger
	chartCache chartCache
	together   together
	versions   *lru[string, *compiled]
	timelines  *lru[timelineKey, *timeline]
}

// Open prepares connections to a database. It does not wait for the database: Ready tells whether it answers.
func Open(ctx context.Context, url string, o Options) (*Store, error) {
	config, err := pgxpool.ParseConfig(url)
	if err != nil {
		return nil, fmt.Errorf("store: database address: %w", err)
	}
	s := &Store{log: o.Log, versions: newLRU[string, *compiled](versionsCachedMax), timelines: newLRU[timelineKey, *timeline](timelinesCachedMax)}
	if s.log == nil {
		s.log = slog.New(slog.DiscardHandler)
	}
	config.MaxConns = maxConnsDefault
	if o.MaxConns > 0 {
		config.MaxConns = int32(o.MaxConns)
	}
	if config.ConnConfig.ConnectTimeout == 0 || config.ConnConfig.ConnectTimeout > connectTimeout {
		config.ConnConfig.ConnectTimeout = connectTimeout
	}
	for name, value := range map[string]string{
		"application_name":                    "limitary",
		"statement_timeout":                   milliseconds(statementTimeout),
		"idle_in_transaction_session_timeout": milliseconds(idleTimeout),
	} {
		if _, set := config.ConnConfig.RuntimeParams[name]; !set {
			config.ConnConfig.RuntimeParams[name] = value
		}
	}
	config.AfterConnect = s.becomeService
	if s.pool, err = pgxpool.NewWithConfig(ctx, config); err != nil {
		return nil, fmt.Errorf("store: %w", err)
	}
	return s, nil
}

func milliseconds(d time.Duration) string { return fmt.Sprint(d.Milliseconds()) }

// becomeService gives a connection made under another login the rights of the service and no more, where that login may.
func (s *Store) becomeService(ctx context.Context, conn *pgx.Conn) error {
	var may bool
	err := conn.QueryRow(ctx, `SELECT current_user <> rolname AND pg_has_role(current_user, oid, 'MEMBER') FROM pg_roles WHERE rolname = $1
		UNION ALL SELECT false LIMIT 1`, serviceRole).Scan(&may)
	if err != nil || !may {
		return err
	}
	_, err = conn.Exec(ctx, `SET ROLE `+serviceRole)
	return err
}

// Close ends all connections. It waits for those in use.
func (s *Store) Close() { s.pool.Close() }

// Ready reports why the store cannot serve: the database does not answer, its schema is not the one this build wants, or
// the login could alter history.
func (s *Store) Ready(ctx context.Context) (err error) {
	defer wrap(ctx, &err, "Ready")
	wanted, err := embedded()
	if err != nil {
		return err
	}
	return s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		if err := checkSchema(ctx, tx, wanted); err != nil {
			return err
		}
		return checkLogin(ctx, tx)
	})
}

// checkLogin reports a session that could alter history. A table counts as history if the trigger that refuses changes
// guards it; the guard is the second line of defence, the login the first.
func checkLogin(ctx context.Context, q querier) error {
	var login, table string
	rows, err := q.Query(ctx, `SELECT current_user, c.relname FROM pg_trigger t JOIN pg_class c ON c.oid = t.tgrelid
		WHERE t.tgname = 'refuse_change' AND c.relnamespace = current_schema()::regnamespace
			AND (pg_has_role(current_user, c.relowner, 'USAGE') OR has_table_privilege(c.oid, 'UPDATE, DELETE, TRUNCATE'))
		ORDER BY c.relname LIMIT 1`)
	if err != nil {
		return err
	}
	if _, err := pgx.ForEachRow(rows, []any{&login, &table}, func() error { return nil }); err != nil {
		return err
	}
	if table != "" {
		return fmt.Errorf("the login %q could alter history (table %s); serve as %s, or as a login that may become it",
			login, table, serviceRole)
	}
	return nil
}
