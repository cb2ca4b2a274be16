package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// noteAnswer is what the repeat of a note finds again.
type noteAnswer struct {
	Signal int64 `json:"signal"`
	Entry  int64 `json:"entry"`
}

// NoteSignal adds a note to a signal, whatever its status.
func (s *Store) NoteSignal(ctx context.Context, a Actor, req Request, id int64, text string) (note Note, err error) {
	defer wrap(ctx, &err, "NoteSignal")
	if err := definition.CheckText("text", text, 1, definition.TextBytesMax); err != nil {
		return note, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		chartID, _, err := w.signalTrack(ctx, `signal_id = $1`, id, noSignal(id))
		if err != nil {
			return nil, err
		}
		entry, err := w.entry(ctx, chartID)
		if err != nil {
			return nil, err
		}
		if err := w.readClock(ctx, time.Time{}); err != nil {
			return nil, err
		}
		_, err = w.tx.Exec(ctx, `INSERT INTO signal_notes (chart_id, signal_id, entry, author, text, recorded_at) VALUES ($1, $2, $3, $4, $5, $6)`,
			chartID, id, entry, a.Principal, text, w.now)
		if err != nil {
			return nil, err
		}
		note = Note{a.Principal, text, w.now}
		return noteAnswer{id, entry}, w.seal(ctx, chartID, entry, "NOTE_SIGNAL", struct {
			Signal int64  `json:"signal"`
			Text   string `json:"text"`
		}{id, text})
	}, func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier noteAnswer
		if err := json.Unmarshal(answer, &earlier); err != nil {
			return err
		}
		err := tx.QueryRow(ctx, `SELECT n.author, n.text, n.recorded_at FROM signal_notes n JOIN charts c USING (chart_id)
			WHERE n.signal_id = $1 AND n.entry = $2 AND c.labels @> $3`, earlier.Signal, earlier.Entry, a.scope()).Scan(&note.Author, &note.Text, &note.RecordedAt)
		if errors.Is(err, pgx.ErrNoRows) {
			return noSignal(earlier.Signal)
		}
		note.RecordedAt = note.RecordedAt.UTC()
		return err
	})
	return note, err
}

// signalTrack finds the chart and track of signals that a condition selects, on a chart in the actor's sight. Neither
// ever changes for a signal, so no lock is needed; unseen is what to say where there is none.
func (w *work) signalTrack(ctx context.Context, condition string, id int64, unseen error) (chartID, trackID int64, err error) {
	err = w.tx.QueryRow(ctx, `SELECT s.chart_id, s.track_id FROM signals s JOIN charts c USING (chart_id)
		WHERE s.`+condition+` AND c.labels @> $2 LIMIT 1`, id, w.actor.scope()).Scan(&chartID, &trackID)
	if errors.Is(err, pgx.ErrNoRows) {
		err = unseen
	}
	return chartID, trackID, err
}

// occurrenceAnswer is what the repeat of a closing finds again.
type occurrenceAnswer struct {
	Chart   string  `json:"chart"`
	Lot     string  `json:"lot"`
	Signals []int64 `json:"signals"`
}

// CloseOccurrence decides on all open signals of an occurrence together. Seen are the open signals the caller has looked
// at: one that came since refuses the call, and so does one that is not open any more.
func (s *Store) CloseOccurrence(ctx context.Context, a Actor, req Request, occurrence int64, decision, cause string, seen []int64) (closed []Signal, t Track, err error) {
	defer wrap(ctx, &err, "CloseOccurrence")
	if err := definition.CheckText("decision", decision, 1, definition.NameBytesMax); err != nil {
		return nil, t, err
	}
	if err := definition.CheckText("cause", cause, 0, definition.TextBytesMax); err != nil {
		return nil, t, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		unseen := &definition.Error{Reason: definition.NotFound, Field: "occurrence", Text: fmt.Sprintf("there is no occurrence %d", occurrence)}
		chartID, trackID, err := w.signalTrack(ctx, `occurrence = $1`, occurrence, unseen)
		if err != nil {
			return nil, err
		}
		c, row, err := w.trackByID(ctx, chartID, trackID, unseen)
		if err != nil {
			return nil, err
		}
		open, err := w.openSignals(ctx, occurrence)
		if err != nil {
			return nil, err
		}
		if err := sameSignals(occurrence, open, seen); err != nil {
			return nil, err
		}
		if err := w.closeSignals(ctx, c, row, open, decision, cause); err != nil {
			return nil, err
		}
		if closed, err = s.readSignals(ctx, w.tx, `s.signal_id = ANY($1) ORDER BY s.signal_id`, open); err != nil {
			return nil, err
		}
		t, err = s.presentTrack(ctx, w.tx, a, c.Name, row.Lot)
		return occurrenceAnswer{c.Name, row.Lot, open}, err
	}, func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier occurrenceAnswer
		err := json.Unmarshal(answer, &earlier)
		if err != nil {
			return err
		}
		if t, err = s.presentTrack(ctx, tx, a, earlier.Chart, earlier.Lot); err != nil {
			return err
		}
		closed, err = s.readSignals(ctx, tx, `s.signal_id = ANY($1) ORDER BY s.signal_id`, earlier.Signals)
		return err
	})
	return closed, t, err
}

// trackByID locks a track and then reads it and its chart, which is not locked, and the clock.
func (w *work) trackByID(ctx context.Context, chartID, trackID int64, unseen error) (*chartRow, *trackRow, error) {
	if _, err := w.tx.Exec(ctx, `SELECT FROM tracks WHERE track_id = $1 FOR UPDATE`, trackID); err != nil {
		return nil, nil, err
	}
	c, err := chartByID(ctx, w.tx, w.actor, chartID, unseen)
	if err != nil {
		return nil, nil, err
	}
	tracks, err := readTracks(ctx, w.tx, c, `track_id = $1`, trackID)
	if err != nil {
		return nil, nil, err
	}
	if len(tracks) == 0 {
		return nil, nil, unseen
	}
	return c, tracks[0], w.clockAfter(ctx, tracks)
}

// openSignals lists the open signals of an occurrence, whose track is locked.
func (w *work) openSignals(ctx context.Context, occurrence int64) ([]int64, error) {
	rows, err := w.tx.Query(ctx, `SELECT signal_id FROM signals WHERE occurrence = $1 AND status = 'OPEN' ORDER BY signal_id`, occurrence)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, pgx.RowTo[int64])
}

// sameSignals refuses to close other signals than those seen.
func sameSignals(occurrence int64, open, seen []int64) error {
	if len(open) == 0 {
		return &definition.Error{Reason: definition.NothingToDo, Field: "occurrence", Text: fmt.Sprintf("no signal of occurrence %d is open", occurrence)}
	}
	var notSeen, notOpen []string
	for _, id := range open {
		if !slices.Contains(seen, id) {
			notSeen = append(notSeen, fmt.Sprint(id))
		}
	}
	for _, id := range seen {
		if !slices.Contains(open, id) {
			notOpen = append(notOpen, fmt.Sprint(id))
		}
	}
	if len(notSeen)+len(notOpen) == 0 {
		return nil
	}
	var text []string
	if len(notSeen) > 0 {
		text = append(text, "open and not among those seen: "+strings.Join(notSeen, ", "))
	}
	if len(notOpen) > 0 {
		text = append(text, "seen, but not open in this occurrence: "+strings.Join(notOpen, ", "))
	}
	return &definition.Error{Reason: definition.WrongState, Field: "signals", Text: strings.Join(text, "; "),
		Meta: map[string]string{"not_seen": strings.Join(notSeen, ","), "not_open": strings.Join(notOpen, ",")}}
}

// closeSignals closes the open signals of a locked track.
func (w *work) closeSignals(ctx context.Context, c *chartRow, t *trackRow, ids []int64, decision, cause string) error {
	entry, err := w.entry(ctx, c.ID)
	if err != nil {
		return err
	}
	var b pgx.Batch
	b.Queue(`UPDATE signals SET status = 'CLOSED', closed_at = $2, closed_by = $3, decision = $4, cause = $5 WHERE signal_id = ANY($1)`,
		ids, w.now, w.actor.Principal, decision, cause)
	b.Queue(`INSERT INTO signal_events (chart_id, signal_id, entry, change, status, version, first_point_result, first_hit_result,
			last_hit_result, merged_into, principal, text, recorded_at)
		SELECT chart_id, signal_id, $2, 'CLOSED', status, version, first_point_result, first_hit_result, last_hit_result, NULL, $3, $4, $5
		FROM signals WHERE signal_id = ANY($1)`, ids, entry, w.actor.Principal, closingText(decision, cause), w.now)
	b.Queue(`UPDATE tracks SET open_signals = open_signals - $2, occurrence = CASE WHEN open_signals > $2 THEN occurrence END,
			last_recorded_at = $3 WHERE track_id = $1`, t.ID, len(ids), w.now)
	if err := w.tx.SendBatch(ctx, &b).Close(); err != nil {
		return err
	}
	return w.seal(ctx, c.ID, entry, "CLOSE_OCCURRENCE", struct {
		Signals  []int64 `json:"signals"`
		Decision string  `json:"decision"`
		Cause    string  `json:"cause"`
	}{ids, decision, cause})
}

func closingText(decision, cause string) string {
	if cause == "" {
		return decision
	}
	return decision + ": " + cause
}

// ReleaseTrack ends a hold. HoldSince is what the caller has read: a STOP that came since refuses the call.
func (s *Store) ReleaseTrack(ctx context.Context, a Actor, req Request, chart, lot, reason string, holdSince time.Time) (t Track, err error) {
	defer wrap(ctx, &err, "ReleaseTrack")
	if err := definition.CheckText("reason", reason, 1, definition.TextBytesMax); err != nil {
		return t, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, row, err := w.chartAndTrack(ctx, chart, lot)
		if err != nil {
			return nil, err
		}
		if row.HoldSince.IsZero() {
			return nil, definition.Refuse(definition.NothingToDo, "%s is not on hold", trackName(chart, lot))
		}
		if !row.HoldSince.Equal(holdSince) {
			held := row.HoldSince.Format(time.RFC3339Nano)
			return nil, &definition.Error{Reason: definition.RevisionMismatch, Field: "hold_since", Meta: map[string]string{"hold_since": held},
				Text: fmt.Sprintf("%s: the track is on hold since %s", holdSince.UTC().Format(time.RFC3339Nano), held)}
		}
		if err := w.release(ctx, c, row, reason); err != nil {
			return nil, err
		}
		t, err = s.presentTrack(ctx, w.tx, a, chart, lot)
		return trackAnswer{chart, lot}, err
	}, s.replayTrack(a, &t))
	return t, err
}

func (w *work) release(ctx context.Context, c *chartRow, t *trackRow, reason string) error {
	entry, err := w.entry(ctx, c.ID)
	if err != nil {
		return err
	}
	var b pgx.Batch
	b.Queue(`INSERT INTO track_releases (chart_id, track_id, entry, hold_since, released_by, reason, recorded_at) VALUES ($1, $2, $3, $4, $5, $6, $7)`,
		c.ID, t.ID, entry, t.HoldSince, w.actor.Principal, reason, w.now)
	b.Queue(`UPDATE tracks SET hold_since = NULL, last_recorded_at = $2 WHERE track_id = $1`, t.ID, w.now)
	if err := w.tx.SendBatch(ctx, &b).Close(); err != nil {
		return err
	}
	return w.seal(ctx, c.ID, entry, "RELEASE_TRACK", struct {
		Track     int64     `json:"track"`
		HoldSince time.Time `json:"hold_since"`
		Reason    string    `json:"reason"`
	}{t.ID, t.HoldSince, reason})
}
