package main

import (
	"context"
	"fmt"
	"path/filepath"

	"limitary/internal/install"
)

const installAbout = `Makes sure that PostgreSQL's server programs are on this machine, which a private database needs, and prints their
directory. As root on Debian it installs Debian's package where they are missing, without leaving a cluster on port
5432; otherwise it says what to run. Where they are there it changes nothing.`

func runInstall(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "install [flags]", installAbout)
	data := f.String("data", "", "`DIR` of a private PostgreSQL, whose version is then the one installed")
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	inside := ""
	if *data != "" {
		inside = filepath.Join(*data, "data")
	}
	bin, err := install.Ensure(ctx, inside, env.Stderr)
	if err != nil {
		return fail(env, "%v", err)
	}
	fmt.Fprintln(env.Stdout, bin)
	return exitOK
}
