package install_test

import (
	"bytes"
	"context"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"limitary/internal/install"
	"limitary/internal/postgres"
)

// debian is a machine whose apt-get is acted by this test: it knows which packages the lists have, and notes whether the
// setting against a cluster was there when the package came.
type debian struct {
	settingsDir string
	uid         int
	noApt       bool
	missing     error    // what Find says until the package is there
	listed      []string // packages in the lists
	afterUpdate []string // packages in the lists once they were read anew
	refuse      int      // so many installations fail
	useless     bool     // the package does not bring what is needed

	ran        []string
	installed  []string
	hadSetting []bool
}

func (d *debian) machine() install.Machine {
	return install.Machine{Find: d.find, UID: d.uid, LookPath: d.lookPath, Run: d.run, SettingsDir: d.settingsDir}
}

func (d *debian) find(string) (string, int, error) {
	if d.missing != nil && (len(d.installed) == 0 || d.useless) {
		return "", 0, d.missing
	}
	return "/programs", 15, nil
}

func (d *debian) lookPath(program string) (string, error) {
	if d.noApt {
		return "", exec.ErrNotFound
	}
	return "/usr/bin/" + program, nil
}

func (d *debian) run(_ context.Context, program string, args ...string) (string, error) {
	d.ran = append(d.ran, program+" "+args[0])
	pkg := args[len(args)-1]
	switch program + " " + args[0] {
	case "apt-cache policy":
		if slices.Contains(d.listed, pkg) {
			return pkg + ":\n  Installed: (none)\n  Candidate: 15+248\n", nil
		}
		return "", nil
	case "apt-get update":
		d.listed = d.afterUpdate
		return "Reading package lists...", nil
	case "apt-get install":
		if d.refuse > 0 || !slices.Contains(d.listed, pkg) {
			d.refuse--
			return "Reading package lists...\nE: Unable to fetch some archives", errors.New("exit status 100")
		}
		text, err := os.ReadFile(filepath.Join(d.settingsDir, "limitary.conf"))
		d.hadSetting = append(d.hadSetting, err == nil && strings.Contains(string(text), "\ncreate_main_cluster = false\n"))
		d.installed = append(d.installed, pkg)
		return "Setting up " + pkg, nil
	}
	return "", errors.New("unexpected command")
}

func TestEnsure(t *testing.T) {
	none := &postgres.NotFoundError{}
	update, policy, get := "apt-get update", "apt-cache policy", "apt-get install"
	tests := map[string]struct {
		machine   debian
		want      string   // programs found in the end
		installed []string // packages
		ran       []string
		say       []string // in the error
		hush      []string // not in the error
		settings  bool     // the setting is still there in the end
	}{
		"programs that are there are left alone": {machine: debian{}, want: "/programs"},
		"a package in the lists is installed at once": {
			machine: debian{missing: none, listed: []string{"postgresql"}},
			want:    "/programs", installed: []string{"postgresql"}, ran: []string{policy, get},
		},
		"empty lists are read first": {
			machine: debian{missing: none, afterUpdate: []string{"postgresql"}},
			want:    "/programs", installed: []string{"postgresql"}, ran: []string{policy, update, get},
		},
		"old lists are read anew when the installation fails": {
			machine: debian{missing: none, listed: []string{"postgresql"}, afterUpdate: []string{"postgresql"}, refuse: 1},
			want:    "/programs", installed: []string{"postgresql"}, ran: []string{policy, get, update, get},
		},
		"a data directory of another version gets its own programs": {
			machine: debian{missing: &postgres.VersionError{DataDir: "d", Made: 17, Found: 15}, listed: []string{"postgresql", "postgresql-17"}},
			want:    "/programs", installed: []string{"postgresql-17"}, ran: []string{policy, get},
		},
		"a data directory without any programs gets its version": {
			machine: debian{missing: &postgres.NotFoundError{Version: 16}, listed: []string{"postgresql-16"}},
			want:    "/programs", installed: []string{"postgresql-16"}, ran: []string{policy, get},
		},
		"a failure tells apt-get's words and the commands, and leaves the setting": {
			machine: debian{missing: none, listed: []string{"postgresql"}, afterUpdate: []string{"postgresql"}, refuse: 2},
			ran:     []string{policy, get, update, get}, settings: true,
			say: []string{"E: Unable to fetch some archives", "exit status 100", "apt-get install -y --no-install-recommends postgresql\n", "create_main_cluster = false"},
		},
		"an ordinary user is told what root should run": {
			machine: debian{missing: none, uid: 1000, listed: []string{"postgresql"}},
			say: []string{"Only root", "createcluster.d\n", "echo 'create_main_cluster = false' > ", "apt-get update\n",
				"apt-get install -y --no-install-recommends postgresql\n", "5432"},
		},
		"a system without apt-get is told so, without its commands": {
			machine: debian{missing: none, noApt: true},
			say:     []string{"apt-get is, as on Debian", "--database URL"}, hush: []string{"--no-install-recommends"},
		},
		"a package that does not help is not called a success": {
			machine: debian{missing: none, listed: []string{"postgresql"}, useless: true},
			ran:     []string{policy, get}, installed: []string{"postgresql"}, say: []string{"and yet", "were not found"},
		},
		"a fault that no package cures is told as it is": {
			machine: debian{missing: errors.New("data directory is damaged"), listed: []string{"postgresql"}},
			say:     []string{"data directory is damaged"}, hush: []string{"apt-get"},
		},
	}
	for name, test := range tests {
		t.Run(name, func(t *testing.T) {
			d := test.machine
			d.settingsDir = filepath.Join(t.TempDir(), "createcluster.d")
			var log bytes.Buffer
			got, err := install.EnsureOn(t.Context(), d.machine(), "", &log)
			if got != test.want || (err == nil) != (test.want != "") {
				t.Fatalf("got %q, %v; want %q", got, err, test.want)
			}
			if !slices.Equal(d.ran, test.ran) {
				t.Errorf("ran: got %q, want %q", d.ran, test.ran)
			}
			if !slices.Equal(d.installed, test.installed) || slices.Contains(d.hadSetting, false) {
				t.Errorf("installed: got %q (with the setting: %v), want %q", d.installed, d.hadSetting, test.installed)
			}
			if _, err := os.Stat(filepath.Join(d.settingsDir, "limitary.conf")); (err == nil) != test.settings {
				t.Errorf("the setting is there: got %v, want %v", err == nil, test.settings)
			}
			for _, text := range test.say {
				if !strings.Contains(err.Error(), text) {
					t.Errorf("got error %q, want %q in it", err, text)
				}
			}
			for _, text := range test.hush {
				if strings.Contains(err.Error(), text) {
					t.Errorf("got error %q, want it without %q", err, text)
				}
			}
			if (log.Len() > 0) != (len(test.ran) > 0) {
				t.Errorf("log: got %q after %q", log.String(), test.ran)
			}
		})
	}
}

// Callers tell a machine without programs from other faults.
func TestErrorKeepsItsCause(t *testing.T) {
	d := debian{missing: &postgres.NotFoundError{}, uid: 1000, settingsDir: t.TempDir()}
	_, err := install.EnsureOn(t.Context(), d.machine(), "", &bytes.Buffer{})
	var cause *postgres.NotFoundError
	var own *install.Error
	if !errors.As(err, &cause) || !errors.As(err, &own) {
		t.Errorf("got %T %v, want an install.Error over a postgres.NotFoundError", err, err)
	}
}
