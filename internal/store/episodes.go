package store

import (
	"context"

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
		if j.NewlyStops() && t.HoldSince.IsZero() {
			t.HoldSince = l.now
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
	for _, s := range l.signals {
		status := "OPEN"
		if s.Closed {
			status = "CLOSED"
		}
		var into *int64
		switch s.Kind {
		case track.Opened:
			b.Queue(`INSERT INTO signals (signal_id, chart_id, track_id, trace, rule, side, consequence, version, status, occurrence, first_point,
					first_point_result, first_hit, first_hit_result, last_hit, last_hit_result, last_hit_at, opened_at)
				VALUES ($1, $2, $3, $4, $5, $6, $7, $8, 'OPEN', $9, $10, $11, $12, $13, $14, $15, $16, $17)`,
				s.ID, s.chartID, s.trackID, int16(s.Role), s.Rule, int16(s.Side), int16(s.Consequence), s.Version, s.occurrence, s.FirstPoint.Key,
				s.FirstPoint.ID, s.FirstHit.Key, s.FirstHit.ID, s.LastHit.Key, s.LastHit.ID, s.LastHit.At, l.now)
		case track.Changed:
			b.Queue(`UPDATE signals SET version = $2, consequence = $3, first_point = $4, first_point_result = $5, first_hit = $6, first_hit_result = $7,
					last_hit = $8, last_hit_result = $9, last_hit_at = $10, changed_after_closing = changed_after_closing OR status = 'CLOSED'
				WHERE signal_id = $1`,
				s.ID, s.Version, int16(s.Consequence), s.FirstPoint.Key, s.FirstPoint.ID, s.FirstHit.Key, s.FirstHit.ID,
				s.LastHit.Key, s.LastHit.ID, s.LastHit.At)
		case track.Merged:
			into, status = &s.mergedInto, "MERGED"
			b.Queue(`UPDATE signals SET status = 'MERGED', merged_into = $2, changed_after_closing = changed_after_closing OR status = 'CLOSED'
				WHERE signal_id = $1`, s.ID, s.mergedInto)
		case track.Retracted:
			status = "RETRACTED"
			b.Queue(`UPDATE signals SET status = 'RETRACTED', changed_after_closing = changed_after_closing OR status = 'CLOSED'
				WHERE signal_id = $1`, s.ID)
		}
		b.Queue(`INSERT INTO signal_events (chart_id, signal_id, entry, change, status, version, first_point_result, first_hit_result, last_hit_result,
				merged_into, principal, recorded_at)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12)`,
			s.chartID, s.ID, s.entry, s.Kind.String(), status, s.Version, s.FirstPoint.ID, s.FirstHit.ID, s.LastHit.ID, into, l.principal, l.now)
	}
}
