package store

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/track"
)

// take records what judging found for a region: places, verdicts, signals, and the track's own state.
func (jd *judgement) take(ctx context.Context, q querier, e *effect, update *TrackUpdate) error {
	l, t := jd.ledger, jd.track
	update.Rejudged += l.place(jd, e)
	for _, j := range e.judged {
		if jd.found != nil {
			jd.found(j)
		}
		if jd.isNew != nil && jd.isNew(j.Item.ID) {
			t.Results++
		}
		if j.NewlyStops() {
			t.HoldSince = l.now // of the latest STOP: a release names the one it has seen
		}
	}
	changes, err := l.signal(ctx, q, jd.chart, e, jd.entry)
	update.Signals = append(update.Signals, changes...)
	update.OrderNotKnown = update.OrderNotKnown || e.orderNotKnown
	return err
}

// signal gives ids to new signals, counts the open ones and finds the occurrence they belong to.
func (l *ledger) signal(ctx context.Context, q querier, c *chartRow, e *effect, entry int64) ([]SignalChange, error) {
	opened := 0
	for _, ch := range e.changes {
		switch {
		case ch.Kind == track.Opened:
			opened++
		case (ch.Kind == track.Merged || ch.Kind == track.Retracted) && !ch.Closed:
			e.track.OpenSignals--
		}
	}
	ids, err := nextIDs(ctx, q, "signal_ids", opened)
	if err != nil {
		return nil, err
	}
	e.track.OpenSignals += opened
	if opened > 0 && e.track.Occurrence == 0 {
		occurrence, err := nextIDs(ctx, q, "occurrence_ids", 1)
		if err != nil {
			return nil, err
		}
		e.track.Occurrence = occurrence[0]
	}
	occurrence := e.track.Occurrence
	if e.track.OpenSignals == 0 {
		e.track.Occurrence = 0
	}
	var told []SignalChange
	for i := range e.changes {
		ch := &e.changes[i]
		if ch.Kind == track.Opened {
			ch.ID, ids = ids[0], ids[1:]
		}
	}
	for _, ch := range e.changes {
		if ch.Kind == track.Unchanged {
			continue
		}
		row := signalRow{Change: ch, chartID: c.ID, trackID: e.track.ID, entry: entry, occurrence: occurrence}
		if ch.Kind == track.Merged {
			row.mergedInto = e.changes[ch.Into].ID
		}
		l.signals = append(l.signals, row)
		told = append(told, SignalChange{ch.ID, ch.Kind.String(), ch.Role, ch.Rule, ch.Side, ch.Consequence})
	}
	return told, nil
}

// nextIDs takes n numbers from a sequence.
func nextIDs(ctx context.Context, q querier, sequence string, n int) ([]int64, error) {
	if n == 0 {
		return nil, nil
	}
	rows, err := q.Query(ctx, `SELECT nextval($1::regclass) FROM generate_series(1, $2)`, sequence, n)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, pgx.RowTo[int64])
}

func (l *ledger) queueSignals(b *pgx.Batch) {
	var opened []signalRow
	for _, s := range l.signals {
		switch s.Kind {
		case track.Opened:
			opened = append(opened, s)
		case track.Changed:
			b.Queue(`UPDATE signals SET version = $2, consequence = $3, first_point = $4, first_point_result = $5, first_hit = $6, first_hit_result = $7,
					last_hit = $8, last_hit_result = $9, last_hit_at = $10, changed_after_closing = changed_after_closing OR status = 'CLOSED'
				WHERE signal_id = $1`,
				s.ID, s.Version, int16(s.Consequence), s.FirstPoint.Key, s.FirstPoint.ID, s.FirstHit.Key, s.FirstHit.ID,
				s.LastHit.Key, s.LastHit.ID, s.LastHit.At)
		case track.Merged:
			b.Queue(`UPDATE signals SET status = 'MERGED', merged_into = $2, changed_after_closing = changed_after_closing OR status = 'CLOSED'
				WHERE signal_id = $1`, s.ID, s.mergedInto)
		case track.Retracted:
			b.Queue(`UPDATE signals SET status = 'RETRACTED', changed_after_closing = changed_after_closing OR status = 'CLOSED'
				WHERE signal_id = $1`, s.ID)
		}
	}
	l.queueOpened(b, opened)
	l.queueEvents(b)
}

// queueOpened inserts new signals, many in one statement.
func (l *ledger) queueOpened(b *pgx.Batch, opened []signalRow) {
	n := len(opened)
	if n == 0 {
		return
	}
	ids, charts, tracks, occurrences := make([]int64, n), make([]int64, n), make([]int64, n), make([]int64, n)
	traces, sides, consequences, versions, names := make([]int16, n), make([]int16, n), make([]int16, n), make([]int32, n), make([]string, n)
	points, firsts, lasts := make([][]byte, n), make([][]byte, n), make([][]byte, n)
	pointIDs, firstIDs, lastIDs, at := make([]int64, n), make([]int64, n), make([]int64, n), make([]time.Time, n)
	for i, s := range opened {
		ids[i], charts[i], tracks[i], occurrences[i] = s.ID, s.chartID, s.trackID, s.occurrence
		traces[i], sides[i], consequences[i], versions[i], names[i] = int16(s.Role), int16(s.Side), int16(s.Consequence), int32(s.Version), s.Rule
		points[i], firsts[i], lasts[i] = s.FirstPoint.Key, s.FirstHit.Key, s.LastHit.Key
		pointIDs[i], firstIDs[i], lastIDs[i], at[i] = s.FirstPoint.ID, s.FirstHit.ID, s.LastHit.ID, s.LastHit.At
	}
	b.Queue(`INSERT INTO signals (signal_id, chart_id, track_id, occurrence, trace, side, consequence, version, rule, first_point, first_hit, last_hit,
			first_point_result, first_hit_result, last_hit_result, last_hit_at, status, opened_at)
		SELECT u.*, 'OPEN', $17 FROM unnest($1::bigint[], $2::bigint[], $3::bigint[], $4::bigint[], $5::smallint[], $6::smallint[], $7::smallint[], $8::int[],
			$9::text[], $10::bytea[], $11::bytea[], $12::bytea[], $13::bigint[], $14::bigint[], $15::bigint[], $16::timestamptz[]) u`,
		ids, charts, tracks, occurrences, traces, sides, consequences, versions, names, points, firsts, lasts, pointIDs, firstIDs, lastIDs, at, l.now)
}

// queueEvents adds to the signals' history, many in one statement.
func (l *ledger) queueEvents(b *pgx.Batch) {
	n := len(l.signals)
	if n == 0 {
		return
	}
	charts, ids, entries := make([]int64, n), make([]int64, n), make([]int64, n)
	changes, statuses, versions := make([]string, n), make([]string, n), make([]int32, n)
	points, firsts, lasts, into := make([]int64, n), make([]int64, n), make([]int64, n), make([]*int64, n)
	for i, s := range l.signals {
		charts[i], ids[i], entries[i] = s.chartID, s.ID, s.entry
		changes[i], statuses[i], versions[i] = s.Kind.String(), s.status(), int32(s.Version)
		points[i], firsts[i], lasts[i] = s.FirstPoint.ID, s.FirstHit.ID, s.LastHit.ID
		if s.Kind == track.Merged {
			into[i] = &s.mergedInto
		}
	}
	b.Queue(`INSERT INTO signal_events (chart_id, signal_id, entry, change, status, version, first_point_result, first_hit_result, last_hit_result,
			merged_into, principal, recorded_at)
		SELECT u.*, $11, $12 FROM unnest($1::bigint[], $2::bigint[], $3::bigint[], $4::text[], $5::text[], $6::int[], $7::bigint[], $8::bigint[], $9::bigint[],
			$10::bigint[]) u`,
		charts, ids, entries, changes, statuses, versions, points, firsts, lasts, into, l.principal, l.now)
}

// status is what the signal is after the change.
func (s *signalRow) status() string {
	switch {
	case s.Kind == track.Merged:
		return "MERGED"
	case s.Kind == track.Retracted:
		return "RETRACTED"
	case s.Closed:
		return "CLOSED"
	}
	return "OPEN"
}
