//go:build !unix

package postgres

import (
	"context"
	"errors"
	"io"
)

var errUnsupported = errors.New("a private PostgreSQL can be run on Unix systems only: give the address of an existing database")

// Options are described for Unix systems, the only ones that can use them.
type Options struct {
	Dir     string
	Durable bool
	Log     io.Writer
}

// Cluster cannot be had here.
type Cluster struct{}

// Find always fails here.
func Find(string) (binDir string, version int, err error) { return "", 0, errUnsupported }

// Start always fails here.
func Start(context.Context, Options) (*Cluster, error) { return nil, errUnsupported }

// Running finds nothing here.
func Running(context.Context, string) (url func(database, user string) string, ok bool, err error) {
	return nil, false, nil
}

// DefaultDir always fails here.
func DefaultDir(func(string) string) (string, error) { return "", errUnsupported }

// URL is never reached.
func (*Cluster) URL(string, string) string { return "" }

// Stop is never reached.
func (*Cluster) Stop() error { return errUnsupported }

// Kill is never reached.
func (*Cluster) Kill(context.Context) error { return errUnsupported }

// Done is never reached.
func (*Cluster) Done() <-chan struct{} { return nil }

// Err is never reached.
func (*Cluster) Err() error { return errUnsupported }

// PID is never reached.
func (*Cluster) PID() int { return 0 }
