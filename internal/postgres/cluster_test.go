//go:build unix

package postgres_test

import (
	"bufio"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"github.com/jackc/pgx/v5"

	"limitary/internal/postgres"
)

func TestStartStopStartKeepsRows(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	c := mustStart(t, dir)
	url := c.URL(postgres.Database, postgres.Owner)
	mustExec(t, c, `create table kept as select 'still here' as what`)
	mustStop(t, c)
	select {
	case <-c.Done():
	default:
		t.Error("Done is open after Stop")
	}
	if err := c.Stop(); err != nil {
		t.Errorf("second Stop: got %v, want nil", err)
	}
	c = mustStart(t, dir)
	if got := c.URL(postgres.Database, postgres.Owner); got != url {
		t.Errorf("address after a restart: got %s, want %s", got, url)
	}
	if got, want := mustText(t, c, `select what from kept`), "still here"; got != want {
		t.Errorf("got %q, want %q", got, want)
	}
}

func TestClusterIsPrivateAndDurable(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	c, err := postgres.Start(testContext(t), postgres.Options{Dir: dir, Durable: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = c.Stop() })
	for sql, want := range map[string]string{
		`show listen_addresses`:   "",
		`show fsync`:              "on",
		`show full_page_writes`:   "on",
		`show synchronous_commit`: "on",
		`show data_checksums`:     "on",
		`show server_encoding`:    "UTF8",
		`show timezone`:           "UTC",
		`show max_connections`:    fmt.Sprint(postgres.MaxConnections),
		`select datcollate from pg_database where datname = 'limitary'`:                           "C.UTF-8",
		`select string_agg(rolname, ',') from pg_roles where rolsuper`:                            postgres.Owner,
		`select string_agg(distinct auth_method, ',') from pg_hba_file_rules where type<>'local'`: "reject",
	} {
		if got := mustText(t, c, sql); got != want {
			t.Errorf("%s: got %q, want %q", sql, got, want)
		}
	}
	for _, name := range []string{"run", "data"} {
		info, err := os.Stat(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		if got, want := info.Mode().Perm(), os.FileMode(0o700); got != want {
			t.Errorf("%s: got mode %o, want %o", name, got, want)
		}
	}
}

// The owner is killed between two commits, or within one: every commit it had
// acknowledged must be there when the next owner starts at once, while the first
// one's PostgreSQL is still shutting down.
func TestKilledOwnerLosesNothing(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	acknowledged := killOwnerAfter(t, dir, "committed 50")
	c := mustStart(t, dir)
	if got := mustText(t, c, fmt.Sprintf(`select count(*)::text from kept where n <= %d`, acknowledged)); got != fmt.Sprint(acknowledged) {
		t.Errorf("got %s of the rows acknowledged, want all %d", got, acknowledged)
	}
	if got, want := mustText(t, c, fmt.Sprintf(`select (max(n) <= %d)::text from kept`, acknowledged+1)), "true"; got != want {
		t.Error("more than one row was committed after the last one acknowledged")
	}
}

func TestOwnerKilledDuringInitdbLeavesNothingInTheWay(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	killOwnerAfter(t, dir, "making an empty PostgreSQL cluster")
	mustStart(t, dir)
}

// killOwnerAfter runs an owner of dir, kills it once it has printed a line that begins
// with prefix, and gives the number of the last row it says it has committed.
func killOwnerAfter(t *testing.T, dir, prefix string) (acknowledged int) {
	t.Helper()
	cmd := helper(testContext(t), "own", dir)
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	killed := false
	for lines := bufio.NewScanner(out); lines.Scan(); {
		_, _ = fmt.Sscanf(lines.Text(), "committed %d", &acknowledged)
		if !killed && strings.HasPrefix(lines.Text(), prefix) {
			killed = true
			if err := cmd.Process.Kill(); err != nil {
				t.Fatal(err)
			}
		}
	}
	err = cmd.Wait()
	if !killed {
		t.Fatalf("the owner ended by itself: %v", err)
	}
	return acknowledged
}

func TestKilledPostmasterIsNoticedAndRecovered(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	c := mustStart(t, dir)
	mustExec(t, c, `create table kept as select generate_series(1, 1000) as n`)
	// A busy backend outlives its postmaster for a moment: Start must wait for it.
	idle := mustConnect(t, c.URL(postgres.Database, postgres.Owner))
	if err := syscall.Kill(c.PID(), syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	<-c.Done()
	wantText(t, c.Err(), "killed", filepath.Join(dir, "log"))
	if err := c.Stop(); err == nil {
		t.Error("Stop after a crash: got nil, want how PostgreSQL ended")
	}
	c = mustStart(t, dir)
	if got, want := mustText(t, c, `select count(*)::text from kept`), "1000"; got != want {
		t.Errorf("got %s rows, want %s", got, want)
	}
	if err := idle.Ping(testContext(t)); err == nil {
		t.Error("a connection survived the death of its server")
	}
}

func TestSecondOwnerIsRefused(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	c := mustStart(t, dir)
	pid := c.PID()
	_, err := postgres.Start(testContext(t), postgres.Options{Dir: dir})
	var inUse *postgres.InUseError
	if !errors.As(err, &inUse) {
		t.Fatalf("got %v, want an InUseError", err)
	}
	if got, want := *inUse, (postgres.InUseError{Dir: dir, PID: os.Getpid()}); got != want {
		t.Errorf("got %+v, want %+v", got, want)
	}
	wantText(t, err, dir, "in use by process", "another directory")
	mustExec(t, c, `select`)
	if got := c.PID(); got != pid || c.Err() != nil {
		t.Errorf("the first owner's PostgreSQL was disturbed: process %d was %d, %v", got, pid, c.Err())
	}
}

func TestLongDirectoryGetsAShortSocket(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(stateDir(t), strings.Repeat("long, with a comma and a \" ", 5))
	c := mustStart(t, dir)
	mustExec(t, c, `create table kept as select generate_series(1, 3) as n`)
	config, err := pgx.ParseConfig(c.URL(postgres.Database, postgres.Owner))
	if err != nil {
		t.Fatal(err)
	}
	if strings.HasPrefix(config.Host, dir) {
		t.Fatalf("the socket is in %s, which is too long to be true", config.Host)
	}
	info, err := os.Stat(config.Host)
	if err != nil {
		t.Fatal(err)
	}
	if got, want := info.Mode().Perm(), os.FileMode(0o700); got != want {
		t.Errorf("socket directory: got mode %o, want %o", got, want)
	}
	if got, want := mustFind(t, dir), "found true 3"; got != want {
		t.Errorf("another process: got %q, want %q", got, want)
	}
	mustStop(t, c)
	if _, err := os.Stat(config.Host); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the socket directory is still there after Stop: %v", err)
	}
	if got, want := mustStart(t, dir).URL("", ""), c.URL("", ""); got != want {
		t.Errorf("address after a restart: got %s, want %s", got, want)
	}
}

func TestRunning(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	if got, want := mustFind(t, dir), "found false"; got != want {
		t.Errorf("no directory: got %q, want %q", got, want)
	}
	c := mustStart(t, dir)
	mustExec(t, c, `create table kept as select generate_series(1, 7) as n`)
	if got, want := mustFind(t, dir), "found true 7"; got != want {
		t.Errorf("running: got %q, want %q", got, want)
	}
	mustStop(t, c)
	if got, want := mustFind(t, dir), "found false"; got != want {
		t.Errorf("stopped: got %q, want %q", got, want)
	}
}

// mustFind has another process look for the cluster in dir.
func mustFind(t *testing.T, dir string) string {
	t.Helper()
	out, err := helper(testContext(t), "find", dir).Output()
	if err != nil {
		t.Fatal(err)
	}
	return strings.TrimSpace(string(out))
}

func TestRunningWaitsForAStartingCluster(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	// The lock is taken before anything else, so that a looker who comes from then on
	// must get the address, however long the cluster takes.
	started := make(chan *postgres.Cluster)
	making := make(chan struct{})
	go func() {
		c, err := postgres.Start(testContext(t), postgres.Options{Dir: dir, Log: signalWriter(making)})
		if err != nil {
			t.Error(err)
		}
		started <- c
	}()
	<-making
	url, ok, err := postgres.Running(testContext(t), dir)
	c := <-started
	if c == nil {
		t.FailNow()
	}
	t.Cleanup(func() { _ = c.Stop() })
	if err != nil || !ok {
		t.Fatalf("got %v, %v, want the cluster that was starting", ok, err)
	}
	if got, want := url("a", "b"), c.URL("a", "b"); got != want {
		t.Errorf("got %s, want %s", got, want)
	}
}

// signalWriter closes its channel when it is first written to.
type signalWriter chan struct{}

func (w signalWriter) Write(text []byte) (int, error) {
	select {
	case <-w:
	default:
		close(w)
	}
	return len(text), nil
}
