package main

import (
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"limitary/internal/postgres"
)

const (
	// wireSchedules is how many random schedules go over the wire; internal/store runs many more of them without one.
	wireSchedules = 12
	wireWriters   = 8
)

// replica is a process of the service.
type replica struct {
	cmd     *exec.Cmd
	address string
	errors  *lockedBuffer
}

// startReplica runs "limitary serve" on a database as a process of its own.
func startReplica(t *testing.T, url string) *replica {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), tryPatience)
	t.Cleanup(cancel)
	cmd := exec.CommandContext(ctx, os.Args[0], "serve", "--database", url, "--http", "127.0.0.1:0", "--grpc", "127.0.0.1:0", "--log-level", "error")
	p := &replica{cmd: cmd, errors: newLockedBuffer()}
	cmd.Env, cmd.Stderr = append(os.Environ(), helperTry+"=1"), p.errors
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	ended := make(chan error, 1)
	go func() { ended <- cmd.Wait() }()
	t.Cleanup(func() { _ = cmd.Process.Kill(); <-ended })
	for {
		if m := servingLine.FindStringSubmatch(p.errors.String()); m != nil {
			p.address = m[2]
			return p
		}
		select {
		case <-p.errors.grown:
		case err := <-ended:
			ended <- err
			t.Fatalf("serve ended with %v:\n%s", err, p.errors)
		}
	}
}

// replicas is a database with two service processes, and eight clients spread over them.
type replicas struct {
	t         *testing.T
	url       string
	processes [2]*replica
	writers   [wireWriters]*wireClient
	// acked has chart and source id of every result that was acknowledged.
	acked sync.Map
}

func newReplicas(t *testing.T) *replicas {
	t.Helper()
	cluster, err := postgres.Start(t.Context(), postgres.Options{Dir: traversableDir(t)})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := cluster.Stop(); err != nil {
			t.Error(err)
		}
	})
	owner := cluster.URL(postgres.Database, postgres.Owner)
	conn, err := pgx.Connect(t.Context(), owner)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := conn.Exec(t.Context(), `CREATE ROLE limitary_service LOGIN`); err != nil {
		t.Fatal(err)
	}
	_ = conn.Close(t.Context())
	shell(t, "", "migrate", "--database", owner).want(t, exitOK)
	s := &replicas{t: t, url: cluster.URL(postgres.Database, serviceLogin)}
	tokens := map[string]string{}
	// The second approver confirms what the first asks for.
	for name, role := range map[string]string{"author": "author", "approver": "approver", "second": "approver", "poster": "poster"} {
		r := shell(t, "", "key", "create", "--database", s.url, "--name", name, "--role", role).want(t, exitOK)
		tokens[name] = strings.TrimSpace(r.out)
	}
	for i := range s.processes {
		s.processes[i] = startReplica(t, s.url)
	}
	for i := range s.writers {
		s.writers[i] = newWireClient(t, s.processes[i%2].address, tokens)
	}
	return s
}

// run does the ops in a random order by all writers. It gives the ops that a process was gone for; any other failure is
// the error. Done, where given, is called after each op that went well.
func (s *replicas) run(ctx context.Context, seed uint64, ops []wireOp, done func()) (unsure []wireOp, err error) {
	r := rand.New(rand.NewPCG(seed, 9))
	r.Shuffle(len(ops), func(i, j int) { ops[i], ops[j] = ops[j], ops[i] })
	work := make(chan wireOp, len(ops))
	for _, o := range ops {
		work <- o
	}
	close(work)
	var mu sync.Mutex
	var wg sync.WaitGroup
	for _, writer := range s.writers {
		wg.Go(func() {
			for o := range work {
				failure := o.do(ctx, writer)
				switch {
				case failure == nil && done != nil:
					done()
				case status.Code(failure) == codes.Unavailable && done != nil:
					mu.Lock()
					unsure = append(unsure, o)
					mu.Unlock()
					return // the others go on
				case failure != nil:
					mu.Lock()
					err = fmt.Errorf("racing: %s: %w", o.name, failure)
					mu.Unlock()
					return
				}
			}
		})
	}
	wg.Wait()
	return unsure, err
}

// inOrder does the ops of a world one after the other through one process.
func (s *replicas) inOrder(ctx context.Context, w *wireWorld, name string) error {
	if err := s.writers[1].found(ctx, w, name); err != nil {
		return err
	}
	for _, o := range s.ops(w, name) {
		if err := o.do(ctx, s.writers[1]); err != nil {
			return fmt.Errorf("in order: %s: %w", o.name, err)
		}
	}
	return nil
}

// compare wants the charts of two names to be in the same state.
func (s *replicas) compare(ctx context.Context, ordered, racing string) error {
	want, err := s.writers[1].dump(ctx, ordered)
	if err != nil {
		return err
	}
	got, err := s.writers[1].dump(ctx, racing)
	if err != nil {
		return err
	}
	for i := range max(len(want), len(got)) {
		at := func(list []string) string {
			if i < len(list) {
				return list[i]
			}
			return "nothing"
		}
		if at(want) != at(got) {
			return fmt.Errorf("states differ:\nin order %s\nracing   %s", at(want), at(got))
		}
	}
	if len(want) == 0 {
		return fmt.Errorf("%s has no state to compare", ordered)
	}
	return nil
}

func (s *replicas) schedule(ctx context.Context, w *wireWorld) error {
	ordered, racing := fmt.Sprint("ordered-", w.seed), fmt.Sprint("racing-", w.seed)
	if err := s.inOrder(ctx, w, ordered); err != nil {
		return err
	}
	if err := s.writers[0].found(ctx, w, racing); err != nil {
		return err
	}
	if _, err := s.run(ctx, w.seed, s.ops(w, racing), nil); err != nil {
		return err
	}
	return s.compare(ctx, ordered, racing)
}

// TestTwoProcessesEndInTheStateOfOne runs random schedules of posts (late, twice, conflicting, batched), amendments,
// voids, marks, versions and lots by eight gRPC clients over two service processes, and compares what the API then tells
// with the same schedule done in order through one. Then one process is killed in the middle of a schedule: what it had
// acknowledged is there once, the other goes on, and what it had not acknowledged is safe to repeat.
func TestTwoProcessesEndInTheStateOfOne(t *testing.T) {
	s := newReplicas(t)
	ctx, cancel := context.WithTimeout(t.Context(), tryPatience)
	defer cancel()
	started := time.Now()
	for seed := range uint64(wireSchedules) {
		if err := s.schedule(ctx, newWireWorld(seed, 20+int(seed)%3*8)); err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
	}
	t.Logf("%d schedules, seeds 0 to %d, in %v", wireSchedules, wireSchedules-1, time.Since(started).Round(time.Millisecond))
	s.killed(ctx, newWireWorld(1000, 120))
	r := shell(t, "", "recheck", "--database", s.url).want(t, exitOK, " 0 differences")
	t.Logf("recheck: %s", strings.TrimSpace(r.out))
	for i, p := range s.processes {
		if text := p.errors.String(); strings.Contains(text, `"level":"ERROR"`) {
			t.Errorf("process %d logged a fault:\n%s", i, text)
		}
	}
}

// killed ends the first process without warning, once half of a schedule is acknowledged.
func (s *replicas) killed(ctx context.Context, w *wireWorld) {
	t := s.t
	t.Helper()
	const ordered, racing = "ordered-kill", "racing-kill"
	if err := s.inOrder(ctx, w, ordered); err != nil {
		t.Fatalf("seed %d: %v", w.seed, err)
	}
	if err := s.writers[0].found(ctx, w, racing); err != nil {
		t.Fatalf("seed %d: %v", w.seed, err)
	}
	ops := s.ops(w, racing)
	var finished, before atomic.Int64
	unsure, err := s.run(ctx, w.seed, ops, func() {
		if finished.Add(1) == int64(len(ops)/2) {
			before.Store(int64(s.acknowledged(w, racing)))
			_ = s.processes[0].cmd.Process.Signal(syscall.SIGKILL)
		}
	})
	if err != nil {
		t.Fatalf("seed %d: %v", w.seed, err)
	}
	if len(unsure) == 0 {
		t.Errorf("seed %d: the kill hit no client; it was too late to show anything", w.seed)
	}
	counts, err := s.writers[1].counts(ctx, racing)
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range w.results {
		if _, ok := s.acked.Load(racing + "/" + r.SourceId); ok && counts[r.SourceId] != 1 {
			t.Errorf("seed %d: %s was acknowledged and is there %d times, want once", w.seed, r.SourceId, counts[r.SourceId])
		}
	}
	t.Logf("seed %d: killed after %d of %d operations, with %d results acknowledged and %d when the other process was done; %d clients were left without an answer",
		w.seed, len(ops)/2, len(ops), before.Load(), s.acknowledged(w, racing), len(unsure))
	for _, o := range unsure {
		if err := o.do(ctx, s.writers[1]); err != nil {
			t.Errorf("seed %d: repeating %s: %v", w.seed, o.name, err)
		}
	}
	if err := s.compare(ctx, ordered, racing); err != nil {
		t.Errorf("seed %d: %v", w.seed, err)
	}
}

func (s *replicas) acknowledged(w *wireWorld, name string) (n int) {
	for _, r := range w.results {
		if _, ok := s.acked.Load(name + "/" + r.SourceId); ok {
			n++
		}
	}
	return n
}
