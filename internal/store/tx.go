package store

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"errors"
	"math/rand/v2"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgtype"

	"limitary/internal/definition"
)

// work is one writing transaction other than posting.
type work struct {
	tx    pgx.Tx
	actor Actor
	// now is the database clock read under the locks, later than anything recorded on the locked tracks; microseconds, UTC.
	now time.Time
	// heads are the newest entries of the chains locked so far.
	heads map[int64]chainHead
}

// chartRow is a chart as stored.
type chartRow struct {
	ID int64
	// Timeline numbers the state of its versions and marks, see timeline.
	Timeline int64
	definition.Chart
}

// trackRow is a track as stored. Its Version is not filled in.
type trackRow struct {
	Track
	ChartID        int64
	LastRecordedAt time.Time
}

const (
	// retriesMax bounds how often a transaction that PostgreSQL gave up is run again: a conflict that lasts longer than
	// that is better told to the caller.
	retriesMax = 5
	// retryPause is about how long to wait before the first of them, doubling each time, so that two transactions that
	// met once do not meet again.
	retryPause = 5 * time.Millisecond
	// rollbackTimeout bounds how long a caller that has given up waits for its rollback.
	rollbackTimeout = 2 * time.Second
)

// retry runs a transaction again where PostgreSQL gave it up for a reason that may not come again. Do must hold no
// state from one try to the next.
func retry(ctx context.Context, do func() error) error {
	for try := 0; ; try++ {
		err := do()
		if err == nil || try >= retriesMax || !retryable(err) {
			return err
		}
		pause := retryPause << try
		timer := time.NewTimer(pause/2 + rand.N(pause))
		select {
		case <-ctx.Done():
			timer.Stop()
			return ctx.Err()
		case <-timer.C:
		}
	}
}

// change runs fn in one READ COMMITTED transaction that is safe to repeat under req: a repeat with the same digest and
// method calls replay with the stored answer instead of fn; another digest or method is RequestIDReused. Of two repeats
// at once, one waits for the other and then replays. Fn returns the answer to store, small JSON such as ids, and may be
// called more than once; nothing that it sets outside may depend on an earlier call.
//
// A refused request stores nothing: its repeat is a new attempt. Where the connection is lost, the request is repeated
// here: if the answer to its commit was on the way, that answer is found.
func (s *Store) change(ctx context.Context, a Actor, req Request, fn func(ctx context.Context, w *work) (answer any, err error),
	replay func(ctx context.Context, tx pgx.Tx, answer []byte) error) error {
	if err := req.check(); err != nil {
		return err
	}
	return retry(ctx, func() error {
		err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.ReadCommitted}, func(tx pgx.Tx) error {
			w := &work{tx: tx, actor: a, heads: map[int64]chainHead{}}
			answer, found, err := w.earlierAnswer(ctx, req)
			switch {
			case err != nil:
				return err
			case found:
				return replay(ctx, tx, answer)
			}
			if err := w.readClock(ctx, time.Time{}); err != nil {
				return err
			}
			given, err := fn(ctx, w)
			if err != nil {
				return err
			}
			return w.storeAnswer(ctx, req, given)
		})
		return s.noted(ctx, req.Method, err)
	})
}

// noted marks a connection lost in a transaction that is safe to repeat whole, logs what it is about to be run again for,
// and passes the error on.
func (s *Store) noted(ctx context.Context, method string, err error) error {
	if err != nil && connectionLost(err) && ctx.Err() == nil {
		err = &lostError{err}
	}
	if err != nil && retryable(err) {
		s.log.DebugContext(ctx, "transaction given up by the database", "method", method, "cause", err)
	}
	return err
}

// requestIDBytesMax is also what the table allows.
const requestIDBytesMax = 64

func (r Request) check() error {
	if err := definition.CheckText("request_id", r.ID, 1, requestIDBytesMax); err != nil {
		return err
	}
	if r.Method == "" || len(r.Digest) != sha256.Size {
		return errors.New("store: a request without method or digest")
	}
	return nil
}

// earlierAnswer waits for any transaction under the same request id, and then looks for its answer.
func (w *work) earlierAnswer(ctx context.Context, req Request) (answer []byte, found bool, err error) {
	// The lock is taken before all others and held to the end, so it closes no circle. Two ids that happen to share it
	// only wait for each other.
	sum := sha256.Sum256([]byte("request\x00" + w.actor.Principal + "\x00" + req.ID))
	if _, err := w.tx.Exec(ctx, `SELECT pg_advisory_xact_lock($1)`, int64(binary.BigEndian.Uint64(sum[:]))); err != nil {
		return nil, false, err
	}
	var method string
	var digest []byte
	err = w.tx.QueryRow(ctx, `SELECT method, digest, answer FROM requests WHERE principal = $1 AND request_id = $2`,
		w.actor.Principal, req.ID).Scan(&method, &digest, &answer)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, false, nil
	}
	if err == nil && (method != req.Method || string(digest) != string(req.Digest)) {
		err = &definition.Error{Reason: definition.RequestIDReused, Field: "request_id",
			Text: "was used before for a different request; choose a new one for every new request"}
	}
	return answer, err == nil, err
}

func (w *work) storeAnswer(ctx context.Context, req Request, given any) error {
	answer, err := json.Marshal(given)
	if err != nil {
		return err
	}
	_, err = w.tx.Exec(ctx, `INSERT INTO requests (principal, request_id, method, digest, answer, recorded_at) VALUES ($1, $2, $3, $4, $5, $6)`,
		w.actor.Principal, req.ID, req.Method, req.Digest, answer, w.now)
	return err
}

// readClock sets now to the database clock, or just after a moment if the clock has not passed it.
func (w *work) readClock(ctx context.Context, after time.Time) error {
	if err := w.tx.QueryRow(ctx, `SELECT clock_timestamp()`).Scan(&w.now); err != nil {
		return err
	}
	w.now = w.now.UTC().Truncate(time.Microsecond)
	if !after.IsZero() && !w.now.After(after) {
		w.now = after.Add(time.Microsecond)
	}
	return nil
}

// lockChart locks a chart's row and then reads it. The lock keeps out other changes to the chart and new tracks, but
// not posts to the tracks it has.
func (w *work) lockChart(ctx context.Context, name string) (*chartRow, error) {
	// NO KEY leaves room for foreign keys: a post that holds a track, for which chartAndTracks waits, may still have to
	// look at the chart.
	if _, err := w.tx.Exec(ctx, `SELECT FROM charts WHERE name = $1 FOR NO KEY UPDATE`, name); err != nil {
		return nil, err
	}
	c, err := chartByName(ctx, w.tx, w.actor, name)
	if err != nil {
		return nil, err
	}
	return c, w.readClock(ctx, time.Time{})
}

// chartAndTracks locks, in statements of their own, the chart row and then its tracks in the order of their ids, and
// only then reads them and the clock. NotFound also where the key's labels do not allow the chart.
func (w *work) chartAndTracks(ctx context.Context, name string) (*chartRow, []*trackRow, error) {
	c, err := w.lockChart(ctx, name)
	if err != nil {
		return nil, nil, err
	}
	if _, err := w.tx.Exec(ctx, `SELECT FROM tracks WHERE chart_id = $1 ORDER BY track_id FOR UPDATE`, c.ID); err != nil {
		return nil, nil, err
	}
	tracks, err := readTracks(ctx, w.tx, c, `chart_id = $1 ORDER BY track_id`, c.ID)
	if err != nil {
		return nil, nil, err
	}
	return c, tracks, w.clockAfter(ctx, tracks)
}

// chartAndTrack locks one track of a chart and then reads both and the clock; the chart itself is not locked.
func (w *work) chartAndTrack(ctx context.Context, name, lot string) (*chartRow, *trackRow, error) {
	c, err := chartByName(ctx, w.tx, w.actor, name)
	if err != nil {
		return nil, nil, err
	}
	if _, err := w.tx.Exec(ctx, `SELECT FROM tracks WHERE chart_id = $1 AND lot = $2 FOR UPDATE`, c.ID, lot); err != nil {
		return nil, nil, err
	}
	tracks, err := readTracks(ctx, w.tx, c, `chart_id = $1 AND lot = $2`, c.ID, lot)
	if err != nil {
		return nil, nil, err
	}
	if len(tracks) == 0 {
		return nil, nil, noLot(name, lot)
	}
	return c, tracks[0], w.clockAfter(ctx, tracks)
}

func (w *work) clockAfter(ctx context.Context, tracks []*trackRow) error {
	var last time.Time
	for _, t := range tracks {
		if t.LastRecordedAt.After(last) {
			last = t.LastRecordedAt
		}
	}
	return w.readClock(ctx, last)
}

// inSavepoint runs fn in a savepoint and rolls back to it unless fn says to keep what it did. Fn's work shares the clock
// and the chains; it must not reserve an entry, whose lock would be rolled back too.
func (w *work) inSavepoint(ctx context.Context, fn func(w *work) (keep bool, err error)) error {
	inner := *w
	var err error
	if inner.tx, err = w.tx.Begin(ctx); err != nil {
		return err
	}
	keep, err := fn(&inner)
	if err != nil {
		return err // the whole transaction is rolled back
	}
	if keep {
		return inner.tx.Commit(ctx)
	}
	return inner.tx.Rollback(ctx)
}

// read runs fn in a transaction that reads one state of the database. It runs again where the connection turns out to be
// gone, as all of the pool's are after a restart of the database.
func (s *Store) read(ctx context.Context, fn func(ctx context.Context, tx pgx.Tx) error) error {
	options := pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}
	return retry(ctx, func() error {
		return s.noted(ctx, "read", pgx.BeginTxFunc(ctx, s.pool, options, func(tx pgx.Tx) error { return fn(ctx, tx) }))
	})
}

// nullableTime scans a time that may be NULL or infinite; both are the zero time.
type nullableTime struct{ pgtype.Timestamptz }

func (t *nullableTime) time() time.Time {
	if !t.Valid || t.InfinityModifier != pgtype.Finite {
		return time.Time{}
	}
	return t.Time.UTC()
}

// orNullTime is a NULL for the zero time.
func orNullTime(t time.Time) *time.Time {
	if t.IsZero() {
		return nil
	}
	return &t
}
