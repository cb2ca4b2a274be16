package pgtest

import (
	"context"
	"os"
	"testing"

	"limitary/internal/postgres"
)

// Cluster is a whole server of one test, with one migrated database. Its methods fail
// the test where they cannot do what they say, and so must be called from its goroutine;
// the addresses stay the same over restarts and may be used by any.
type Cluster struct {
	tb      testing.TB
	dir     string
	running *postgres.Cluster // nil while it is down
	// The addresses are kept, so that they can be asked for while the server is down.
	ownerURL, serviceURL string
}

// StartCluster starts a server for tests that must stop or kill it; it takes about two
// seconds, and [New] is for all others. The server is stopped when the test ends.
func StartCluster(tb testing.TB) *Cluster {
	tb.Helper()
	if shared.migrate == nil {
		tb.Fatal("pgtest: the TestMain of this package does not call pgtest.Main")
	}
	dir, err := tempDir()
	if err != nil {
		tb.Fatal("pgtest:", err)
	}
	c := &Cluster{tb: tb, dir: dir}
	tb.Cleanup(func() {
		if c.running != nil {
			if err := c.running.Stop(); err != nil {
				tb.Errorf("pgtest: %v", err)
			}
		}
		if err := os.RemoveAll(dir); err != nil {
			tb.Errorf("pgtest: %v", err)
		}
	})
	c.Start()
	c.ownerURL = c.running.URL(postgres.Database, postgres.Owner)
	c.serviceURL = c.running.URL(postgres.Database, Service)
	ctx, cancel := context.WithTimeout(tb.Context(), startTimeout)
	defer cancel()
	c.must("migrating", shared.migrate(ctx, c.ownerURL))
	return c
}

// OwnerURL is the address for the owner of the schema.
func (c *Cluster) OwnerURL() string { return c.ownerURL }

// ServiceURL is the address for the login that the service uses.
func (c *Cluster) ServiceURL() string { return c.serviceURL }

// Start starts the server again after Stop or Kill, and returns when it takes
// connections: after Kill, that is when it has recovered.
func (c *Cluster) Start() {
	c.tb.Helper()
	if c.running != nil {
		c.tb.Fatal("pgtest: the server is running already")
	}
	ctx, cancel := context.WithTimeout(c.tb.Context(), startTimeout)
	defer cancel()
	running, err := postgres.Start(ctx, postgres.Options{Dir: c.dir})
	c.must("starting", err)
	c.running = running
}

// Stop shuts the server down in order: connections are cut, and what they had not
// committed is rolled back.
func (c *Cluster) Stop() {
	c.tb.Helper()
	c.must("stopping", c.take().Stop())
}

// Kill ends every process of the server with kill -9, and returns when they are gone:
// nothing is committed after it.
func (c *Cluster) Kill() {
	c.tb.Helper()
	ctx, cancel := context.WithTimeout(c.tb.Context(), startTimeout)
	defer cancel()
	c.must("killing", c.take().Kill(ctx))
}

// take hands over the running server, which is down from the next line on.
func (c *Cluster) take() *postgres.Cluster {
	c.tb.Helper()
	if c.running == nil {
		c.tb.Fatal("pgtest: the server is not running")
	}
	running := c.running
	c.running = nil
	return running
}

func (c *Cluster) must(doing string, err error) {
	c.tb.Helper()
	if err != nil {
		c.tb.Fatalf("pgtest: %s the server: %v", doing, err)
	}
}
