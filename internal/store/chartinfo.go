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

// chartInfos gives the unchanging parts of charts for one post, by name; there is none for a name without a chart.
func (s *Store) chartInfos(ctx context.Context, names []string) (map[string]*postChart, error) {
	found := map[string]*postChart{}
	missing := s.chartCache.take(names, found)
	if len(missing) == 0 {
		return found, nil
	}
	read, err := s.readChartInfos(ctx, missing)
	if err != nil {
		return nil, err
	}
	for name, cached := range read {
		found[name] = cached.post()
		s.chartCache.put(name, cached)
	}
	return found, nil
}

func (c *cachedChart) post() *postChart {
	return &postChart{chartRow: c.row, lots: maps.Clone(c.lots)}
}

// take puts the charts it has into found and gives the names of the others.
func (c *chartCache) take(names []string, found map[string]*postChart) (missing []string) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for _, name := range names {
		if cached := c.charts[name]; cached != nil {
			found[name] = cached.post()
		} else {
			missing = append(missing, name)
		}
	}
	return missing
}

func (c *chartCache) put(name string, chart *cachedChart) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.charts == nil || len(c.charts) >= chartsCachedMax {
		c.charts = map[string]*cachedChart{}
	}
	c.charts[name] = chart
}

func (c *chartCache) addLot(chart, lot string, trackID int64) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if cached := c.charts[chart]; cached != nil {
		cached.lots[lot] = trackID
	}
}

// readChartInfos reads charts with their tracks.
func (s *Store) readChartInfos(ctx context.Context, names []string) (map[string]*cachedChart, error) {
	rows, err := s.pool.Query(ctx, `SELECT c.chart_id, c.name, c.kind, c.subgroup_size, c.unit, c.lots_are_tracks, c.standardised, t.lot, t.track_id
		FROM charts c LEFT JOIN tracks t USING (chart_id) WHERE c.name = ANY($1)`, names)
	if err != nil {
		return nil, err
	}
	found := map[string]*cachedChart{}
	var c chartRow
	var kind int16
	var lot *string
	var track *int64
	_, err = pgx.ForEachRow(rows, []any{&c.ID, &c.Name, &kind, &c.SubgroupSize, &c.Unit, &c.LotsAreTracks, &c.Standardised, &lot, &track}, func() error {
		c.Kind = chart.Kind(kind)
		cached := found[c.Name]
		if cached == nil {
			cached = &cachedChart{row: c, lots: map[string]int64{}}
			found[c.Name] = cached
		}
		if track != nil {
			cached.lots[*lot] = *track
		}
		return nil
	})
	return found, err
}

// asDefinition gives the refusal in an error of this module's checks.
func asDefinition(err error) *definition.Error {
	var refusal *definition.Error
	if errors.As(err, &refusal) {
		return refusal
	}
	return definition.Refuse(definition.Internal, "%v", err)
}
