package main

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
	"limitary/internal/postgres"
)

// lockedBuffer may be written to by a running service while a test reads it.
type lockedBuffer struct {
	mu  sync.Mutex
	buf bytes.Buffer
	// grown is sent to, without waiting, whenever there is more.
	grown chan struct{}
}

func newLockedBuffer() *lockedBuffer { return &lockedBuffer{grown: make(chan struct{}, 1)} }

func (b *lockedBuffer) Write(p []byte) (int, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	select {
	case b.grown <- struct{}{}:
	default:
	}
	return b.buf.Write(p)
}

func (b *lockedBuffer) String() string {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.String()
}

// ran is what a command came to.
type ran struct {
	code        int
	out, errors string
}

// shell runs a command as a person in a shell would, with a token in the environment where one is given.
func shell(t *testing.T, token string, args ...string) ran {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), tryPatience)
	defer cancel()
	var out, errs bytes.Buffer
	env := &environment{Stdin: strings.NewReader(""), Stdout: &out, Stderr: &errs, Now: time.Now, Getenv: func(name string) string {
		switch name {
		case envToken:
			return token
		case "HOME":
			return t.TempDir()
		}
		return ""
	}}
	return ran{run(ctx, env, args), out.String(), errs.String()}
}

func (r ran) want(t *testing.T, code int, in ...string) ran {
	t.Helper()
	if r.code != code {
		t.Errorf("got exit code %d, want %d\n%s%s", r.code, code, r.out, r.errors)
	}
	for _, text := range in {
		if !strings.Contains(r.out+r.errors, text) {
			t.Errorf("%q is not in\n%s%s", text, r.out, r.errors)
		}
	}
	return r
}

var servingLine = regexp.MustCompile(`serving HTTP on (\S+) and gRPC on (\S+)`)

// serveInBackground runs "limitary serve" until the test ends or stop is called.
func serveInBackground(t *testing.T, args ...string) (grpcAddress string, stop func() ran) {
	t.Helper()
	ctx, cancel := context.WithCancel(context.Background())
	errs := newLockedBuffer()
	env := &environment{Stdin: strings.NewReader(""), Stdout: &bytes.Buffer{}, Stderr: errs, Now: time.Now, Getenv: func(string) string { return "" }}
	ended := make(chan int, 1)
	go func() {
		ended <- run(ctx, env, append([]string{"serve", "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0"}, args...))
	}()
	stop = sync.OnceValue(func() ran { cancel(); return ran{<-ended, "", errs.String()} })
	t.Cleanup(func() { stop() })
	patience := time.After(tryPatience)
	for {
		if m := servingLine.FindStringSubmatch(errs.String()); m != nil {
			return m[2], stop
		}
		select {
		case <-errs.grown:
		case code := <-ended:
			ended <- code
			t.Fatalf("serve ended with %d:\n%s", code, errs)
		case <-patience:
			t.Fatalf("serve does not serve:\n%s", errs)
		}
	}
}

func writeFile(t *testing.T, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// controls are ten control results about 10, and two later ones of which one lies far out.
const controls = `when,id,value
2026-01-01T08:00:00Z,c1,10.0
2026-01-02T08:00:00Z,c2,10.2
2026-01-03T08:00:00Z,c3,9.9
2026-01-04T08:00:00Z,c4,10.1
2026-01-05T08:00:00Z,c5,9.8
2026-01-06T08:00:00Z,c6,10.0
2026-01-07T08:00:00+01:00,c7,10.3
2026-01-08T08:00:00Z,c8,9.9
2026-01-09T08:00:00Z,c9,10.1
2026-01-10T08:00:00Z,c10,9.9
`

const later = `when,id,value
2026-02-01T08:00:00Z,d1,10.00
2026-02-02T08:00:00Z,d2,12.5
2026-02-03T08:00:00,d3,10.1
`

func TestTheMainJobFromTheShell(t *testing.T) {
	dir := traversableDir(t)
	address, stop := serveInBackground(t, "--data", dir)
	key := func(name, role string) string {
		t.Helper()
		r := shell(t, "", "key", "create", "--data", dir, "--name", name, "--role", role).want(t, exitOK, "not shown again")
		return strings.TrimSpace(r.out)
	}
	author, approver, poster := key("ann", "author,approver"), key("bea", "approver"), key("lims", "poster")
	on := func(token string, args ...string) ran { return shell(t, token, append(args, "--server", address)...) }

	on(author, "chart", "create", "nitrate", "--kind", "individuals", "--unit", "mg/L", "--label", "site=harwick").want(t, exitOK, "nitrate", "site=harwick")
	on(poster, "chart", "create", "lead", "--kind", "individuals", "--unit", "ug/L").want(t, exitFailure, "role author")
	on(author, "chart", "list").want(t, exitOK, "nitrate")

	post := func(text string) ran {
		return on(poster, "post", writeFile(t, "results.csv", text), "--chart", "nitrate", "--source", "lims", "--id", "id", "--time", "when")
	}
	post(controls).want(t, exitOK, "10 ACCEPTED", "NO_VERSION_IN_FORCE")
	post(controls).want(t, exitOK, "10 DUPLICATE")
	post(strings.Replace(controls, "10.2", "10.20", 1)).want(t, exitFailure, "9 DUPLICATE", "1 CONFLICT")

	propose := []string{"version", "propose", "nitrate", "--rules", "western-electric-1956", "--from", "2026-01-01T00:00:00Z", "--to", "2026-02-01T00:00:00Z",
		"--exclude-result", "lims/c7=spilt", "--effective-from", "2026-02-01T00:00:00Z", "--reason", "first limits", "--on-stop", "Stop the run."}
	on(author, propose...).want(t, exitOK, "PROPOSED", "10 results, 1 of them excluded")
	on(author, "version", "propose", "nitrate", "--rules", "shewhart-1931", "--effective-from", "2026-01-06T00:00:00Z", "--reason", "all before").
		want(t, exitOK, "5 results, 0 of them excluded")
	shown := on(approver, "version", "show", "nitrate", "1", "--json").want(t, exitOK)
	var v pb.GetVersionResponse
	if err := protojson.Unmarshal([]byte(shown.out), &v); err != nil {
		t.Fatalf("--json is not the contract's: %v\n%s", err, shown.out)
	}
	// By hand: moving ranges of the nine values, none across the excluded one: 0.2 0.3 0.2 0.3 0.2 | 0.2 0.2; the mean of
	// these seven, 1.6/7, over d2 = 1.128379 is 0.202567, published to four significant digits.
	if got := v.Version.ProcessSigma; got != 0.2026 {
		t.Errorf("got process sigma %v, want 0.2026", got)
	}
	digest := v.Version.Digest
	on(author, "version", "approve", "nitrate", "1", "--digest", digest).want(t, exitFailure, "proposed by \"ann\"")
	on(approver, "version", "approve", "nitrate", "1", "--digest", digest).want(t, exitOK, "APPROVED")
	on(approver, "version", "list", "nitrate").want(t, exitOK, "yes")

	post(later).want(t, exitFailure, "2 ACCEPTED", "1 REFUSED", "no offset", "STOP", "western-electric-1956/1")
	on(poster, "chart", "show", "nitrate").want(t, exitOK, "HOLD")
	shell(t, "", "recheck", "--data", dir).want(t, exitOK, "1 tracks, 12 results", "0 differences")
	shell(t, "", "key", "list", "--data", dir).want(t, exitOK, "ann", "author,approver")
	shell(t, "", "key", "list", "--data", dir, "--json").want(t, exitOK, `"principal": "ann"`, `"ROLE_AUTHOR"`)
	shell(t, "", "key", "revoke", strings.Split(poster, "_")[1], "--data", dir, "--json").want(t, exitOK, `"revokeTime"`)
	post(later).want(t, exitFailure, "Unauthenticated")
	on(approver, "version", "withdraw", "nitrate", "1", "--reason", "wrong material", "--rejudge").want(t, exitOK, "APPROVED", "waits for another principal", "2 verdicts")
	on(approver, "version", "reject", "nitrate", "1", "--reason", "x").want(t, exitFailure, "FailedPrecondition")
	stop().want(t, exitOK, "stopped")
	on(approver, "chart", "list").want(t, exitFailure, "Unavailable")
}

func TestADatabaseByItsAddressIsNotMigratedBehindAnyonesBack(t *testing.T) {
	ctx, cancel := context.WithTimeout(context.Background(), tryPatience)
	defer cancel()
	cluster, err := postgres.Start(ctx, postgres.Options{Dir: traversableDir(t)})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := cluster.Stop(); err != nil {
			t.Error(err)
		}
	})
	conn, err := pgx.Connect(ctx, cluster.URL(postgres.Database, postgres.Owner))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := conn.Exec(ctx, `CREATE ROLE limitary_service LOGIN`); err != nil {
		t.Fatal(err)
	}
	_ = conn.Close(ctx)
	owner, service := cluster.URL(postgres.Database, postgres.Owner), cluster.URL(postgres.Database, serviceLogin)
	shell(t, "", "serve", "--database", service, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0").want(t, exitFailure, "limitary migrate")
	shell(t, "", "key", "create", "--database", service, "--name", "ann", "--role", "author").want(t, exitFailure, "limitary migrate")
	shell(t, "", "migrate", "--database", owner).want(t, exitOK, "up to date")
	shell(t, "", "migrate", "--database", owner).want(t, exitOK, "0 migrations applied")
	_, stop := serveInBackground(t, "--database", service)
	stop().want(t, exitOK)
	shell(t, "", "serve", "--database", service, "--data", "x").want(t, exitFailure, "exclude each other")
}

func TestCallsThatAreWrongSayHowTheyAreRight(t *testing.T) {
	for _, c := range []struct {
		args string
		code int
		in   string
	}{
		{"", exitUsage, "usage: limitary COMMAND"},
		{"help", exitOK, "usage: limitary COMMAND"},
		{"--help", exitOK, "recheck"},
		{"nosuch", exitUsage, `no command "nosuch"`},
		{"serve --nosuch", exitUsage, "usage: limitary serve"},
		{"serve extra", exitUsage, "one argument too many"},
		{"serve --help", exitOK, "--tls-cert"},
		{"serve --http 0.0.0.0:0 --database postgres://127.0.0.1:1/x", exitFailure, ""},
		{"serve --log-level loud", exitUsage, "want debug, info, warn or error"},
		{"serve --timeout -1s", exitUsage, "more than 0"},
		{"key", exitUsage, "limitary key create"},
		{"key nosuch", exitUsage, `no "key nosuch"`},
		{"key --help", exitOK, "limitary key create"},
		{"key create --name ann", exitUsage, "--name and --role are required"},
		{"key create --name ann --role king", exitUsage, "want reader, poster"},
		{"key create --name ann --role reader --label site", exitUsage, "KEY=VALUE"},
		{"key create --name ann --role reader --life 99999h", exitUsage, "five years"},
		{"chart create", exitUsage, "one NAME is needed"},
		{"chart create nitrate --name lead", exitUsage, "one NAME is needed"},
		{"chart show", exitUsage, "argument is missing"},
		{"chart create nitrate --kind pie --unit 1", exitUsage, "want one of individuals"},
		{"chart list", exitFailure, "set LIMITARY_TOKEN"},
		{"version", exitOK, "judge number 1"},
		{"--version", exitOK, "judge number 1"},
		{"version show nitrate one", exitUsage, "number of a version"},
		{"version approve nitrate 1", exitUsage, "--digest is required"},
		{"version reject nitrate 1", exitUsage, "--reason is required"},
		{"version propose nitrate --rules x", exitUsage, "are required"},
		{"version propose nitrate --rules x --reason y --effective-from yesterday", exitUsage, "RFC 3339"},
		{"version propose nitrate --rules x --reason y --effective-from 2026-01-01T00:00:00Z --from 2026-01-01T00:00:00Z", exitUsage, "belong together"},
		{"version propose nitrate --rules x --reason y --effective-from 2026-01-01T00:00:00Z --estimator guess", exitUsage, "mean_moving_range"},
		{"post results.csv", exitUsage, "--chart, --source, --id and --time are required"},
		{"post nosuch.csv --chart a --source b --id c --time d", exitFailure, "nosuch.csv"},
	} {
		t.Run(c.args, func(t *testing.T) {
			r := shell(t, "", strings.Fields(c.args)...).want(t, c.code, c.in)
			if c.code == exitOK && r.errors != "" || c.code != exitOK && r.out != "" {
				t.Errorf("results and the rest are mixed up: out %q, errors %q", r.out, r.errors)
			}
		})
	}
}
