//go:build unix

package postgres

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// programDirs are the patterns of the directories in which packages put the
// server programs, one directory a major version: Debian's and the RPM packages'.
var programDirs = []string{"/usr/lib/postgresql/*/bin", "/usr/pgsql-*/bin"}

// installation is one set of server programs.
type installation struct {
	bin     string
	version int
}

// Find gives the directory of the server programs and their major version. Where
// dataDir holds a cluster, the programs must be of the version that made it, else
// the newest are taken; pg_config and PATH are asked when the usual places hold
// none that fits. The error is a [NotFoundError] where no programs of
// [MinimumVersion] or newer are installed, and a [VersionError] where none of them
// can use dataDir.
func Find(dataDir string) (binDir string, version int, err error) {
	wanted, err := dataVersion(dataDir)
	if err != nil {
		return "", 0, err
	}
	found := installations()
	for _, in := range found {
		if wanted == 0 || in.version == wanted {
			return in.bin, in.version, nil
		}
	}
	if len(found) == 0 {
		return "", 0, &NotFoundError{Version: wanted}
	}
	return "", 0, &VersionError{DataDir: dataDir, Made: wanted, Found: found[0].version, BinDir: found[0].bin}
}

// installations lists the usable server programs, in the usual places newest
// first, then those pg_config and PATH lead to.
func installations() []installation {
	var found []installation
	for _, pattern := range programDirs {
		dirs, _ := filepath.Glob(pattern) // the only error is a malformed pattern
		for _, dir := range dirs {
			found = appendInstallation(found, dir)
		}
	}
	slices.SortStableFunc(found, func(a, b installation) int { return b.version - a.version })
	if out, err := exec.Command("pg_config", "--bindir").Output(); err == nil {
		found = appendInstallation(found, strings.TrimSpace(string(out)))
	}
	if path, err := exec.LookPath("postgres"); err == nil {
		found = appendInstallation(found, filepath.Dir(path))
	}
	return found
}

// appendInstallation adds dir where it holds both programs, of a version that can be
// used. pg_config may name a directory without them: it comes with the client library.
func appendInstallation(found []installation, dir string) []installation {
	if _, err := os.Stat(filepath.Join(dir, "initdb")); err != nil {
		return found
	}
	dir, err := filepath.Abs(dir)
	if err != nil {
		return found
	}
	out, err := exec.Command(filepath.Join(dir, "postgres"), "--version").Output()
	if err != nil {
		return found
	}
	version := majorVersion(string(out))
	if version < MinimumVersion {
		return found
	}
	return append(found, installation{bin: dir, version: version})
}

var versionPattern = regexp.MustCompile(`^\D*(\d+)`)

// majorVersion reads "postgres (PostgreSQL) 15.18 (Debian ...)" and the text of a
// PG_VERSION file; 0 means that no number was found.
func majorVersion(text string) int {
	match := versionPattern.FindStringSubmatch(text)
	if match == nil {
		return 0
	}
	version, err := strconv.Atoi(match[1])
	if err != nil {
		return 0
	}
	return version
}

// dataVersion is the major version that made a data directory, 0 where there is none.
func dataVersion(dataDir string) (int, error) {
	file := filepath.Join(dataDir, "PG_VERSION")
	text, err := os.ReadFile(file)
	if errors.Is(err, fs.ErrNotExist) {
		return 0, nil
	}
	if errors.Is(err, fs.ErrPermission) {
		return 0, fmt.Errorf("data directory %s may not be read by this user: run as its owner or as root: %w", dataDir, err)
	}
	if err != nil {
		return 0, err
	}
	version := majorVersion(string(text))
	if version == 0 {
		return 0, fmt.Errorf("%s holds %q, which is no PostgreSQL version: the data directory is damaged; restore it from a backup, or move it away to begin an empty one", file, text)
	}
	return version, nil
}
