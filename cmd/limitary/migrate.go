package main

import (
	"context"
	"errors"
	"fmt"

	"limitary/internal/store"
)

const migrateAbout = `Brings the schema of a database up to date, as the database's owner. It makes the login limitary_service, which
"limitary serve" uses: it may add to history, but not alter it. Running it again changes nothing.`

func runMigrate(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "migrate [flags]", migrateAbout)
	var flags databaseFlags
	flags.add(f)
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	db, err := flags.open(ctx, env)
	if err != nil {
		return fail(env, "%v", err)
	}
	applied, err := store.Migrate(ctx, db.ownerURL)
	if err = errors.Join(err, db.close()); err != nil {
		return fail(env, "%v", err)
	}
	fmt.Fprintf(env.Stdout, "%d migrations applied, the schema is up to date\n", applied)
	return exitOK
}
