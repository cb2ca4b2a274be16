package store

import (
	"context"
	"encoding/json"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// readTracks reads the tracks of one chart that a condition selects, with the moment of the newest result of each that is
// not voided. The condition's parameters follow.
func readTracks(ctx context.Context, q querier, c *chartRow, condition string, args ...any) ([]*trackRow, error) {
	rows, err := q.Query(ctx, `SELECT track_id, lot, results, open_signals, coalesce(occurrence, 0), hold_since, last_recorded_at,
			(SELECT p.order_key FROM places p WHERE p.track_id = tracks.track_id AND NOT p.voided ORDER BY p.order_key DESC LIMIT 1)
		FROM tracks WHERE `+condition, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (*trackRow, error) {
		t := &trackRow{ChartID: c.ID}
		t.Chart = c.Name
		var hold, recorded nullableTime
		var last []byte
		if err := row.Scan(&t.ID, &t.Lot, &t.Results, &t.OpenSignals, &t.Occurrence, &hold, &recorded, &last); err != nil {
			return nil, err
		}
		t.HoldSince, t.LastRecordedAt = hold.time(), recorded.time()
		if last != nil {
			t.LastMeasuredAt = keyTime(last)
		}
		return t, nil
	})
}

// present gives tracks as they are answered, with the version in force at a moment.
func (s *Store) present(ctx context.Context, q querier, c *chartRow, tracks []*trackRow, at time.Time) ([]Track, error) {
	tl, err := s.timeline(ctx, q, c)
	if err != nil {
		return nil, err
	}
	list := make([]Track, len(tracks))
	for i, t := range tracks {
		list[i] = t.Track
		list[i].Version = numberOf(tl.forTrack(t.Lot).InForce(at))
	}
	return list, nil
}

// clock reads the database clock.
func clock(ctx context.Context, q querier) (now time.Time, err error) {
	err = q.QueryRow(ctx, `SELECT clock_timestamp()`).Scan(&now)
	return now.UTC(), err
}

// ListTracks gives the tracks of a chart by lot.
func (s *Store) ListTracks(ctx context.Context, a Actor, chart string, p Page) (list []Track, next string, err error) {
	defer wrap(ctx, &err, "ListTracks")
	filter := []any{"tracks", chart}
	var after *string
	size, _, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		tracks, err := readTracks(ctx, tx, c, `chart_id = $1 AND ($2::text IS NULL OR lot > $2) ORDER BY lot LIMIT $3`, c.ID, after, size+1)
		if err != nil {
			return err
		}
		now, err := clock(ctx, tx)
		if err != nil {
			return err
		}
		list, err = s.present(ctx, tx, c, tracks, now)
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(t Track) any { return t.Lot })
}

// trackAnswer is what the repeat of a request about a track finds again.
type trackAnswer struct {
	Chart string `json:"chart"`
	Lot   string `json:"lot"`
}

func (s *Store) replayTrack(a Actor, into *Track) func(context.Context, pgx.Tx, []byte) error {
	return func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier trackAnswer
		err := json.Unmarshal(answer, &earlier)
		if err == nil {
			*into, err = s.presentTrack(ctx, tx, a, earlier.Chart, earlier.Lot)
		}
		return err
	}
}

// presentTrack gives one track as it stands.
func (s *Store) presentTrack(ctx context.Context, q querier, a Actor, chart, lot string) (Track, error) {
	c, err := chartByName(ctx, q, a, chart)
	if err != nil {
		return Track{}, err
	}
	tracks, err := readTracks(ctx, q, c, `chart_id = $1 AND lot = $2`, c.ID, lot)
	if err != nil {
		return Track{}, err
	}
	if len(tracks) == 0 {
		return Track{}, noLot(chart, lot)
	}
	now, err := clock(ctx, q)
	if err != nil {
		return Track{}, err
	}
	list, err := s.present(ctx, q, c, tracks, now)
	if err != nil {
		return Track{}, err
	}
	return list[0], nil
}

// insertTrack opens a track; the chart's row is locked, or new.
func (w *work) insertTrack(ctx context.Context, chartID int64, lot string) (id int64, err error) {
	err = w.tx.QueryRow(ctx, `INSERT INTO tracks (chart_id, lot, created_at) VALUES ($1, $2, $3) RETURNING track_id`, chartID, lot, w.now).Scan(&id)
	return id, err
}

// StartLot opens a track for a lot of control material.
func (s *Store) StartLot(ctx context.Context, a Actor, req Request, chart, lot string) (made Track, err error) {
	defer wrap(ctx, &err, "StartLot")
	if err := definition.CheckName("lot", lot, 1, definition.NameBytesMax); err != nil {
		return made, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, err := w.lockChart(ctx, chart)
		switch {
		case err != nil:
			return nil, err
		case c.Archived:
			return nil, archived(chart)
		case !c.LotsAreTracks:
			return nil, definition.Invalid("lot", "%q: the lots of chart %q are not tracks of their own", lot, chart)
		}
		id, err := w.insertTrack(ctx, c.ID, lot)
		if err != nil {
			return nil, err
		}
		entry, err := w.entry(ctx, c.ID)
		if err != nil {
			return nil, err
		}
		err = w.seal(ctx, c.ID, entry, "START_LOT", struct {
			Track int64  `json:"track"`
			Lot   string `json:"lot"`
		}{id, lot})
		if err != nil {
			return nil, err
		}
		made, err = s.presentTrack(ctx, w.tx, a, chart, lot)
		return trackAnswer{chart, lot}, err
	}, s.replayTrack(a, &made))
	return made, err
}
