package store_test

import (
	"bytes"
	"errors"
	"io"
	"net"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"

	"limitary/internal/definition"
	"limitary/internal/store"
)

// relay stands between the service and PostgreSQL. Armed, it waits for the server to say that it has committed, and cuts
// the line instead of passing that on: what failed for the caller has been stored.
type relay struct {
	armed atomic.Bool
	// down keeps new connections out; a cut sets it where staysDown is set.
	down, staysDown atomic.Bool
	url             string
}

// arm readies the relay for one cut.
func (r *relay) arm(staysDown bool) {
	r.staysDown.Store(staysDown)
	r.armed.Store(true)
}

// cut answers whether it is time to cut.
func (r *relay) cut() bool {
	if !r.armed.CompareAndSwap(true, false) {
		return false
	}
	r.down.Store(r.staysDown.Load())
	return true
}

func newRelay(t *testing.T, serviceURL string) *relay {
	t.Helper()
	address, err := url.Parse(serviceURL)
	if err != nil {
		t.Fatal(err)
	}
	query := address.Query()
	socket := ".s.PGSQL." + query.Get("port")
	server := filepath.Join(query.Get("host"), socket)
	dir, err := os.MkdirTemp("", "relay") // short enough for the name of a socket
	if err != nil {
		t.Fatal(err)
	}
	listener, err := net.Listen("unix", filepath.Join(dir, socket))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = listener.Close()
		_ = os.RemoveAll(dir)
	})
	query.Set("host", dir)
	address.RawQuery = query.Encode()
	r := &relay{url: address.String()}
	go func() {
		for {
			client, err := listener.Accept()
			if err != nil {
				return
			}
			go r.serve(client, server)
		}
	}()
	return r
}

func (r *relay) serve(client net.Conn, address string) {
	defer client.Close()
	server, err := net.Dial("unix", address)
	if err != nil {
		return
	}
	if r.down.Load() {
		_ = server.Close()
		return
	}
	defer server.Close()
	go func() {
		defer server.Close()
		_, _ = io.Copy(server, client)
	}()
	buffer := make([]byte, 1<<16)
	for {
		n, err := server.Read(buffer)
		if err != nil || bytes.Contains(buffer[:n], []byte("COMMIT\x00")) && r.cut() {
			return
		}
		if _, err := client.Write(buffer[:n]); err != nil {
			return
		}
	}
}

func TestAnswerLostAfterCommitIsFoundByTheRepeat(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	r := newRelay(t, f.db.ServiceURL())
	s := mustOpen(t, r.url)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	if _, err := s.GetChart(t.Context(), f.ann, c.Name); err != nil {
		t.Fatal(err)
	}
	t.Run("of a change, by the store itself", func(t *testing.T) {
		r.arm(false)
		got, err := s.UpdateChart(t.Context(), f.ann, req(), c.Name, 1, retitled("once"))
		if err != nil || got.Revision != 2 || r.armed.Load() {
			t.Errorf("got revision %d, %v, want 2 in spite of the cut", got.Revision, err)
		}
	})
	t.Run("of a change, by the caller", func(t *testing.T) {
		ask := req()
		r.arm(true)
		_, err := s.UpdateChart(t.Context(), f.ann, ask, c.Name, 2, retitled("twice"))
		if !store.Unavailable(err) || r.armed.Load() {
			t.Fatalf("got %v, want it unavailable after the cut", err)
		}
		if stored, err := f.GetChart(t.Context(), f.ann, c.Name); err != nil || stored.Revision != 3 {
			t.Fatalf("got revision %d, %v: the commit did not happen, and the test shows nothing", stored.Revision, err)
		}
		r.down.Store(false)
		got, err := s.UpdateChart(t.Context(), f.ann, ask, c.Name, 2, retitled("twice"))
		if err != nil || got.Revision != 3 {
			t.Errorf("repeat: got %+v, %v", got, err)
		}
	})
	t.Run("of a post", func(t *testing.T) {
		rows := []definition.Result{result(c, 0, "10"), result(c, 1, "14")}
		if _, err := s.GetChart(t.Context(), f.ann, c.Name); err != nil {
			t.Fatal(err)
		}
		r.arm(true)
		_, err := s.PostResults(t.Context(), f.ann, rows, false, nil)
		if !store.Unavailable(err) || r.armed.Load() {
			t.Fatalf("got %v, want it unavailable after the cut", err)
		}
		r.down.Store(false)
		answer, err := s.PostResults(t.Context(), f.ann, rows, false, nil)
		if err != nil {
			t.Fatal(err)
		}
		for i, row := range answer.Rows {
			want(t, "outcome", row.Outcome, store.Duplicate)
			want(t, "verdict", row.First.Standing, []string{"CLEAR", "STOP"}[i])
		}
	})
	want(t, "results", f.verdicts(c, ""), "CLEAR/1 STOP/1")
	f.wantChains()
	f.mustRecheck()
}

func TestChangeCutBeforeItsCommitIsAsIfNeverMade(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	ask := req()
	cuts := 0
	_, err := f.UpdateChart(t.Context(), f.ann, ask, c.Name, 1, func(c *definition.Chart) error {
		if cuts++; cuts == 1 {
			f.db.Cut()
		}
		c.Title = "once"
		return nil
	})
	if err != nil && !store.Unavailable(err) {
		t.Errorf("got %v, want it unavailable", err)
	}
	if stored, getErr := f.GetChart(t.Context(), f.ann, c.Name); getErr != nil || (err != nil) != (stored.Revision == 1) {
		t.Errorf("the caller was told %v, and the chart is at revision %d (%v)", err, stored.Revision, getErr)
	}
	got, err := f.UpdateChart(t.Context(), f.ann, ask, c.Name, 1, retitled("once"))
	if err != nil || got.Revision != 2 {
		t.Errorf("repeat: got revision %d, %v", got.Revision, err)
	}
	f.wantChains()
}

func TestErrorsOfTheConnectionNameTheMethod(t *testing.T) {
	t.Parallel()
	s := mustOpen(t, "postgres://nobody@/nowhere?host="+t.TempDir()+"&port=5432")
	_, err := s.GetChart(t.Context(), store.Actor{}, "nitrate")
	if !store.Unavailable(err) || !strings.Contains(err.Error(), "GetChart") || errors.Is(err, io.EOF) {
		t.Errorf("got %v, want it unavailable and the method named", err)
	}
}
