package main

import (
	"context"
	"encoding/json"
	"fmt"

	"limitary/internal/store"
)

const recheckAbout = `Recomputes every track of a database from its results, versions and marks, and compares: place, version,
standing, statistics, lines and hits of every result, and the signals of every track. It changes nothing, and it may run
while the service does. Differences are printed, and it then exits with 1.`

// recheckAnswer is the answer as JSON.
type recheckAnswer struct {
	Tracks      int      `json:"tracks"`
	Results     int      `json:"results"`
	Signals     int      `json:"signals"`
	Differences []string `json:"differences"`
}

func runRecheck(ctx context.Context, env *environment, args []string) int {
	f := newFlags(env, "recheck [flags]", recheckAbout)
	var flags databaseFlags
	flags.add(f)
	asJSON := f.Bool("json", false, "write JSON")
	if _, code, done := f.parse(args, 0, 0); done {
		return code
	}
	return withStore(ctx, env, &flags, func(s *store.Store) int {
		report, err := s.Recheck(ctx, func(done, total int) {
			if env.Interactive {
				fmt.Fprintf(env.Stderr, "\rtrack %d of %d", done, total)
			}
		})
		if env.Interactive {
			fmt.Fprintln(env.Stderr)
		}
		if err != nil {
			return fail(env, "%v", err)
		}
		return printRecheck(env, report, *asJSON)
	})
}

func printRecheck(env *environment, r store.RecheckReport, asJSON bool) int {
	if asJSON {
		e := json.NewEncoder(env.Stdout)
		e.SetIndent("", "  ")
		answer := recheckAnswer{r.Tracks, r.Results, r.Signals, append([]string{}, r.Differences...)}
		if err := e.Encode(answer); err != nil {
			return fail(env, "%v", err)
		}
	} else {
		for _, d := range r.Differences {
			fmt.Fprintln(env.Stdout, d)
		}
		fmt.Fprintf(env.Stdout, "%d tracks, %d results, %d signals recomputed: %d differences\n", r.Tracks, r.Results, r.Signals, len(r.Differences))
	}
	if len(r.Differences) > 0 {
		return exitFailure
	}
	return exitOK
}
