//go:build unix

package postgres

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"net/url"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
)

const (
	// socketPort is only a part of the socket's name.
	socketPort = 5432
	// socketPathBytesMax is what fits, with the final zero, into sun_path of
	// sockaddr_un: 108 bytes on Linux (unix(7)), 104 on the BSDs.
	socketPathBytesMax = 103
)

// socketName is the file that PostgreSQL makes in the socket directory; it also makes
// one with .lock behind it.
var socketName = ".s.PGSQL." + strconv.Itoa(socketPort)

// connString is the address of a database in the cluster whose socket is in dir.
func connString(dir, database, user string) string {
	u := url.URL{Scheme: "postgres", User: url.User(user), Path: "/" + database}
	u.RawQuery = url.Values{"host": {dir}, "port": {strconv.Itoa(socketPort)}, "sslmode": {"disable"}}.Encode()
	return u.String()
}

// makeSocketDir makes the directory of the socket: run/ where the socket's path fits
// into an address, else a short one that depends on the state directory alone, so that
// the cluster keeps its address over restarts.
func makeSocketDir(p paths, a account) (string, error) {
	if err := a.makeDir(p.run()); err != nil {
		return "", err
	}
	if fits(p.run()) {
		return p.run(), nil
	}
	for _, parent := range shortDirs(a) {
		sum := sha256.Sum256([]byte(p))
		dir := filepath.Join(parent, fmt.Sprintf("limitary-%d-%x", a.uid, sum[:6]))
		if !fits(dir) || a.firstClosed(parent) != "" {
			continue
		}
		if err := a.makeOwnDir(dir); err == nil {
			return dir, nil
		}
	}
	return "", fmt.Errorf("the path of the socket in %s is longer than the %d bytes a socket's may have, and no directory for it could be made in %s: choose a shorter state directory",
		p.run(), socketPathBytesMax, strings.Join(shortDirs(a), " or "))
}

func fits(dir string) bool { return len(filepath.Join(dir, socketName)) <= socketPathBytesMax }

// shortDirs lists where a short directory may be made.
func shortDirs(a account) []string {
	dirs := []string{os.TempDir()}
	if runtimeDir := os.Getenv("XDG_RUNTIME_DIR"); filepath.IsAbs(runtimeDir) && !a.other {
		dirs = append([]string{runtimeDir}, dirs...)
	}
	if os.TempDir() != "/tmp" {
		dirs = append(dirs, "/tmp")
	}
	return dirs
}

// makeOwnDir makes a directory in a place where others may make some, too. One that
// is there already is taken only if it is the account's own and closed to others: only the
// account, root or we can have made it. A link is never followed.
func (a account) makeOwnDir(dir string) error {
	err := os.Mkdir(dir, 0o700)
	if err == nil && a.other {
		return os.Lchown(dir, int(a.uid), int(a.gid))
	}
	if !errors.Is(err, fs.ErrExist) {
		return err
	}
	info, err := os.Lstat(dir)
	if err != nil {
		return err
	}
	if !info.IsDir() || info.Sys().(*syscall.Stat_t).Uid != a.uid || info.Mode().Perm() != 0o700 {
		return fmt.Errorf("%s is somebody else's", dir)
	}
	return nil
}

// record writes down where the socket is, for Running.
func record(p paths, socketDir string) error {
	draft := p.socket() + ".tmp"
	if err := os.WriteFile(draft, []byte(socketDir+"\n"), 0o644); err != nil {
		return err
	}
	return os.Rename(draft, p.socket())
}

// recorded reads where the socket is, "" if nothing is written down.
func recorded(p paths) (string, error) {
	text, err := os.ReadFile(p.socket())
	if errors.Is(err, fs.ErrNotExist) {
		return "", nil
	}
	return strings.TrimSuffix(string(text), "\n"), err
}

// forget removes the record, and the socket directory where it is not the usual one. What
// cannot be removed does no harm: the lock alone says whether a cluster is running.
func forget(p paths, socketDir string) {
	_ = os.Remove(p.socket())
	if socketDir != p.run() {
		_ = os.Remove(filepath.Join(socketDir, socketName))
		_ = os.Remove(filepath.Join(socketDir, socketName+".lock"))
		_ = os.Remove(socketDir)
	}
}
