package postgres

import (
	"fmt"
	"time"
)

const (
	// Owner is the superuser that initdb makes: migrations and administration log in as it.
	Owner = "limitary_owner"
	// Database is the database of Limitary in the cluster.
	Database = "limitary"
	// MinimumVersion is the oldest PostgreSQL major version used: the oldest one tried.
	MinimumVersion = 15
	// MaxConnections is max_connections of the cluster, PostgreSQL's own default: the
	// pools of a few replicas and commands together stay well under it.
	MaxConnections = 100
	// Patience is how long Start waits for an earlier PostgreSQL in the same directory
	// to end, and Stop for its own: a shutdown writes every changed page first.
	Patience = time.Minute
)

// NotFoundError says that no usable server programs are installed.
type NotFoundError struct {
	// Version is the major version that an existing data directory needs, 0 if any will do.
	Version int
}

func (e *NotFoundError) Error() string {
	version, newer := e.Version, ""
	if version == 0 {
		version, newer = MinimumVersion, " or newer"
	}
	return fmt.Sprintf("the PostgreSQL server programs (postgres and initdb, version %d%s) were not found in /usr/lib/postgresql, through pg_config or on PATH: "+
		"install the Debian package postgresql-%d (or postgresql), or give the address of an existing database", version, newer, version)
}

// VersionError says that a data directory needs server programs that are not installed.
type VersionError struct {
	// DataDir is the data directory, and Made the major version that made it.
	DataDir string
	Made    int
	// Found is the version of the programs that are installed, in BinDir.
	Found  int
	BinDir string
}

func (e *VersionError) Error() string {
	return fmt.Sprintf("data directory %s was made by PostgreSQL %d, but the installed programs in %s are of version %d: "+
		"install the Debian package postgresql-%d, or carry the data over with pg_dump or pg_upgrade first", e.DataDir, e.Made, e.BinDir, e.Found, e.Made)
}

// InUseError says that another process owns the state directory.
type InUseError struct {
	Dir string
	// PID is the owner's process id, 0 if it did not say.
	PID int
}

func (e *InUseError) Error() string {
	owner := "another process"
	if e.PID != 0 {
		owner = fmt.Sprintf("process %d", e.PID)
	}
	return fmt.Sprintf("state directory %s is in use by %s: stop it first, or choose another directory", e.Dir, owner)
}
