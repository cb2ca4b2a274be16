//go:build unix

package postgres

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
)

// account is whom the server programs run as.
type account struct {
	uid, gid uint32
	name     string
	// other says that it is not the user of this process, so that files made for it
	// must be given to it. Only root has other accounts.
	other bool
}

// accountFor decides who runs PostgreSQL on a data directory that may not exist yet.
func accountFor(dataDir string) (account, error) {
	if os.Geteuid() != 0 {
		return account{uid: uint32(os.Geteuid()), gid: uint32(os.Getegid()), name: userName(uint32(os.Geteuid()))}, nil
	}
	if info, err := os.Stat(dataDir); err == nil {
		owner := info.Sys().(*syscall.Stat_t)
		if owner.Uid != 0 {
			return account{uid: owner.Uid, gid: owner.Gid, name: userName(owner.Uid), other: true}, nil
		}
	}
	for _, name := range []string{"postgres", "nobody"} {
		u, err := user.Lookup(name)
		if err != nil {
			continue
		}
		uid, errUID := strconv.ParseUint(u.Uid, 10, 32)
		gid, errGID := strconv.ParseUint(u.Gid, 10, 32)
		if errUID == nil && errGID == nil && uid != 0 {
			return account{uid: uint32(uid), gid: uint32(gid), name: name, other: true}, nil
		}
	}
	return account{}, errors.New("PostgreSQL cannot run as root, and there is no user postgres or nobody to run it as: add one, or start as an ordinary user")
}

func userName(uid uint32) string {
	id := strconv.FormatUint(uint64(uid), 10)
	if u, err := user.LookupId(id); err == nil {
		return u.Username
	}
	return "with id " + id
}

// command prepares a server program. It sees few of our environment variables:
// those of PostgreSQL's own (PGDATA, PGPORT...) would change what it does,
// NOTIFY_SOCKET would let it speak for us to the service manager, and others may
// hold secrets. It gets its own process group, so that an interrupt typed at the
// terminal reaches us alone and we stop it in order.
func (a account) command(workDir, program string, args ...string) *exec.Cmd {
	cmd := exec.Command(program, args...)
	cmd.Dir = workDir // our own working directory may be closed to the account
	cmd.Env = []string{"LC_ALL=C.UTF-8", "TZ=UTC"}
	for _, name := range []string{"PATH", "LD_LIBRARY_PATH"} {
		if value, ok := os.LookupEnv(name); ok {
			cmd.Env = append(cmd.Env, name+"="+value)
		}
	}
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
	if a.other {
		cmd.SysProcAttr.Credential = &syscall.Credential{Uid: a.uid, Gid: a.gid}
	}
	tieToParent(cmd.SysProcAttr)
	return cmd
}

// makeDir makes sure of a directory that only the account may enter.
func (a account) makeDir(dir string) error {
	if err := os.Mkdir(dir, 0o700); err != nil && !errors.Is(err, fs.ErrExist) {
		return err
	}
	if a.other {
		if err := os.Lchown(dir, int(a.uid), int(a.gid)); err != nil {
			return err
		}
	}
	return os.Chmod(dir, 0o700)
}

// checkReach proves that the account may work in dir and run the programs, by doing
// so: permission bits alone do not tell where access control lists are in use.
func (a account) checkReach(dir, bin string) error {
	cmd := a.command(dir, filepath.Join(bin, "postgres"), "--version")
	err := cmd.Run()
	if !errors.Is(err, fs.ErrPermission) {
		return err
	}
	for _, target := range []string{dir, bin} {
		if closed := a.firstClosed(target); closed != "" {
			return fmt.Errorf("PostgreSQL runs as user %s, who may not enter directory %s and so cannot reach %s: "+
				"allow it (chmod o+x %s), or choose another directory", a.name, closed, target, closed)
		}
	}
	return fmt.Errorf("PostgreSQL runs as user %s, who may not work in %s or not run the programs in %s: %w", a.name, dir, bin, err)
}

// firstClosed is the outermost directory on the way to dir, itself included, that the
// mode bits do not let the account enter, or "".
func (a account) firstClosed(dir string) string {
	steps := []string{"/"}
	for i, r := range dir {
		if r == '/' && i > 0 {
			steps = append(steps, dir[:i])
		}
	}
	for _, step := range append(steps, strings.TrimSuffix(dir, "/")) {
		info, err := os.Stat(step)
		if err != nil {
			continue
		}
		owner, bit := info.Sys().(*syscall.Stat_t), fs.FileMode(0o001)
		switch {
		case owner.Uid == a.uid:
			bit = 0o100
		case owner.Gid == a.gid:
			bit = 0o010
		}
		if info.Mode()&bit == 0 {
			return step
		}
	}
	return ""
}
