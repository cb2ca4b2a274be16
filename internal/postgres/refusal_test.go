//go:build unix

package postgres_test

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"

	"limitary/internal/postgres"
)

// These tests change where programs are looked for, so that they run one by one.

func TestMissingProgramsAreSaidPlainly(t *testing.T) {
	postgres.MustSearchOnly(t)
	_, err := postgres.Start(testContext(t), postgres.Options{Dir: stateDir(t)})
	var notFound *postgres.NotFoundError
	if !errors.As(err, &notFound) {
		t.Fatalf("got %v, want a NotFoundError", err)
	}
	wantText(t, err, "postgres and initdb", "version 15 or newer", "Debian package postgresql-15 (or postgresql)", "existing database")
}

func TestFindTakesTheVersionOfTheData(t *testing.T) {
	programs, data := t.TempDir(), t.TempDir()
	// Stand-ins that only answer --version: which programs are chosen is all that is tested.
	for _, version := range []string{"14.2", "15.18 (Debian 15.18-0+deb12u1)", "16.1", "17beta2"} {
		dir := filepath.Join(programs, version, "bin")
		mustWrite(t, filepath.Join(dir, "initdb"), "")
		mustWrite(t, filepath.Join(dir, "postgres"), "#!/bin/sh\necho 'postgres (PostgreSQL) "+version+"'\n")
	}
	mustWrite(t, filepath.Join(programs, "18.0", "bin", "postgres"), "#!/bin/sh\necho 'postgres (PostgreSQL) 18.0'\n") // no initdb
	postgres.MustSearchOnly(t, filepath.Join(programs, "*", "bin"))
	for _, c := range []struct {
		name, made, wantDir string
		want                int
	}{
		{"no data takes the newest", "", "17beta2", 17},
		{"data takes its own", "15\n", "15.18 (Debian 15.18-0+deb12u1)", 15},
		{"data takes its own among newer", "16\n", "16.1", 16},
	} {
		t.Run(c.name, func(t *testing.T) {
			if c.made != "" {
				mustWrite(t, filepath.Join(data, "PG_VERSION"), c.made)
			}
			bin, version, err := postgres.Find(data)
			if err != nil {
				t.Fatal(err)
			}
			if wantBin := filepath.Join(programs, c.wantDir, "bin"); bin != wantBin || version != c.want {
				t.Errorf("got %s, %d, want %s, %d", bin, version, wantBin, c.want)
			}
		})
	}
	for made, words := range map[string][]string{
		"14\n":   {data, "made by PostgreSQL 14", "version 17", "postgresql-14", "pg_dump"}, // installed, but older than we can use
		"9.6\n":  {data, "made by PostgreSQL 9"},
		"18\n":   {data, "made by PostgreSQL 18"},
		"rust\n": {"PG_VERSION", "damaged"},
	} {
		mustWrite(t, filepath.Join(data, "PG_VERSION"), made)
		_, _, err := postgres.Find(data)
		wantText(t, err, words...)
	}
}

func mustWrite(tb testing.TB, file, text string) {
	tb.Helper()
	if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
		tb.Fatal(err)
	}
	if err := os.WriteFile(file, []byte(text), 0o755); err != nil {
		tb.Fatal(err)
	}
}

func TestDataOfAnotherMajorVersionIsRefused(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	mustStop(t, mustStart(t, dir))
	mustWrite(t, filepath.Join(dir, "data", "PG_VERSION"), "3\n")
	_, err := postgres.Start(testContext(t), postgres.Options{Dir: dir})
	var version *postgres.VersionError
	if !errors.As(err, &version) || version.Made != 3 {
		t.Fatalf("got %v, want a VersionError about version 3", err)
	}
}

func TestLeftoversOfAnInitialisation(t *testing.T) {
	t.Parallel()
	t.Run("a half-made data.tmp is made anew", func(t *testing.T) {
		t.Parallel()
		dir := stateDir(t)
		mustWrite(t, filepath.Join(dir, "data.tmp", "PG_VERSION"), "15\n")
		mustOpen(t, dir)
		mustStart(t, dir)
		if _, err := os.Stat(filepath.Join(dir, "data.tmp")); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("data.tmp is still there: %v", err)
		}
	})
	t.Run("an empty data is filled", func(t *testing.T) {
		t.Parallel()
		dir := stateDir(t)
		if err := os.MkdirAll(filepath.Join(dir, "data"), 0o700); err != nil {
			t.Fatal(err)
		}
		mustOpen(t, dir)
		mustStart(t, dir)
	})
	for name, file := range map[string]string{
		"a data that is none is refused and kept":        "notes.txt",
		"a data without its control file is refused too": "PG_VERSION",
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := stateDir(t)
			mustStop(t, mustStart(t, dir)) // for a PG_VERSION that is right
			version, err := os.ReadFile(filepath.Join(dir, "data", "PG_VERSION"))
			if err != nil {
				t.Fatal(err)
			}
			if err := os.RemoveAll(filepath.Join(dir, "data")); err != nil {
				t.Fatal(err)
			}
			mustWrite(t, filepath.Join(dir, "data", file), string(version))
			_, err = postgres.Start(testContext(t), postgres.Options{Dir: dir})
			wantText(t, err, filepath.Join(dir, "data"), "no whole PostgreSQL data directory", "move it away")
			if _, err := os.Stat(filepath.Join(dir, "data", file)); err != nil {
				t.Errorf("what was there is gone: %v", err)
			}
		})
	}
	t.Run("a start that was called off can be repeated", func(t *testing.T) {
		t.Parallel()
		dir := stateDir(t)
		ctx, cancel := context.WithCancel(testContext(t))
		_, err := postgres.Start(ctx, postgres.Options{Dir: dir, Log: callWriter(cancel)})
		if !errors.Is(err, context.Canceled) {
			t.Fatalf("got %v, want that it was called off", err)
		}
		mustStart(t, dir)
	})
}

// mustOpen lets PostgreSQL's account pass through a state directory made by the test.
func mustOpen(tb testing.TB, dir string) {
	tb.Helper()
	if err := os.Chmod(dir, 0o711); err != nil {
		tb.Fatal(err)
	}
}

type callWriter func()

func (w callWriter) Write(text []byte) (int, error) {
	w()
	return len(text), nil
}

func TestForeignServerOnTheDataIsNamed(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	mustStop(t, mustStart(t, dir))
	data := filepath.Join(dir, "data")
	bin, _, err := postgres.Find(data)
	if err != nil {
		t.Fatal(err)
	}
	foreign := exec.Command(filepath.Join(bin, "postgres"), "-D", data, "-c", "listen_addresses=", "-c", "unix_socket_directories="+filepath.Join(dir, "run"))
	foreign.Dir, foreign.SysProcAttr = data, ownedBy(t, data)
	if err := foreign.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = foreign.Process.Signal(os.Interrupt)
		_ = foreign.Wait()
	})
	ctx, cancel := context.WithTimeout(testContext(t), time.Second)
	defer cancel()
	_, err = postgres.Start(ctx, postgres.Options{Dir: dir})
	wantText(t, err, fmt.Sprintf("process %d", foreign.Process.Pid), dir, "kill -INT")
}

// After a crash the lock file of PostgreSQL may name a process that is another
// program's by now.
func TestReusedProcessNumberDoesNotStopTheStart(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	mustStop(t, mustStart(t, dir))
	data := filepath.Join(dir, "data")
	other := exec.Command("sleep", "600")
	other.SysProcAttr = ownedBy(t, data)
	if err := other.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = other.Process.Kill()
		_ = other.Wait()
	})
	mustWrite(t, filepath.Join(data, "postmaster.pid"), fmt.Sprintf("%d\n%s\n", other.Process.Pid, data))
	mustStart(t, dir)
}

func TestClosedParentIsNamed(t *testing.T) {
	t.Parallel()
	if os.Geteuid() != 0 {
		t.Skip("only root has PostgreSQL run as a user to whom a directory of its own may be closed")
	}
	dir := stateDir(t)
	closed := filepath.Dir(dir)
	if err := os.Chmod(closed, 0o700); err != nil {
		t.Fatal(err)
	}
	_, err := postgres.Start(testContext(t), postgres.Options{Dir: filepath.Join(dir, "deeper")})
	wantText(t, err, "may not enter directory "+closed+" ", "chmod o+x "+closed, "another directory")
}

func TestUnusableDirectoryIsRefused(t *testing.T) {
	t.Parallel()
	dir := stateDir(t)
	mustWrite(t, dir, "a file")
	_, err := postgres.Start(testContext(t), postgres.Options{Dir: dir})
	wantText(t, err, dir, "not a directory")
	_, err = postgres.Start(testContext(t), postgres.Options{})
	wantText(t, err, "no state directory given")
}

func TestDefaultDir(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name string
		uid  int
		env  map[string]string
		want string
	}{
		{"root", 0, map[string]string{"HOME": "/root", "XDG_STATE_HOME": "/s"}, "/var/lib/limitary"},
		{"state home", 7, map[string]string{"HOME": "/h", "XDG_STATE_HOME": "/s"}, "/s/limitary"},
		{"relative state home is ignored", 7, map[string]string{"HOME": "/h", "XDG_STATE_HOME": "s"}, "/h/.local/state/limitary"},
		{"home", 7, map[string]string{"HOME": "/h"}, "/h/.local/state/limitary"},
	} {
		t.Run(c.name, func(t *testing.T) {
			got, err := postgres.DefaultDirFor(c.uid, c.env)
			if err != nil || got != c.want {
				t.Errorf("got %q, %v, want %q", got, err, c.want)
			}
		})
	}
	_, err := postgres.DefaultDirFor(7, nil)
	wantText(t, err, "HOME")
}
