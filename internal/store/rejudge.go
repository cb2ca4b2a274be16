package store

import (
	"context"
)

// rejudge judges the results of a track in [from, to) anew under the chart's present timeline, and on until they agree
// with what is stored; it records changed verdicts and signals under the entry and updates the track. From nil is the
// start of the track, to nil its end.
func (s *Store) rejudge(ctx context.Context, w *work, c *chartRow, t *trackRow, from, to []byte, entry int64) (TrackUpdate, error) {
	tl, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return TrackUpdate{}, err
	}
	if from == nil {
		from = []byte{0}
	}
	if to == nil {
		to = allKeys
	}
	l := &ledger{now: w.now, principal: w.actor.Principal}
	jd := &judgement{ledger: l, chart: c, track: t, timeline: tl.forTrack(t.Lot), entry: entry}
	update, err := jd.judge(ctx, w.tx, stir{from: from, until: to})
	if err != nil {
		return update, err
	}
	return update, l.flush(ctx, w.tx)
}

// touched counts the results of a track in [from, to); voided ones do not count.
func (s *Store) touched(ctx context.Context, w *work, _ *chartRow, t *trackRow, from, to []byte) (n int, err error) {
	if from == nil {
		from = []byte{0}
	}
	if to == nil {
		to = allKeys
	}
	err = w.tx.QueryRow(ctx, `SELECT count(*) FROM places WHERE track_id = $1 AND order_key >= $2 AND order_key < $3 AND NOT voided`, t.ID, from, to).Scan(&n)
	return n, err
}
