//go:build unix

package postgres

import "testing"

// MustSearchOnly has Find look in dirs and nowhere else until the test ends.
func MustSearchOnly(tb testing.TB, dirs ...string) {
	tb.Helper()
	before := programDirs
	programDirs = dirs
	tb.Cleanup(func() { programDirs = before })
	tb.Setenv("PATH", tb.TempDir())
}

// DefaultDirFor is DefaultDir for another user and environment.
func DefaultDirFor(uid int, env map[string]string) (string, error) {
	return defaultDir(uid, func(name string) string { return env[name] })
}
