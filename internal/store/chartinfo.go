package store

import (
	"context"
	"errors"
	"maps"
	"sync"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
)

// chartCache keeps what never changes of a chart: its id, kind, size, unit and the ids of its tracks. What can change is
// read in every transaction.
type chartCache struct {
	mu     sync.Mutex
	charts map[string]*cachedChart
}

type cachedChart struct {
	row  chartRow
	lots map[string]int64
}

// chartsCachedMax bounds the cache; a group of laboratories has hundreds of charts.
const chartsCachedMax = 10_000

// chartInfo gives the unchanging part of a chart for one post, nil where there is no such chart.
func (s *Store) chartInfo(ctx context.Context, name string) (*postChart, error) {
	s.chartCache.mu.Lock()
	cached := s.chartCache.charts[name]
	s.chartCache.mu.Unlock()
	if cached == nil {
		var err error
		if cached, err = s.readChartInfo(ctx, name); err != nil || cached == nil {
			return nil, err
		}
		s.chartCache.put(name, cached)
	}
	s.chartCache.mu.Lock()
	defer s.chartCache.mu.Unlock()
	return &postChart{chartRow: cached.row, lots: maps.Clone(cached.lots)}, nil
}

func (c *chartCache) put(name string, chart *cachedChart) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.charts == nil || len(c.charts) >= chartsCachedMax {
		c.charts = map[string]*cachedChart{}
	}
	c.charts[name] = chart
}

func (c *chartCache) addLot(chartID int64, lot string, trackID int64) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for _, cached := range c.charts {
		if cached.row.ID == chartID {
			cached.lots[lot] = trackID
		}
	}
}

func (s *Store) readChartInfo(ctx context.Context, name string) (*cachedChart, error) {
	cached := &cachedChart{lots: map[string]int64{}}
	c := &cached.row
	var kind int16
	err := s.pool.QueryRow(ctx, `SELECT chart_id, name, kind, subgroup_size, unit, lots_are_tracks FROM charts WHERE name = $1`, name).
		Scan(&c.ID, &c.Name, &kind, &c.SubgroupSize, &c.Unit, &c.LotsAreTracks)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	c.Kind = chart.Kind(kind)
	rows, err := s.pool.Query(ctx, `SELECT lot, track_id FROM tracks WHERE chart_id = $1`, c.ID)
	if err != nil {
		return nil, err
	}
	var lot string
	var id int64
	_, err = pgx.ForEachRow(rows, []any{&lot, &id}, func() error {
		cached.lots[lot] = id
		return nil
	})
	return cached, err
}

// openTrack gives the id of a lot's track and opens it where there is none. The chart's row lock orders it with
// approvals, so that no track escapes being judged anew.
func (s *Store) openTrack(ctx context.Context, chartID int64, lot string) (id int64, err error) {
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{}, func(tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, `SELECT FROM charts WHERE chart_id = $1 FOR NO KEY UPDATE`, chartID); err != nil {
			return err
		}
		_, err := tx.Exec(ctx, `INSERT INTO tracks (chart_id, lot) VALUES ($1, $2) ON CONFLICT ON CONSTRAINT tracks_lot_key DO NOTHING`, chartID, lot)
		if err != nil {
			return err
		}
		return tx.QueryRow(ctx, `SELECT track_id FROM tracks WHERE chart_id = $1 AND lot = $2`, chartID, lot).Scan(&id)
	})
	if err == nil {
		s.chartCache.addLot(chartID, lot, id)
	}
	return id, err
}

// asDefinition gives the refusal in an error of this module's checks.
func asDefinition(err error) *definition.Error {
	var refusal *definition.Error
	if errors.As(err, &refusal) {
		return refusal
	}
	return definition.Refuse(definition.Internal, "%v", err)
}
