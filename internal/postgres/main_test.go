//go:build unix

package postgres_test

import (
	"context"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/postgres"
)

// The test binary runs itself again as another process of ours: one that owns a
// cluster and is killed, or one that looks for a running cluster.
const (
	helperRole = "LIMITARY_POSTGRES_HELPER"
	helperDir  = "LIMITARY_POSTGRES_HELPER_DIR"
)

// patience bounds what should never be waited for: it only turns a hang into a failure.
const patience = 2 * time.Minute

func TestMain(m *testing.M) {
	role, dir := os.Getenv(helperRole), os.Getenv(helperDir)
	if role == "" {
		os.Exit(m.Run())
	}
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	var err error
	switch role {
	case "own":
		err = ownAndInsert(ctx, dir)
	case "find":
		err = findAndCount(ctx, dir)
	default:
		err = fmt.Errorf("unknown role %q", role)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	os.Exit(0)
}

// ownAndInsert starts a cluster, says what it does on stdout, and commits numbered rows,
// printing each number once it is acknowledged, until it is killed.
func ownAndInsert(ctx context.Context, dir string) error {
	c, err := postgres.Start(ctx, postgres.Options{Dir: dir, Durable: true, Log: os.Stdout})
	if err != nil {
		return err
	}
	conn, err := pgx.Connect(ctx, c.URL(postgres.Database, postgres.Owner))
	if err != nil {
		return err
	}
	if _, err := conn.Exec(ctx, `create table kept (n bigint primary key)`); err != nil {
		return err
	}
	for n := 1; ; n++ {
		if _, err := conn.Exec(ctx, `insert into kept values ($1)`, n); err != nil {
			return err
		}
		fmt.Println("committed", n)
	}
}

// findAndCount prints whether a cluster was found and how many rows it keeps.
func findAndCount(ctx context.Context, dir string) error {
	url, ok, err := postgres.Running(ctx, dir)
	if err != nil || !ok {
		fmt.Println("found", ok)
		return err
	}
	conn, err := pgx.Connect(ctx, url(postgres.Database, postgres.Owner))
	if err != nil {
		return err
	}
	var n int
	if err := conn.QueryRow(ctx, `select count(*) from kept`).Scan(&n); err != nil {
		return err
	}
	fmt.Println("found", ok, n)
	return conn.Close(ctx)
}

func helper(ctx context.Context, role, dir string) *exec.Cmd {
	cmd := exec.CommandContext(ctx, os.Args[0])
	cmd.Env = append(os.Environ(), helperRole+"="+role, helperDir+"="+dir)
	cmd.Stderr = os.Stderr
	return cmd
}

func testContext(tb testing.TB) context.Context {
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	tb.Cleanup(cancel)
	return ctx
}

// stateDir gives a directory that does not exist yet, in one that PostgreSQL's account
// can pass through, which the directories of testing are not.
func stateDir(tb testing.TB) string {
	tb.Helper()
	parent, err := os.MkdirTemp("", "limitary-postgres-")
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() {
		if err := os.RemoveAll(parent); err != nil {
			tb.Error(err)
		}
	})
	if err := os.Chmod(parent, 0o711); err != nil {
		tb.Fatal(err)
	}
	if parent, err = filepath.EvalSymlinks(parent); err != nil {
		tb.Fatal(err)
	}
	return filepath.Join(parent, "state")
}

// mustStart starts a cluster that is stopped at the end, if the test has not done so.
func mustStart(tb testing.TB, dir string) *postgres.Cluster {
	tb.Helper()
	c, err := postgres.Start(testContext(tb), postgres.Options{Dir: dir, Log: testLog{tb}})
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() { _ = c.Stop() })
	return c
}

func mustStop(tb testing.TB, c *postgres.Cluster) {
	tb.Helper()
	if err := c.Stop(); err != nil {
		tb.Fatal(err)
	}
}

func mustConnect(tb testing.TB, url string) *pgx.Conn {
	tb.Helper()
	conn, err := pgx.Connect(testContext(tb), url)
	if err != nil {
		tb.Fatal(err)
	}
	tb.Cleanup(func() { _ = conn.Close(context.Background()) })
	return conn
}

func mustExec(tb testing.TB, c *postgres.Cluster, sql string) {
	tb.Helper()
	if _, err := mustConnect(tb, c.URL(postgres.Database, postgres.Owner)).Exec(testContext(tb), sql); err != nil {
		tb.Fatal(err)
	}
}

func mustText(tb testing.TB, c *postgres.Cluster, sql string) string {
	tb.Helper()
	var got string
	if err := mustConnect(tb, c.URL(postgres.Database, postgres.Owner)).QueryRow(testContext(tb), sql).Scan(&got); err != nil {
		tb.Fatalf("%s: %v", sql, err)
	}
	return got
}

// wantText fails unless the error says each of the words.
func wantText(tb testing.TB, err error, words ...string) {
	tb.Helper()
	if err == nil {
		tb.Fatalf("got no error, want one that says %q", words)
	}
	for _, word := range words {
		if !strings.Contains(err.Error(), word) {
			tb.Errorf("got error %q, want it to say %q", err, word)
		}
	}
}

// ownedBy gives the attributes for a process of the same account as a file's.
func ownedBy(tb testing.TB, file string) *syscall.SysProcAttr {
	tb.Helper()
	info, err := os.Stat(file)
	if err != nil {
		tb.Fatal(err)
	}
	if os.Geteuid() != 0 {
		return &syscall.SysProcAttr{}
	}
	owner := info.Sys().(*syscall.Stat_t)
	return &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: owner.Uid, Gid: owner.Gid}}
}

type testLog struct{ tb testing.TB }

func (l testLog) Write(text []byte) (int, error) {
	l.tb.Log(strings.TrimSpace(string(text)))
	return len(text), nil
}

var _ io.Writer = testLog{}
