//go:build unix && !linux

package postgres

import (
	"errors"
	"syscall"
)

// tieToParent does nothing: only Linux tells a child of its parent's death. After a
// kill -9 PostgreSQL goes on, and the next start says which process to stop.
func tieToParent(*syscall.SysProcAttr) {}

// serversIn gives the living processes that the lock files in the directories name.
func serversIn(dirs ...string) ([]int, error) {
	var pids []int
	for _, dir := range dirs {
		pid, err := postmasterPID(dir)
		if err != nil {
			return nil, err
		}
		if alive := syscall.Kill(pid, 0); pid > 0 && (alive == nil || errors.Is(alive, syscall.EPERM)) {
			pids = append(pids, pid)
		}
	}
	return pids, nil
}

// isOther cannot tell here.
func isOther(int) bool { return false }
