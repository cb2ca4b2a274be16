//go:build unix

package postgres

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"sync"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5"
)

// Options say which cluster to run and how.
type Options struct {
	// Dir is the state directory; it is made if need be.
	Dir string
	// Durable keeps what is committed even when the machine loses its power. Without it
	// only the end of processes is survived: it is for tests.
	Durable bool
	// Log receives a line for each step that takes time. PostgreSQL's own log is a file
	// in Dir.
	Log io.Writer
}

// Cluster is a running PostgreSQL, owned by this process. Its methods may be called
// from several goroutines.
type Cluster struct {
	paths     paths
	lock      *os.File
	log       *os.File
	logStart  int64
	socketDir string
	cmd       *exec.Cmd

	done   chan struct{} // closed once err is final
	err    error
	stop   sync.Once
	result error
}

// Start takes the state directory, makes the cluster and [Database] if they are not
// there, and returns when PostgreSQL takes connections, however long the recovery from
// an earlier crash takes it. The context bounds the start alone. The errors that callers
// may tell apart are [NotFoundError], [VersionError] and [InUseError].
func Start(ctx context.Context, o Options) (*Cluster, error) {
	if o.Log == nil {
		o.Log = io.Discard
	}
	p, err := makeStateDir(o.Dir)
	if err != nil {
		return nil, err
	}
	lock, err := takeLock(ctx, p)
	if err != nil {
		return nil, err
	}
	c, err := start(ctx, p, o)
	if err != nil {
		_ = lock.Close()
		return nil, err
	}
	c.lock = lock
	return c, nil
}

// start does what Start does once the directory is ours.
func start(ctx context.Context, p paths, o Options) (*Cluster, error) {
	a, bin, err := prepare(ctx, p, o)
	if err != nil {
		return nil, err
	}
	socketDir, err := makeSocketDir(p, a)
	if err != nil {
		return nil, err
	}
	c := &Cluster{paths: p, socketDir: socketDir, done: make(chan struct{})}
	if c.log, c.logStart, err = openLog(p); err != nil {
		return nil, err
	}
	if err = record(p, socketDir); err == nil {
		err = c.launch(a, bin, o.Durable)
	}
	if err != nil {
		forget(p, socketDir)
		_ = c.log.Close()
		return nil, err
	}
	if err := c.await(ctx); err != nil {
		// Its own complaint is in err; a second one about the stop would only hide it.
		_ = c.Stop()
		return nil, err
	}
	return c, nil
}

// prepare makes sure of a data directory that nobody works in, and of the programs.
func prepare(ctx context.Context, p paths, o Options) (a account, bin string, err error) {
	if err := quiesce(ctx, p, o.Log); err != nil {
		return a, "", err
	}
	if a, err = accountFor(p.data()); err != nil {
		return a, "", err
	}
	if bin, _, err = Find(p.data()); err != nil {
		return a, "", err
	}
	if err = a.checkReach(string(p), bin); err != nil {
		return a, "", err
	}
	there, err := hasCluster(p)
	if err != nil || there {
		return a, bin, err
	}
	fmt.Fprintf(o.Log, "making an empty PostgreSQL cluster in %s\n", p)
	return a, bin, initialise(ctx, p, a, bin, o.Durable)
}

// settings are the arguments of postgres. They stand above the configuration files in
// the data directory, so that no edit there opens a TCP port.
func settings(p paths, socketDir string, durable bool) []string {
	args := []string{"-D", p.data()}
	set := func(name, value string) { args = append(args, "-c", name+"="+value) }
	set("listen_addresses", "")
	set("port", strconv.Itoa(socketPort))
	set("unix_socket_directories", quoteListItem(socketDir))
	set("unix_socket_permissions", "0700")
	set("max_connections", strconv.Itoa(MaxConnections))
	set("logging_collector", "off")
	set("timezone", "UTC")
	set("log_timezone", "UTC")
	set("log_line_prefix", "%m [%p] ")
	set("log_min_error_statement", "panic") // statements hold the laboratories' values
	if durable {
		set("fsync", "on")
		set("synchronous_commit", "on")
		set("full_page_writes", "on")
		return args
	}
	// A commit still reaches the operating system before it is answered, so that tests
	// may kill PostgreSQL and hold it to what it has acknowledged.
	set("fsync", "off")
	set("wal_level", "minimal")
	set("max_wal_senders", "0")
	set("shared_buffers", "64MB")
	set("autovacuum", "off")
	return args
}

// launch starts the postmaster.
func (c *Cluster) launch(a account, bin string, durable bool) error {
	c.cmd = a.command(c.paths.data(), filepath.Join(bin, "postgres"), settings(c.paths, c.socketDir, durable)...)
	c.cmd.Stdout, c.cmd.Stderr = c.log, c.log
	started, ended := tied(c.cmd)
	if err := <-started; err != nil {
		return fmt.Errorf("starting PostgreSQL: %w", err)
	}
	go func() {
		c.err = <-ended
		close(c.done)
	}()
	return nil
}

// await waits until the postmaster that we started takes connections, and makes the
// database if it is not there.
func (c *Cluster) await(ctx context.Context) error {
	var last error
	err := poll(ctx, func() (bool, error) {
		select {
		case <-c.done:
			return false, fmt.Errorf("PostgreSQL ended while starting: %w\n%s", endedWith(c.err), tail(c.log, c.logStart))
		default:
		}
		var conn *pgx.Conn
		if conn, last = connect(ctx, c.socketDir, "postgres"); last != nil {
			return false, hopeless(last)
		}
		defer conn.Close(context.WithoutCancel(ctx))
		// A stranger's server may answer on the socket: ours has written its number.
		if pid, err := postmasterPID(c.paths.data()); err != nil || pid != c.PID() {
			return false, err
		}
		return true, makeDatabase(ctx, conn)
	})
	if err != nil && ctx.Err() != nil {
		return fmt.Errorf("PostgreSQL in %s did not get ready: %w (%v)", c.paths, ctx.Err(), last)
	}
	return err
}

func makeDatabase(ctx context.Context, conn *pgx.Conn) error {
	var there bool
	err := conn.QueryRow(ctx, `select exists (select from pg_database where datname = $1)`, Database).Scan(&there)
	if err != nil || there {
		return err
	}
	_, err = conn.Exec(ctx, `create database `+pgx.Identifier{Database}.Sanitize())
	return err
}

// URL is the address of a database for a role, for pgx and for libpq. It stays the same
// when the cluster is stopped and started again.
func (c *Cluster) URL(database, user string) string { return connString(c.socketDir, database, user) }

// PID is the process id of the postmaster.
func (c *Cluster) PID() int { return c.cmd.Process.Pid }

// Done is closed when PostgreSQL has ended, by itself or through Stop.
func (c *Cluster) Done() <-chan struct{} { return c.done }

// Err says how PostgreSQL ended where it ended other than by a shutdown in order; it is
// nil while PostgreSQL runs.
func (c *Cluster) Err() error {
	select {
	case <-c.done:
	default:
		return nil
	}
	if c.err == nil {
		return nil
	}
	return fmt.Errorf("PostgreSQL in %s: %w; its log is %s", c.paths, endedWith(c.err), c.paths.log())
}

// Stop has PostgreSQL cut its connections, write everything to the data directory and
// end; then it gives the state directory back. It also does the latter after PostgreSQL
// has ended by itself, and then answers how that came. Calling it again changes nothing.
func (c *Cluster) Stop() error {
	c.stop.Do(func() {
		c.result = errors.Join(c.shutDown(), c.Err())
		forget(c.paths, c.socketDir)
		_ = c.log.Close()
		if c.lock != nil {
			_ = c.lock.Close()
		}
	})
	return c.result
}

// shutDown asks for a fast shutdown and, when that takes too long, for an immediate
// one, which loses nothing committed but has the next start recover.
func (c *Cluster) shutDown() error {
	for _, request := range []syscall.Signal{syscall.SIGINT, syscall.SIGQUIT} {
		err := c.cmd.Process.Signal(request)
		if err != nil && !errors.Is(err, os.ErrProcessDone) {
			return err
		}
		patience := time.NewTimer(Patience)
		select {
		case <-c.done:
			patience.Stop()
			return nil
		case <-patience.C:
		}
	}
	if err := c.cmd.Process.Kill(); err != nil && !errors.Is(err, os.ErrProcessDone) {
		return err
	}
	<-c.done
	return nil
}

// Kill ends the postmaster and every process under it with kill -9, as the end of the
// machine would, returns when they are gone, and gives the state directory back. It is for
// tests of what is kept; the next start recovers.
func (c *Cluster) Kill(ctx context.Context) error {
	// The postmaster first, which would otherwise begin to recover by itself.
	if err := c.cmd.Process.Kill(); err != nil && !errors.Is(err, os.ErrProcessDone) {
		return err
	}
	<-c.done
	err := poll(ctx, func() (bool, error) {
		pids, err := serversIn(c.paths.data())
		for _, pid := range pids {
			_ = syscall.Kill(pid, syscall.SIGKILL) // it may have ended just now
		}
		return len(pids) == 0, err
	})
	_ = c.Stop() // it answers how PostgreSQL ended, which we know
	return err
}

// endedWith words how a process ended, also where it ended well.
func endedWith(err error) error {
	if err == nil {
		return errors.New("it shut down")
	}
	return err
}
