package main

import (
	"context"
	"fmt"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials/insecure"

	"limitary/internal/definition"
	"limitary/internal/demo"
	"limitary/internal/server"
	"limitary/internal/store"
)

// The principals of the demo: a version needs two people, and posting, reviewing and administration have one each.
// The key of sheets can only read: it stands in addresses.
const (
	demoLIMS     = "demo-lims"
	demoAuthor   = "demo-author"
	demoApprover = "demo-approver"
	demoReviewer = "demo-reviewer"
	demoAdmin    = "demo-admin"
	demoSheet    = "demo-sheet"
)

var demoRoles = []struct {
	principal string
	role      definition.Permission
	does      string
}{
	{demoLIMS, definition.Poster, "posts results"},
	{demoAuthor, definition.Author, "makes charts and proposes versions"},
	{demoApprover, definition.Approver, "approves them, confirms requests"},
	{demoReviewer, definition.Reviewer, "decides on signals, releases tracks"},
	{demoAdmin, definition.Admin, "makes keys, archives charts"},
	{demoSheet, definition.Reader, "reads, for cells of a workbook"},
}

// demoKeyLife is short: the demo's keys are made anew at every start.
const demoKeyLife = 7 * 24 * time.Hour

// demoKeys makes a fresh key for each of the demo's principals; the tokens are by principal.
func demoKeys(ctx context.Context, env *environment, s *store.Store) (map[string]string, error) {
	tokens := map[string]string{}
	for _, d := range demoRoles {
		k := definition.Key{
			Principal: d.principal, Roles: []definition.Permission{d.role}, ExpiresAt: env.Now().Add(demoKeyLife).UTC().Truncate(time.Second),
		}
		if d.principal == demoSheet {
			k.Labels = demo.Labels() // a key in an address sees no more than it must
		}
		_, token, err := makeKey(ctx, s, k)
		if err != nil {
			return nil, fmt.Errorf("making the demo's keys: %w", err)
		}
		tokens[d.principal] = token
	}
	return tokens, nil
}

// tryDemo is what try adds to serve: keys, the demo, and the text that says what to do with them.
func tryDemo(ctx context.Context, env *environment, flags databaseFlags, srv *server.Server, s *store.Store) error {
	if err := onlyDemo(ctx, s); err != nil {
		return err
	}
	tokens, err := demoKeys(ctx, env, s)
	if err != nil {
		return err
	}
	sum, err := loadDemo(ctx, env, srv.GRPCAddress(), tokens)
	if err != nil {
		return fmt.Errorf("loading the demo: %w", err)
	}
	return printTry(env.Stdout, tryText{
		HTTP: "http://" + srv.HTTPAddress(), GRPC: srv.GRPCAddress(), Data: flags.data, Tokens: tokens, Summary: sum, Now: env.Now(),
	})
}

// onlyDemo refuses a database that holds charts and not the demo: somebody works in it.
func onlyDemo(ctx context.Context, s *store.Store) error {
	list, _, err := s.ListCharts(ctx, atDatabase, store.Page{Size: 1}, nil, true)
	if err != nil || len(list) == 0 {
		return err
	}
	ours, _, err := s.ListCharts(ctx, atDatabase, store.Page{Size: 1}, demo.Labels(), true)
	if err == nil && len(ours) == 0 {
		err = fmt.Errorf("the database holds charts, such as %q, and not the demo, which must not get among them: give an empty database", list[0].Name)
	}
	return err
}

// loadDemo posts the demo through the API at a gRPC address, as the principals whose tokens it gets.
func loadDemo(ctx context.Context, env *environment, address string, tokens map[string]string) (demo.Summary, error) {
	conn, err := grpc.NewClient(address, grpc.WithTransportCredentials(insecure.NewCredentials()), grpc.WithUserAgent("limitary-try"))
	if err != nil {
		return demo.Summary{}, err
	}
	defer conn.Close()
	shown := false
	sum, err := demo.Load(ctx, conn, demo.Tokens{
		Admin: tokens[demoAdmin], Author: tokens[demoAuthor], Approver: tokens[demoApprover],
		Poster: tokens[demoLIMS], Reviewer: tokens[demoReviewer],
	}, env.Now(), func(done, total int) {
		switch {
		case env.Interactive:
			fmt.Fprintf(env.Stderr, "\rloading the demo: %d of %d results", done, total)
		case !shown:
			fmt.Fprintf(env.Stderr, "loading the demo: %d results\n", total)
		}
		shown = true
	})
	if shown && env.Interactive {
		fmt.Fprintln(env.Stderr)
	}
	return sum, err
}
