package install

import (
	"context"
	"io"
)

// EnsureOn runs Ensure on a machine that is described by functions.
func EnsureOn(ctx context.Context, m Machine, dataDir string, log io.Writer) (string, error) {
	return machine{find: m.Find, uid: m.UID, lookPath: m.LookPath, run: m.Run, settingsDir: m.SettingsDir}.ensure(ctx, dataDir, log)
}

// Machine is the machine of a test.
type Machine struct {
	Find        func(dataDir string) (string, int, error)
	UID         int
	LookPath    func(string) (string, error)
	Run         func(ctx context.Context, program string, args ...string) (string, error)
	SettingsDir string
}
