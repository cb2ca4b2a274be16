package install

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"

	"limitary/internal/postgres"
)

const (
	// settingsDir and settingsFile hold what the first installation of a server package reads (pg_createcluster(1)).
	settingsDir  = "/etc/postgresql-common/createcluster.d"
	settingsFile = "limitary.conf"
	noCluster    = "create_main_cluster = false"
	// defaultPackage brings the version of the Debian release.
	defaultPackage = "postgresql"
	// outputBytesMax is how much of apt-get's words a failure repeats: its last lines say what went wrong.
	outputBytesMax = 1500
)

// Ensure gives the directory of the PostgreSQL server programs, installing Debian's package if they are missing and
// that is possible. Where dataDir holds a cluster, it makes sure of programs of the version that made it. Log is told
// of each step that takes time. The error is an [*Error] where the reader has to do something himself.
func Ensure(ctx context.Context, dataDir string, log io.Writer) (binDir string, err error) {
	return thisMachine().ensure(ctx, dataDir, log)
}

// Error says why the programs are still missing and what to run.
type Error struct {
	// Missing is what was looked for and not found.
	Missing error
	// Why it was not installed.
	Why string
	// Commands to run as root, in order; none where apt-get is not there.
	Commands []string
}

func (e *Error) Error() string {
	var b strings.Builder
	var none *postgres.NotFoundError
	if errors.As(e.Missing, &none) { // its own text says what to install, which is said better here
		version := fmt.Sprintf("%d or newer", postgres.MinimumVersion)
		if none.Version != 0 {
			version = fmt.Sprint(none.Version)
		}
		fmt.Fprintf(&b, "PostgreSQL's server programs, version %s, are not on this machine. ", version)
	} else {
		fmt.Fprintf(&b, "%v\n\n", e.Missing)
	}
	b.WriteString(e.Why)
	if len(e.Commands) == 0 {
		b.WriteString(" Install them with the package manager of this system, or use --database URL.")
		return b.String()
	}
	b.WriteString(" As root, run:\n\n")
	for _, c := range e.Commands {
		fmt.Fprintf(&b, "    %s\n", c)
	}
	b.WriteString("\nThe setting keeps Debian's package from starting a PostgreSQL of its own on port 5432; leave it out if you want one. Or use --database URL.")
	return b.String()
}

func (e *Error) Unwrap() error { return e.Missing }

// machine is what Ensure needs of the machine, so that tests can give it another one.
type machine struct {
	find        func(dataDir string) (binDir string, version int, err error)
	uid         int
	lookPath    func(program string) (string, error)
	run         func(ctx context.Context, program string, args ...string) (output string, err error)
	settingsDir string
}

func thisMachine() machine {
	return machine{find: postgres.Find, uid: os.Geteuid(), lookPath: exec.LookPath, run: run, settingsDir: settingsDir}
}

// run runs a program that must not ask anything, and gives what it said.
func run(ctx context.Context, program string, args ...string) (string, error) {
	cmd := exec.CommandContext(ctx, program, args...)
	cmd.Env = append(os.Environ(), "DEBIAN_FRONTEND=noninteractive", "LC_ALL=C.UTF-8")
	var out bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &out
	// Cut off in the middle, dpkg would leave packages half configured; asked to, it ends in order.
	cmd.Cancel = func() error { return cmd.Process.Signal(os.Interrupt) }
	err := cmd.Run()
	return out.String(), err
}

func (m machine) ensure(ctx context.Context, dataDir string, log io.Writer) (string, error) {
	bin, _, missing := m.find(dataDir)
	if missing == nil {
		return bin, nil
	}
	pkg, ok := packageFor(missing)
	if !ok {
		return "", missing
	}
	fault := &Error{Missing: missing, Commands: m.commands(pkg)}
	if _, err := m.lookPath("apt-get"); err != nil {
		fault.Why, fault.Commands = "They are installed by themselves only where apt-get is, as on Debian.", nil
		return "", fault
	}
	if m.uid != 0 {
		fault.Why = "Only root can install them."
		return "", fault
	}
	fmt.Fprintf(log, "PostgreSQL's server programs are missing: installing the package %s, without a cluster on port 5432\n", pkg)
	if err := m.install(ctx, pkg, log); err != nil {
		fault.Why = "Installing the package failed: " + err.Error() + "\n\nOnce that is settled, start again, or do it by hand."
		return "", fault
	}
	bin, _, err := m.find(dataDir)
	if err != nil {
		return "", fmt.Errorf("the package %s was installed, and yet: %w", pkg, err)
	}
	fmt.Fprintf(log, "installed: %s\n", bin)
	return bin, nil
}

// packageFor names the package that brings the missing programs; ok is false where no package would help.
func packageFor(missing error) (name string, ok bool) {
	var none *postgres.NotFoundError
	var other *postgres.VersionError
	version := 0
	switch {
	case errors.As(missing, &none):
		version = none.Version
	case errors.As(missing, &other):
		version = other.Made
	default:
		return "", false
	}
	if version == 0 {
		return defaultPackage, true
	}
	return fmt.Sprintf("%s-%d", defaultPackage, version), true
}

// commands are what a person would run to the same end.
func (m machine) commands(pkg string) []string {
	file := filepath.Join(m.settingsDir, settingsFile)
	return []string{
		"mkdir -p " + m.settingsDir,
		fmt.Sprintf("echo '%s' > %s", noCluster, file),
		"apt-get update",
		"apt-get install -y --no-install-recommends " + pkg,
		"rm " + file,
	}
}

// install lays the setting down, installs the package and takes the setting away. After a failure the setting stays:
// what apt-get left half done may be finished by hand later, and must not make a cluster then.
func (m machine) install(ctx context.Context, pkg string, log io.Writer) error {
	file := filepath.Join(m.settingsDir, settingsFile)
	if err := os.MkdirAll(m.settingsDir, 0o755); err != nil {
		return fmt.Errorf("its setting could not be written: %w", err)
	}
	text := "# Laid down by limitary while it installs the PostgreSQL server programs.\n" + noCluster + "\n"
	if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
		return fmt.Errorf("its setting could not be written: %w", err)
	}
	if err := m.apt(ctx, pkg, log); err != nil {
		return err
	}
	if err := os.Remove(file); err != nil {
		fmt.Fprintf(log, "%s is not needed any more and could not be removed: %v\n", file, err)
	}
	return nil
}

// apt installs the package, reading the package lists anew where they do not have it or the installation fails: old
// lists name files that are gone from the mirror.
func (m machine) apt(ctx context.Context, pkg string, log io.Writer) error {
	updated := false
	if !m.listed(ctx, pkg) {
		updated = true
		if err := m.update(ctx, log); err != nil {
			return err
		}
	}
	for {
		fmt.Fprintf(log, "apt-get install %s (some 50 MB; this may take a minute or two)\n", pkg)
		out, err := m.run(ctx, "apt-get", "install", "-y", "-q", "--no-install-recommends", "-o", "DPkg::Lock::Timeout=120", pkg)
		switch {
		case err == nil:
			return nil
		case updated || ctx.Err() != nil:
			return failed("apt-get install "+pkg, out, err)
		}
		updated = true
		if err := m.update(ctx, log); err != nil {
			return err
		}
	}
}

func (m machine) update(ctx context.Context, log io.Writer) error {
	fmt.Fprintln(log, "apt-get update")
	if out, err := m.run(ctx, "apt-get", "update", "-q"); err != nil {
		return failed("apt-get update", out, err)
	}
	return nil
}

// listed reports whether the package lists on this machine have the package. A fresh container has no lists at all.
func (m machine) listed(ctx context.Context, pkg string) bool {
	out, err := m.run(ctx, "apt-cache", "policy", pkg)
	return err == nil && strings.Contains(out, "Candidate:") && !strings.Contains(out, "Candidate: (none)")
}

func failed(what, output string, err error) error {
	output = strings.TrimSpace(output)
	if cut := len(output) - outputBytesMax; cut > 0 {
		output = strings.ToValidUTF8(output[cut:], "")
		if _, whole, ok := strings.Cut(output, "\n"); ok {
			output = "...\n" + whole
		}
	}
	return fmt.Errorf("%s: %w\n\n%s", what, err, output)
}
