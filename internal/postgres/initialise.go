//go:build unix

package postgres

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
)

// quiesce waits until no process of an earlier PostgreSQL works in the directory. We
// own the directory, so that nobody of ours runs them any more: they are shutting down
// because their owner was killed, or ending because their postmaster was.
func quiesce(ctx context.Context, p paths, log io.Writer) error {
	ctx, cancel := context.WithTimeout(ctx, Patience)
	defer cancel()
	var pids []int
	told := false
	err := poll(ctx, func() (done bool, err error) {
		pids, err = serversIn(p.data(), p.making())
		if len(pids) > 0 && !told {
			told = true
			fmt.Fprintf(log, "waiting for an earlier PostgreSQL (process %d) in %s to end\n", pids[0], p)
		}
		return len(pids) == 0, err
	})
	if errors.Is(err, context.DeadlineExceeded) && len(pids) > 0 {
		return fmt.Errorf("an earlier PostgreSQL (process %d) still works in %s, though no Limitary owns it: "+
			"wait until it has ended, or stop it with kill -INT %d", pids[0], p, pids[0])
	}
	if err != nil {
		return err
	}
	return dropStaleLock(p)
}

// dropStaleLock removes a lock file of PostgreSQL that names a living process which is
// none of PostgreSQL. PostgreSQL sees for itself that a process no longer exists, but not
// that its number has been used again, as happens after every restart of a container.
func dropStaleLock(p paths) error {
	pid, err := postmasterPID(p.data())
	if err != nil || pid == 0 || !isOther(pid) {
		return err
	}
	return os.Remove(filepath.Join(p.data(), "postmaster.pid"))
}

// hasCluster tells whether data/ holds a whole data directory. What is there and is
// none is refused and left alone: nothing here leaves such a thing behind.
func hasCluster(p paths) (bool, error) {
	entries, err := os.ReadDir(p.data())
	if errors.Is(err, fs.ErrNotExist) || err == nil && len(entries) == 0 {
		return false, nil
	}
	if err != nil {
		return false, err
	}
	for _, file := range []string{"PG_VERSION", filepath.Join("global", "pg_control")} {
		if _, err := os.Stat(filepath.Join(p.data(), file)); err != nil {
			return false, fmt.Errorf("%s is no whole PostgreSQL data directory, it has no %s: "+
				"restore it from a backup, or move it away to begin with an empty one", p.data(), file)
		}
	}
	return true, nil
}

// initialise makes the data directory beside its place and renames it when it is whole,
// so that an initialisation that is cut off leaves nothing that looks like one.
func initialise(ctx context.Context, p paths, a account, bin string, durable bool) error {
	if err := os.RemoveAll(p.making()); err != nil {
		return err
	}
	if err := a.makeDir(p.making()); err != nil {
		return err
	}
	args := []string{"-D", p.making(), "-U", Owner, "-E", "UTF8", "--locale=C.UTF-8",
		"--auth-local=trust", "--auth-host=reject", "--data-checksums"}
	if !durable {
		args = append(args, "--no-sync")
	}
	var out strings.Builder
	cmd := a.command(p.making(), filepath.Join(bin, "initdb"), args...)
	cmd.Stdout, cmd.Stderr = &out, &out
	started, ended := tied(cmd)
	if err := <-started; err != nil {
		return fmt.Errorf("starting initdb: %w", err)
	}
	err := waitOrInterrupt(ctx, cmd, ended)
	if err != nil {
		return fmt.Errorf("making the data directory %s with initdb: %w\n%s", p.data(), err, strings.TrimSpace(out.String()))
	}
	// An empty data/ may stand in the way; Remove fails on any other.
	if err := os.Remove(p.data()); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	if err := os.Rename(p.making(), p.data()); err != nil {
		return err
	}
	if durable {
		return syncDir(string(p))
	}
	return nil
}

// waitOrInterrupt waits for a program, which it interrupts when the context ends.
func waitOrInterrupt(ctx context.Context, cmd *exec.Cmd, ended <-chan error) error {
	select {
	case err := <-ended:
		return err
	case <-ctx.Done():
		_ = cmd.Process.Signal(syscall.SIGINT) // it may have ended just now
		<-ended
		return ctx.Err()
	}
}

// tied starts a program on a thread that lives as long as the program does, because
// the kernel takes the end of that thread for the death of the parent.
func tied(cmd *exec.Cmd) (started, ended <-chan error) {
	start, end := make(chan error, 1), make(chan error, 1)
	go func() {
		runtime.LockOSThread() // and never unlocked: the thread ends with this goroutine
		err := cmd.Start()
		start <- err
		if err == nil {
			end <- cmd.Wait()
		}
	}()
	return start, end
}

func syncDir(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close())
}
