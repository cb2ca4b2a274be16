//go:build unix

package postgres

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"
)

const (
	// pollInterval is how often something is looked at that does not tell by itself.
	pollInterval = 20 * time.Millisecond
	// lockPatience covers the instants in which Running holds the lock to look at it.
	lockPatience = 500 * time.Millisecond
	// logBytesMax is the size of the log above which a start sets it aside as log.1, which
	// keeps the two together to about twice that.
	logBytesMax = 16 << 20
)

// DefaultDir is the state directory where none is given: under /var/lib for root, whose
// home is usually closed to the account that PostgreSQL runs as, else the user's own.
func DefaultDir(getenv func(string) string) (string, error) { return defaultDir(os.Geteuid(), getenv) }

func defaultDir(uid int, getenv func(string) string) (string, error) {
	if uid == 0 {
		return "/var/lib/limitary", nil
	}
	// The XDG base directory specification has relative paths ignored.
	if state := getenv("XDG_STATE_HOME"); filepath.IsAbs(state) {
		return filepath.Join(state, "limitary"), nil
	}
	if home := getenv("HOME"); filepath.IsAbs(home) {
		return filepath.Join(home, ".local", "state", "limitary"), nil
	}
	return "", errors.New("no state directory: neither XDG_STATE_HOME nor HOME is set; name a directory")
}

// paths names what a state directory holds. Its text is the directory, absolute and
// free of symbolic links.
type paths string

func (p paths) data() string   { return filepath.Join(string(p), "data") }
func (p paths) making() string { return filepath.Join(string(p), "data.tmp") }
func (p paths) run() string    { return filepath.Join(string(p), "run") }
func (p paths) lock() string   { return filepath.Join(string(p), "lock") }
func (p paths) socket() string { return filepath.Join(string(p), "socket") }
func (p paths) log() string    { return filepath.Join(string(p), "log") }

// resolve gives the paths of an existing state directory.
func resolve(dir string) (paths, error) {
	dir, err := filepath.Abs(dir)
	if err != nil {
		return "", err
	}
	dir, err = filepath.EvalSymlinks(dir)
	return paths(dir), err
}

// makeStateDir makes the directory if need be. Root's must be open for the account of
// PostgreSQL to pass through; what is secret in it is closed by itself.
func makeStateDir(dir string) (paths, error) {
	if dir == "" {
		return "", errors.New("no state directory given")
	}
	mode := fs.FileMode(0o700)
	if os.Geteuid() == 0 {
		mode = 0o711
	}
	if err := os.MkdirAll(filepath.Dir(dir), 0o755); err != nil {
		return "", fmt.Errorf("making the state directory: %w", err)
	}
	err := os.Mkdir(dir, mode)
	if err == nil {
		err = os.Chmod(dir, mode) // whatever the umask is
	}
	if err != nil && !errors.Is(err, fs.ErrExist) {
		return "", fmt.Errorf("making the state directory: %w", err)
	}
	return resolve(dir)
}

// takeLock makes this process the owner of the directory. The lock goes with the
// process, however it ends: the programs it starts do not inherit it.
func takeLock(ctx context.Context, p paths) (*os.File, error) {
	f, err := os.OpenFile(p.lock(), os.O_RDWR|os.O_CREATE|syscall.O_NOFOLLOW, 0o644)
	if errors.Is(err, fs.ErrPermission) {
		return nil, fmt.Errorf("state directory %s belongs to another user: run as its owner, or choose another directory: %w", p, err)
	}
	if err != nil {
		return nil, fmt.Errorf("state directory %s: %w", p, err)
	}
	ctx, cancel := context.WithTimeout(ctx, lockPatience)
	defer cancel()
	err = poll(ctx, func() (bool, error) {
		err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
		if errors.Is(err, syscall.EWOULDBLOCK) || errors.Is(err, syscall.EINTR) {
			return false, nil
		}
		return err == nil, err
	})
	if err == nil {
		_, err = f.WriteAt(fmt.Appendf(nil, "%10d\n", os.Getpid()), 0)
	}
	if errors.Is(err, context.DeadlineExceeded) {
		err = &InUseError{Dir: string(p), PID: lockOwner(f)}
	}
	if err != nil {
		_ = f.Close()
		return nil, err
	}
	return f, nil
}

// lockOwner reads the process id that the owner wrote, 0 if there is none.
func lockOwner(f *os.File) int {
	text, err := io.ReadAll(io.NewSectionReader(f, 0, 32))
	if err != nil {
		return 0
	}
	pid, err := strconv.Atoi(strings.TrimSpace(string(text)))
	if err != nil {
		return 0
	}
	return pid
}

// isOwned tells whether a process owns the directory at this moment.
func isOwned(p paths) (bool, error) {
	f, err := os.Open(p.lock())
	if errors.Is(err, fs.ErrNotExist) {
		return false, nil
	}
	if err != nil {
		return false, err
	}
	defer f.Close() // which gives the lock back
	for {
		switch err := syscall.Flock(int(f.Fd()), syscall.LOCK_SH|syscall.LOCK_NB); {
		case err == nil:
			return false, nil
		case errors.Is(err, syscall.EWOULDBLOCK):
			return true, nil
		case !errors.Is(err, syscall.EINTR):
			return false, err
		}
	}
}

// poll calls ready until it answers true or fails, or the context ends.
func poll(ctx context.Context, ready func() (bool, error)) error {
	tick := time.NewTicker(pollInterval)
	defer tick.Stop()
	for {
		if done, err := ready(); done || err != nil {
			return err
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-tick.C:
		}
	}
}

// postmasterPID is the process id in the lock file of a data directory, 0 if it has none.
func postmasterPID(dataDir string) (int, error) {
	text, err := os.ReadFile(filepath.Join(dataDir, "postmaster.pid"))
	if errors.Is(err, fs.ErrNotExist) {
		return 0, nil
	}
	if err != nil {
		return 0, err
	}
	line, _, _ := strings.Cut(string(text), "\n")
	pid, err := strconv.Atoi(strings.TrimSpace(line))
	if err != nil {
		return 0, nil // still being written, or cut off: PostgreSQL decides what that means
	}
	return pid, nil
}

// openLog opens the log for PostgreSQL to append to, and gives where its part begins.
// PostgreSQL writes to the file itself, so that its last words are kept when we are killed.
func openLog(p paths) (f *os.File, start int64, err error) {
	if info, err := os.Stat(p.log()); err == nil && info.Size() > logBytesMax {
		if err := os.Rename(p.log(), p.log()+".1"); err != nil {
			return nil, 0, err
		}
	}
	f, err = os.OpenFile(p.log(), os.O_RDWR|os.O_APPEND|os.O_CREATE|syscall.O_NOFOLLOW, 0o600)
	if err != nil {
		return nil, 0, err
	}
	info, err := f.Stat()
	if err != nil {
		_ = f.Close()
		return nil, 0, err
	}
	return f, info.Size(), nil
}

// tail gives the last lines that were written to the log after start.
func tail(f *os.File, start int64) string {
	const bytesMax, linesMax = 4096, 12
	info, err := f.Stat()
	if err != nil {
		return ""
	}
	start = max(start, info.Size()-bytesMax)
	text, err := io.ReadAll(io.NewSectionReader(f, start, bytesMax))
	if err != nil {
		return ""
	}
	lines := strings.Split(strings.TrimSpace(string(text)), "\n")
	return strings.Join(lines[max(0, len(lines)-linesMax):], "\n")
}
