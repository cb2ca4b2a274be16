package store_test

import (
	"context"
	"fmt"
	"io"
	"net"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/pgtest"
	"limitary/internal/store"
)

// cutter stands between a store and PostgreSQL and cuts the connection at a commit.
type cutter struct {
	socket string // PostgreSQL's own
	// mode is what happens at the next commit; it is taken once.
	mode atomic.Int32
}

const (
	passOn int32 = iota
	// cutBefore loses the commit on its way there, cutAfter its answer on the way back.
	cutBefore
	cutAfter
)

func newCutter(t *testing.T, serviceURL string) (c *cutter, address string) {
	at, err := url.Parse(serviceURL)
	if err != nil {
		t.Fatal(err)
	}
	dir, err := os.MkdirTemp("", "cut")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	query := at.Query()
	c = &cutter{socket: filepath.Join(query.Get("host"), ".s.PGSQL.5432")}
	listener, err := net.Listen("unix", filepath.Join(dir, ".s.PGSQL.5432"))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { listener.Close() })
	go func() {
		for {
			client, err := listener.Accept()
			if err != nil {
				return
			}
			go c.serve(client)
		}
	}()
	query.Set("host", dir)
	// Statements travel as text every time, so that a commit can be seen.
	query.Set("default_query_exec_mode", "cache_describe")
	at.RawQuery = query.Encode()
	return c, at.String()
}

func (c *cutter) serve(client net.Conn) {
	server, err := net.Dial("unix", c.socket)
	if err != nil {
		client.Close()
		return
	}
	var once sync.Once
	end := func() { once.Do(func() { client.Close(); server.Close() }) }
	go func() {
		defer end()
		buf := make([]byte, 1<<16)
		for {
			n, err := server.Read(buf)
			if err != nil {
				return
			}
			// The tag of a finished commit: it has happened, and nobody hears of it.
			if strings.Contains(string(buf[:n]), "COMMIT\x00") && c.mode.CompareAndSwap(cutAfter, passOn) {
				return
			}
			if _, err := client.Write(buf[:n]); err != nil {
				return
			}
		}
	}()
	defer end()
	buf := make([]byte, 1<<20)
	for {
		n, err := client.Read(buf)
		if err != nil {
			return
		}
		if strings.Contains(strings.ToLower(string(buf[:n])), "commit\x00") && c.mode.CompareAndSwap(cutBefore, passOn) {
			return
		}
		if _, err := io.Copy(server, strings.NewReader(string(buf[:n]))); err != nil {
			return
		}
	}
}

// TestPostOverCutConnection cuts the connection just before and just after the commit of a post. Nothing is acknowledged
// in either case, and repeating it stores each result exactly once.
func TestPostOverCutConnection(t *testing.T) {
	t.Run("before the commit", func(t *testing.T) { postOverCut(t, cutBefore, store.Accepted) })
	t.Run("after the commit", func(t *testing.T) { postOverCut(t, cutAfter, store.Duplicate) })
}

func postOverCut(t *testing.T, mode int32, repeated store.Outcome) {
	db := pgtest.New(t)
	s := newSite(t, db)
	cut, address := newCutter(t, db.ServiceURL())
	faulty, err := store.Open(t.Context(), address, store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer faulty.Close()
	w := newWorld(1)
	w.lots = false
	if err := s.found(t.Context(), w, "cut"); err != nil {
		t.Fatal(err)
	}
	for i := range 20 {
		row := w.results[i]
		row.Chart, row.Lot = "cut", ""
		post := func() (store.PostAnswer, error) {
			return faulty.PostResults(t.Context(), s.poster, []definition.Result{row}, false, nil)
		}
		want := store.Accepted
		if i%3 == 0 {
			cut.mode.Store(mode)
			if answer, err := post(); err == nil {
				t.Fatalf("row %d was acknowledged over a cut connection: %v", i, answer.Rows[0].Outcome)
			} else if !store.Unavailable(err) {
				t.Errorf("row %d: %v is not told as unavailable", i, err)
			}
			want = repeated
		}
		answer, err := post()
		if err != nil {
			t.Fatal(err)
		}
		if got := answer.Rows[0].Outcome; got != want {
			t.Errorf("row %d: outcome %d, want %d", i, got, want)
		}
	}
	if n := s.count(t, "cut"); n != 20 {
		t.Errorf("%d results are stored, want 20", n)
	}
	s.recheck(t)
}

// TestConnectionsLostUnderLoad ends all connections of the database again and again while eight writers post. What was
// acknowledged is stored exactly once, and what was not is safe to repeat.
func TestConnectionsLostUnderLoad(t *testing.T) {
	db := pgtest.New(t)
	s := newSite(t, db)
	w := newWorld(2)
	w.lots = false
	if err := s.found(t.Context(), w, "lossy"); err != nil {
		t.Fatal(err)
	}
	const perWriter = 20
	posted := make(chan struct{})
	var wg sync.WaitGroup
	for writer := range 8 {
		wg.Go(func() {
			for i := range perWriter {
				row := w.results[i%len(w.results)]
				row.Chart, row.Lot, row.SourceID = "lossy", "", fmt.Sprintf("w%d-%d", writer, i)
				row.MeasuredAt = epoch.Add(time.Duration(writer*perWriter+i) * time.Minute)
				if err := s.insist(t.Context(), s.stores[writer%2], row); err != nil {
					t.Errorf("%s: %v", row.SourceID, err)
					return
				}
				posted <- struct{}{}
			}
		})
	}
	go func() {
		wg.Wait()
		close(posted)
	}()
	lost, acknowledged := 0, 0
	for range posted {
		if acknowledged++; acknowledged%16 == 0 {
			lost += db.Cut()
		}
	}
	if lost == 0 {
		t.Error("no connection was lost; the test shows nothing")
	}
	if n := s.count(t, "lossy"); n != 8*perWriter {
		t.Errorf("%d results are stored, want %d", n, 8*perWriter)
	}
	s.recheck(t)
}

// insist posts a result until it is acknowledged.
func (s *site) insist(ctx context.Context, st *store.Store, row definition.Result) error {
	for {
		answer, err := st.PostResults(ctx, s.poster, []definition.Result{row}, false, nil)
		switch {
		case err != nil && store.Unavailable(err):
			continue
		case err != nil:
			return err
		}
		if o := answer.Rows[0].Outcome; o != store.Accepted && o != store.Duplicate {
			return fmt.Errorf("outcome %d: %v", o, answer.Rows[0].Problem)
		}
		return nil
	}
}

// count counts the results of a chart, page by page.
func (s *site) count(t *testing.T, name string) (total int) {
	t.Helper()
	for token := ""; ; {
		list, next, err := s.stores[0].ListResults(t.Context(), s.poster, store.ResultFilter{Chart: name, IncludeVoided: true}, store.Page{Size: 100, Token: token})
		if err != nil {
			t.Fatal(err)
		}
		total += len(list)
		if token = next; token == "" {
			return total
		}
	}
}

func (s *site) recheck(t *testing.T) {
	t.Helper()
	report, err := s.stores[1].Recheck(t.Context(), nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range report.Differences {
		t.Error(d)
	}
}
