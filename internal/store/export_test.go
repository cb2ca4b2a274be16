package store

import (
	"context"
	"io/fs"
)

// MigrateFiles migrates with other files than those built in.
func MigrateFiles(ctx context.Context, ownerURL string, files fs.FS) (int, error) {
	steps, err := readMigrations(files)
	if err != nil {
		return 0, err
	}
	return migrate(ctx, ownerURL, steps)
}

// LoginOf gives the role a store's connections act as.
func LoginOf(ctx context.Context, s *Store) (login string) {
	if err := s.pool.QueryRow(ctx, `SELECT current_user`).Scan(&login); err != nil {
		return err.Error()
	}
	return login
}

// SignalsSQL gives the statement of a query for signals and its parameters.
func SignalsSQL(f SignalFilter, a Actor, chartID int64, limit int) (string, []any) {
	c := f.conditions(a, chartID)
	c.add(`true`+signalsOrder+` LIMIT $?`, limit)
	return `SELECT ` + signalColumns + ` FROM ` + signalTables + ` WHERE ` + c.where(), c.args
}
