package main

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"io"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/postgres"
	"limitary/internal/store"
)

// helperTry makes the test binary run as limitary itself, as a process that can be killed.
const helperTry = "LIMITARY_TEST_AS_PROGRAM"

func init() {
	if os.Getenv(helperTry) != "" {
		main()
	}
}

// tryPatience only turns a hang into a failure: a start takes some seconds.
const tryPatience = 3 * time.Minute

// tried is a running "limitary try".
type tried struct {
	cmd    *exec.Cmd
	text   string
	stdout io.Reader
	stderr *bytes.Buffer
}

// startTry starts the program on a directory and waits for the end of its text.
func startTry(t *testing.T, dir string) *tried {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), tryPatience)
	t.Cleanup(cancel)
	cmd := exec.CommandContext(ctx, os.Args[0], "try", "--data", dir, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0")
	cmd.Env = append(os.Environ(), helperTry+"=1")
	p := &tried{cmd: cmd, stderr: &bytes.Buffer{}}
	cmd.Stderr = p.stderr
	out, err := cmd.StdoutPipe()
	if err == nil {
		err = cmd.Start()
	}
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = cmd.Process.Kill(); _ = cmd.Wait() }) // where the test has not done so
	lines := bufio.NewReader(out)
	p.stdout = lines
	for {
		line, err := lines.ReadString('\n')
		p.text += line
		if strings.HasPrefix(line, "Serving until stopped") {
			return p
		}
		if err != nil {
			_ = cmd.Wait()
			t.Fatalf("try ended with %v after %q; it said:\n%s", err, p.text, p.stderr)
		}
	}
}

// traversableDir is a directory that the account of PostgreSQL can pass through, which t.TempDir is not for root.
func traversableDir(t *testing.T) string {
	t.Helper()
	dir, err := os.MkdirTemp("", "limitary-try-test-*")
	if err == nil {
		err = os.Chmod(dir, 0o711)
	}
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = os.RemoveAll(dir) })
	return dir
}

// The newcomer's whole way: the three calls that are printed work as they stand; killed without warning and started
// again, nothing is lost and nothing is loaded twice; stopped in order, it ends well.
func TestTryKeepsEverythingThroughKill(t *testing.T) {
	dir := filepath.Join(traversableDir(t), "state")
	first := startTry(t, dir)
	wantText(t, first.text, "Limitary is running.", "17 charts, 3197 control results", "1 of 18 tracks on hold", dir, "not a compliance, release or", "Fresh keys")
	calls := callsIn(t, first.text)
	if len(calls) != 3 {
		t.Fatalf("got %d calls in the text, want 3:\n%s", len(calls), first.text)
	}
	wantText(t, calls[0].do(t), `"POST_OUTCOME_ACCEPTED"`, `"standing":"STANDING_STOP"`, `"TRACK_STATE_HOLD"`, `"instruction":"Do not report the run.`)
	wantText(t, calls[1].do(t), `"completed":true`, `"lookFirst"`, `"arithmetic":["`, definition.SafetyText)
	wantText(t, calls[2].do(t), `"rule":"nelson-1984/1"`, `"chart":"nitrate-ic2-mid"`, `"chart":"lead-icpms-low"`)
	wantText(t, calls[0].do(t), `"POST_OUTCOME_DUPLICATE"`)

	limit := fetchSheet(t, first.text)
	if n, err := strconv.ParseFloat(limit, 64); err != nil || n < 5 || n > 5.241 {
		t.Errorf("the cell that is printed gives %q, want a line below the 5.241 that was too high", limit)
	}

	if err := first.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	_ = first.cmd.Wait() // it was killed, which is what Wait says
	second := startTry(t, dir)
	wantText(t, second.text, "Limitary is running, with everything that was there before.", "17 charts, 3198 control results", "2 of 18 tracks on hold")
	again := callsIn(t, second.text)
	again[0].body = calls[0].body // what was acknowledged before the kill, under a key made after it
	wantText(t, again[0].do(t), `"POST_OUTCOME_DUPLICATE"`, `"standing":"STANDING_STOP"`)
	wantText(t, again[2].do(t), `"rule":"nelson-1984/1"`)

	var out, errs bytes.Buffer
	if code := run(t.Context(), testEnvironment(&out, &errs), []string{"recheck", "--data", dir}); code != exitOK || !strings.Contains(out.String(), "3199 results") {
		t.Errorf("recheck: got code %d, %q %q; want 3199 results, the repeat among them, and no differences", code, &out, &errs)
	}
	if err := second.cmd.Process.Signal(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	if _, err := io.Copy(io.Discard, second.stdout); err != nil {
		t.Error(err)
	}
	if err := second.cmd.Wait(); err != nil {
		t.Errorf("stopped by SIGTERM: got %v, want a good end; it said:\n%s", err, second.stderr)
	}
}

// fetchSheet fetches the address that is printed for a cell.
func fetchSheet(t *testing.T, text string) string {
	t.Helper()
	at := strings.Index(text, "/sheet/limit/")
	if at < 0 {
		t.Fatalf("no address for a cell in:\n%s", text)
	}
	address := text[strings.LastIndex(text[:at], "\n")+1:]
	address, _, _ = strings.Cut(address, "\n")
	resp, err := http.Get(address)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	body, err := io.ReadAll(resp.Body)
	if err != nil {
		t.Fatal(err)
	}
	return string(body)
}

func testEnvironment(stdout, stderr io.Writer) *environment {
	return &environment{Stdin: strings.NewReader(""), Stdout: stdout, Stderr: stderr, Getenv: func(string) string { return "" }, Now: time.Now}
}

func wantText(t *testing.T, got string, parts ...string) {
	t.Helper()
	for _, p := range parts {
		if !strings.Contains(got, p) {
			t.Errorf("got %q\nwant %q in it", got, p)
		}
	}
}

func TestTryNamesTheBusyPort(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	busy, dir := l.Addr().String(), filepath.Join(t.TempDir(), "state")
	for _, flag := range []string{"--http", "--grpc"} {
		var out, errs bytes.Buffer
		args := []string{"try", "--data", dir, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0", flag, busy}
		if code := run(t.Context(), testEnvironment(&out, &errs), args); code != exitFailure {
			t.Errorf("%s: got code %d, want %d", flag, code, exitFailure)
		}
		wantText(t, errs.String(), flag+" "+busy, "in use", "--http 127.0.0.1:", "--grpc 127.0.0.1:")
	}
	if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("got %v for the directory, want it not made", err)
	}
}

func TestTryTakesOneDatabase(t *testing.T) {
	var out, errs bytes.Buffer
	code := run(t.Context(), testEnvironment(&out, &errs), []string{"try", "--data", t.TempDir(), "--database", "postgres://nowhere"})
	if code != exitUsage {
		t.Errorf("got code %d, want %d", code, exitUsage)
	}
	wantText(t, errs.String(), "--database and --data exclude each other")
}

// tryDatabase starts a PostgreSQL that stands for somebody's server and gives the address of its database.
func tryDatabase(t *testing.T) string {
	t.Helper()
	c, err := postgres.Start(t.Context(), postgres.Options{Dir: filepath.Join(traversableDir(t), "pg")})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := c.Stop(); err != nil {
			t.Error(err)
		}
	})
	return c.URL(postgres.Database, postgres.Owner)
}

// textPipe passes what is written on, and stops the program once the text has ended.
type textPipe struct {
	bytes.Buffer
	stop func()
}

func (p *textPipe) Write(b []byte) (int, error) {
	n, err := p.Buffer.Write(b)
	if strings.Contains(p.String(), "Serving until stopped") {
		p.stop()
	}
	return n, err
}

func TestTryOnADatabaseGiven(t *testing.T) {
	url := tryDatabase(t)
	for _, want := range []string{"Limitary is running.", "with everything that was there before."} {
		ctx, stop := context.WithTimeout(t.Context(), tryPatience)
		out, errs := &textPipe{stop: stop}, &bytes.Buffer{}
		code := run(ctx, testEnvironment(out, errs), []string{"try", "--database", url, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0"})
		stop()
		if code != exitOK {
			t.Fatalf("got code %d, %s", code, errs)
		}
		wantText(t, out.String(), want, "3197 control results")
		if strings.Contains(out.String(), "kept between starts") {
			t.Error("the text names a directory, though the database is another's")
		}
	}
}

func TestTryStaysOutOfADatabaseInUse(t *testing.T) {
	url := tryDatabase(t)
	if _, err := store.Migrate(t.Context(), url); err != nil {
		t.Fatal(err)
	}
	s, err := store.Open(t.Context(), url, store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	own := definition.Chart{Name: "own", Kind: chart.Individuals, SubgroupSize: 1, Unit: "mg/L"}
	if _, err := s.CreateChart(t.Context(), atDatabase, onceOnly("test", "own"), own); err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithTimeout(t.Context(), tryPatience)
	defer stop()
	var out, errs bytes.Buffer
	if code := run(ctx, testEnvironment(&out, &errs), []string{"try", "--database", url, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0"}); code != exitFailure {
		t.Errorf("got code %d, want %d", code, exitFailure)
	}
	wantText(t, errs.String(), `charts, such as "own"`)
	list, _, err := s.ListCharts(t.Context(), atDatabase, store.Page{Size: 10}, nil, true)
	if err != nil || len(list) != 1 {
		t.Errorf("got charts %v, %v; want the one that was there", list, err)
	}
}
