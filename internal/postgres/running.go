//go:build unix

package postgres

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
)

// connectTimeout bounds one attempt on a local socket, which is answered at once or not at all.
const connectTimeout = 5 * time.Second

// Running finds the cluster that another process runs in a state directory. While that
// is starting, it waits for it, until the context ends. ok is false where nobody owns
// the directory, or there is none; an error means that there may be a cluster which
// cannot be reached from here.
func Running(ctx context.Context, dir string) (url func(database, user string) string, ok bool, err error) {
	p, err := resolve(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, false, nil
	}
	if err != nil {
		return nil, false, err
	}
	var socketDir string
	var last error
	err = poll(ctx, func() (bool, error) {
		owned, err := isOwned(p)
		if err != nil || !owned {
			return true, err
		}
		if socketDir, err = recorded(p); err != nil || socketDir == "" {
			return false, err
		}
		if last = ping(ctx, socketDir); last != nil {
			return false, hopeless(last)
		}
		ok = true
		return true, nil
	})
	if err != nil && ctx.Err() != nil {
		return nil, false, fmt.Errorf("the PostgreSQL in %s did not answer: %w (%v)", p, ctx.Err(), last)
	}
	if err != nil || !ok {
		return nil, false, err
	}
	return func(database, user string) string { return connString(socketDir, database, user) }, true, nil
}

// ping succeeds when Database takes connections.
func ping(ctx context.Context, socketDir string) error {
	conn, err := connect(ctx, socketDir, Database)
	if err != nil {
		return err
	}
	return conn.Close(ctx)
}

func connect(ctx context.Context, socketDir, database string) (*pgx.Conn, error) {
	ctx, cancel := context.WithTimeout(ctx, connectTimeout)
	defer cancel()
	return pgx.Connect(ctx, connString(socketDir, database, Owner))
}

// hopeless gives the errors of a connection that waiting does not cure. A socket that is
// not there, refuses, or answers that the server is starting or ending may yet change, and
// so may a database that is still to be made.
func hopeless(err error) error {
	if errors.Is(err, fs.ErrPermission) {
		return fmt.Errorf("the socket of PostgreSQL is not open to this user: run as the owner of the state directory or as root: %w", err)
	}
	var refusal *pgconn.PgError
	if !errors.As(err, &refusal) {
		return nil
	}
	switch refusal.Code {
	case "57P03", "57P01", "3D000", "53300": // cannot connect now, shutdown, no such database, too many connections
		return nil
	case "28000": // invalid authorization: there is no such role
		return fmt.Errorf("the cluster has no role %s, so Limitary did not make it: choose another directory: %w", Owner, err)
	}
	return err
}

// quoteListItem quotes a directory for a setting that is a list with commas.
func quoteListItem(dir string) string { return `"` + strings.ReplaceAll(dir, `"`, `""`) + `"` }
