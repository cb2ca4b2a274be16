package postgres

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"syscall"
)

// tieToParent has the kernel ask the program to shut down when the thread that started
// it ends, however it ends. That thread must live as long as our process: see tied.
func tieToParent(attr *syscall.SysProcAttr) { attr.Pdeathsig = syscall.SIGINT }

// serversIn lists the processes of PostgreSQL that work in one of the directories.
// The postmaster and every process under it keep the data directory as their working
// directory, so that this finds those a killed postmaster left behind, too, and is not
// deceived by a process id that was used again since.
func serversIn(dirs ...string) ([]int, error) {
	var wanted []os.FileInfo
	for _, dir := range dirs {
		if info, err := os.Stat(dir); err == nil {
			wanted = append(wanted, info)
		}
	}
	entries, err := os.ReadDir("/proc")
	if err != nil {
		return nil, fmt.Errorf("looking for an earlier PostgreSQL: %w", err)
	}
	var pids []int
	for _, entry := range entries {
		pid, err := strconv.Atoi(entry.Name())
		if err != nil || !isServer(pid) {
			continue
		}
		cwd, err := os.Stat(filepath.Join("/proc", entry.Name(), "cwd"))
		if err == nil && slices.ContainsFunc(wanted, func(w os.FileInfo) bool { return os.SameFile(w, cwd) }) {
			pids = append(pids, pid)
		}
	}
	return pids, nil
}

// isServer tells whether a process that we may look at runs one of the server programs,
// also where a package upgrade has replaced the file since.
func isServer(pid int) bool {
	exe, err := os.Readlink(filepath.Join("/proc", strconv.Itoa(pid), "exe"))
	if err != nil {
		return false // ended, or another user's
	}
	name := filepath.Base(strings.TrimSuffix(exe, " (deleted)"))
	return name == "postgres" || name == "initdb"
}

// isOther tells whether a process lives and surely is no PostgreSQL.
func isOther(pid int) bool {
	_, err := os.Readlink(filepath.Join("/proc", strconv.Itoa(pid), "exe"))
	return err == nil && !isServer(pid)
}
