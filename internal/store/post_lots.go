package store

import (
	"context"
	"errors"
	"maps"
	"slices"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// openTracks places rows whose lot had no track when the chart was cached: a lot's first sound result opens its track. It
// first decides on the whole post by what is stored now, so that nothing is opened by a row that is refused or stored
// already, on a chart out of sight, or in an all-or-nothing post that will not be stored.
func (s *Store) openTracks(ctx context.Context, p *posting, unknown []int) error {
	preview, err := s.preview(ctx, p)
	if err != nil {
		return err
	}
	p.unsound = p.all && preview.flawed()
	open := map[string][]int{}
	var twins []int
	for _, i := range unknown {
		c := p.charts[p.results[i].Chart]
		st := p.stored[i]
		if preview.rows[i].Outcome == Refused {
			p.refuse(i, preview.rows[i].Problem)
		} else if p.place(i) {
			continue // opened elsewhere since
		} else if st != nil {
			p.placeOn(i, st.trackID, c.lotByID[st.trackID])
		} else if _, twin := preview.twins[i]; twin {
			twins = append(twins, i)
		} else if !p.unsound {
			open[c.Name] = append(open[c.Name], i)
		}
	}
	// In the order of their names, and each in a transaction of its own: no two are locked at once.
	for _, name := range slices.Sorted(maps.Keys(open)) {
		if err := s.openLots(ctx, p, p.charts[name], open[name]); err != nil {
			return err
		}
	}
	for _, i := range twins {
		earlier := preview.twins[i]
		if t := p.trackOf(earlier); t != nil {
			p.placeOn(i, t.ID, t.Lot)
		} else if p.rows[earlier].Outcome == Refused {
			p.refuse(i, p.rows[earlier].Problem)
		}
	}
	return nil
}

// preview decides on a copy of the post by what is stored now, without locks. It leaves charts and stored rows read.
func (s *Store) preview(ctx context.Context, p *posting) (*posting, error) {
	chartIDs, byID := p.chartsByID()
	var b pgx.Batch
	p.queueCharts(&b, chartIDs, byID)
	p.queueStored(&b)
	b.Queue(`SELECT chart_id, lot, track_id FROM tracks WHERE chart_id = ANY($1)`, chartIDs).Query(func(rows pgx.Rows) error {
		var chartID, id int64
		var lot string
		_, err := pgx.ForEachRow(rows, []any{&chartID, &lot, &id}, func() error {
			byID[chartID].know(lot, id)
			return nil
		})
		return err
	})
	if err := s.pool.SendBatch(ctx, &b).Close(); err != nil {
		return nil, err
	}
	for _, c := range p.charts {
		for lot, id := range c.lots {
			s.chartCache.addLot(c.Name, lot, id)
		}
	}
	preview := *p
	preview.results, preview.rows, preview.twins = slices.Clone(p.results), slices.Clone(p.rows), map[int]int{}
	preview.outcome()
	return &preview, nil
}

func (c *postChart) know(lot string, id int64) {
	if c.lotByID == nil {
		c.lotByID = map[int64]string{}
	}
	c.lots[lot], c.lotByID[id] = id, lot
}

// openLots opens the tracks of rows of one chart that have none, and places the rows. The chart's row lock orders it with
// approvals, so that no track escapes being judged anew, and with archiving; what was decided before is decided again
// under it.
func (s *Store) openLots(ctx context.Context, p *posting, c *postChart, rows []int) error {
	opened := map[string]int64{}
	refused := map[int]*definition.Error{}
	err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.ReadCommitted}, func(tx pgx.Tx) error {
		w := &work{tx: tx, actor: p.actor, heads: map[int64]chainHead{}}
		locked, err := w.lockChart(ctx, c.Name)
		if err != nil {
			return err
		}
		for _, i := range rows {
			r := p.results[i]
			if _, err := r.Prepare(locked.Chart, w.now); err != nil {
				refused[i] = asDefinition(err)
			} else if lot := c.lotOf(&r); opened[lot] == 0 {
				if opened[lot], err = w.findOrStartLot(ctx, c.ID, lot); err != nil {
					return err
				}
			}
		}
		return nil
	})
	var unseen *definition.Error
	if errors.As(err, &unseen) && unseen.Reason == definition.NotFound {
		for _, i := range rows { // relabelled in this moment
			refused[i] = noChart(c.Name)
		}
	} else if err != nil {
		return s.noted(ctx, "PostResults", err)
	}
	for lot, id := range opened {
		c.know(lot, id)
		s.chartCache.addLot(c.Name, lot, id)
	}
	for _, i := range rows {
		if problem := refused[i]; problem != nil {
			p.refuse(i, problem)
			p.unsound = p.all
			continue
		}
		p.place(i)
	}
	return nil
}

// findOrStartLot gives the track of a lot and opens it, with an audit entry, where there is none. The chart is locked.
func (w *work) findOrStartLot(ctx context.Context, chartID int64, lot string) (id int64, err error) {
	err = w.tx.QueryRow(ctx, `SELECT track_id FROM tracks WHERE chart_id = $1 AND lot = $2`, chartID, lot).Scan(&id)
	if !errors.Is(err, pgx.ErrNoRows) {
		return id, err
	}
	if id, err = w.insertTrack(ctx, chartID, lot); err != nil {
		return 0, err
	}
	entry, err := w.entry(ctx, chartID)
	if err != nil {
		return 0, err
	}
	return id, w.seal(ctx, chartID, entry, "START_LOT", lotStarted{id, lot})
}

// lotStarted is what the audit entry of a lot's start says.
type lotStarted struct {
	Track int64  `json:"track"`
	Lot   string `json:"lot"`
}
