package store

import (
	"context"
	"errors"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/track"
)

// Continuation judges values as the next points of a stored track at one moment. It holds no connection and stores
// nothing; it belongs to one goroutine.
type Continuation struct {
	// Track is the track as it was read. Nothing was ever posted to it where its ID is 0.
	Track Track
	// After is when the latest result at or before the moment was measured; zero where there is none.
	After time.Time
	// Version is the number in force at the moment, By its judge.
	Version int
	By      *judge.Judge

	at     time.Time
	runner *track.Runner
	taken  int64
}

// Continue finds where a track stands after every result measured at or before a moment; the zero moment is now, by the
// database's clock. Where lots are tracks the lot must have one; elsewhere it does not matter. NoVersionInForce where
// nothing is in force at the moment.
func (s *Store) Continue(ctx context.Context, a Actor, chart, lot string, at time.Time) (c *Continuation, err error) {
	defer wrap(ctx, &err, "Continue")
	p, err := s.placeOnTrack(ctx, a, chart, lot, at)
	if err != nil {
		return nil, err
	}
	if p.chart.LotsAreTracks && lot == "" {
		return nil, definition.Invalid("lot", "every lot of chart %q is a track of its own; say which", chart)
	}
	v, err := p.inForce()
	if err != nil {
		return nil, err
	}
	p.track.Version = v.Number
	c = &Continuation{Track: p.track, Version: v.Number, By: v.Compiled, at: p.at}
	c.runner = track.NewRunner(p.spans, unnamedPoints)
	if p.before != nil {
		c.After = p.before.At
		err = c.runner.Resume(p.before.At, p.before.Stored.State)
	}
	return c, err
}

// unnamedPoints stands for stored points, of which a continuation needs not know which they are.
func unnamedPoints(_ chart.Role, n int) ([]track.Ref, error) { return make([]track.Ref, n), nil }

// Judge judges the next value. The references of hits have the number of the value as ID, counted from 1, and 0 for any
// stored point.
func (c *Continuation) Judge(pt judge.Point) (*track.Outcome, error) {
	c.taken++
	return c.runner.Step(&track.Item{Ref: track.Ref{ID: c.taken, At: c.at}, Point: pt})
}

// JudgeInForce gives the number and the judge of the version in force for a lot's track at a moment, as VersionInForce
// does the version, in one round trip.
func (s *Store) JudgeInForce(ctx context.Context, a Actor, chart, lot string, at time.Time) (number int, j *judge.Judge, err error) {
	defer wrap(ctx, &err, "JudgeInForce")
	p, err := s.placeOnTrack(ctx, a, chart, lot, at)
	if err != nil {
		return 0, nil, err
	}
	v, err := p.inForce()
	if err != nil {
		return 0, nil, err
	}
	return v.Number, v.Compiled, nil
}

// placeOnTrack is a moment on a track.
type placeOnTrack struct {
	chart  chartRow
	lot    string
	track  Track
	at     time.Time
	before *track.Item
	spans  track.Timeline
}

func (p *placeOnTrack) inForce() (*track.Version, error) {
	if v := p.spans.InForce(p.at); v != nil {
		return v, nil
	}
	return nil, definition.Refuse(definition.NoVersionInForce, "no version is in force for %s at %s", trackName(p.chart.Name, p.lot), p.at.UTC().Format(time.RFC3339))
}

// errTimelineMoved says that versions or marks changed between the reading of a place and that of the timeline.
var errTimelineMoved = errors.New("store: the chart's versions or marks are being changed just now")

// placeOnTrack reads a place and the timeline that its state belongs to. The place comes in one statement, so that it is of
// one state of the database; the timeline is nearly always in the cache, and where it is read and turns out to be newer,
// the place is read again.
func (s *Store) placeOnTrack(ctx context.Context, a Actor, chart, lot string, at time.Time) (p *placeOnTrack, err error) {
	for range retriesMax {
		err = retry(ctx, func() (err error) {
			if p, err = s.readPlaceOnTrack(ctx, a, chart, lot, at); err == nil {
				err = s.addTimeline(ctx, p)
			}
			return s.noted(ctx, "placeOnTrack", err)
		})
		if !errors.Is(err, errTimelineMoved) {
			return p, err
		}
	}
	return nil, &unavailableError{err}
}

// placeOnTrackSQL finds a chart in sight, the track of a lot on it, and the last place at or before a moment. A key is
// compared with definition.KeyTime of the first moment after.
const placeOnTrackSQL = `
	WITH m AS MATERIALIZED (SELECT coalesce($4, clock_timestamp()) AS at)
	SELECT c.chart_id, c.timeline, c.lots_are_tracks, m.at, coalesce(t.track_id, 0), coalesce(t.lot, ''), coalesce(t.results, 0),
		coalesce(t.open_signals, 0), coalesce(t.occurrence, 0), t.hold_since, p.order_key IS NOT NULL,
		coalesce(p.order_key, ''), coalesce(p.result_id, 0), coalesce(p.revision, 0), coalesce(p.voided, false), coalesce(p.version, 0),
		coalesce(p.point, '\x00'), coalesce(p.verdict, ''), coalesce(p.state, '')
	FROM m CROSS JOIN charts c
	LEFT JOIN tracks t ON t.chart_id = c.chart_id AND t.lot = CASE WHEN c.lots_are_tracks THEN $3 ELSE '' END
	LEFT JOIN LATERAL (SELECT * FROM places p WHERE p.track_id = t.track_id
		AND p.order_key < int8send(((extract(epoch FROM m.at) * 1000000)::bigint + 1) # (-9223372036854775807 - 1))
		ORDER BY p.order_key DESC LIMIT 1) p ON true
	WHERE c.name = $1 AND c.labels @> $2`

func (s *Store) readPlaceOnTrack(ctx context.Context, a Actor, name, lot string, at time.Time) (*placeOnTrack, error) {
	rows, err := s.pool.Query(ctx, placeOnTrackSQL, name, a.scope(), lot, orNullTime(at))
	if err != nil {
		return nil, err
	}
	p, err := pgx.CollectExactlyOneRow(rows, scanPlaceOnTrack)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, noChart(name)
	}
	if err != nil {
		return nil, err
	}
	p.chart.Name, p.track.Chart = name, name
	if p.chart.LotsAreTracks {
		p.lot = lot
	}
	if p.lot != "" && p.track.ID == 0 {
		return nil, noLot(name, lot)
	}
	return p, nil
}

// addTimeline reads the timeline that the state of a place belongs to.
func (s *Store) addTimeline(ctx context.Context, p *placeOnTrack) error {
	read := p.chart.Timeline
	tl, err := s.timeline(ctx, s.pool, &p.chart)
	switch {
	case err != nil:
		return err
	case p.chart.Timeline != read:
		return errTimelineMoved
	}
	p.spans = tl.forTrack(p.lot)
	return nil
}

func scanPlaceOnTrack(row pgx.CollectableRow) (*placeOnTrack, error) {
	p := &placeOnTrack{}
	var hold nullableTime
	var found bool
	var err error
	p.before, err = scanNeighbour(leading{row, []any{&p.chart.ID, &p.chart.Timeline, &p.chart.LotsAreTracks, &p.at, &p.track.ID, &p.track.Lot,
		&p.track.Results, &p.track.OpenSignals, &p.track.Occurrence, &hold, &found}}, &found)
	p.track.HoldSince = hold.time()
	return p, err
}

// leading scans more columns before those of a place.
type leading struct {
	pgx.CollectableRow
	first []any
}

// Scan implements pgx.CollectableRow.
func (r leading) Scan(dest ...any) error { return r.CollectableRow.Scan(append(r.first, dest...)...) }
