package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
)

const chartColumns = `c.chart_id, c.timeline, c.name, c.title, c.kind, c.subgroup_size, c.unit, c.decimals, c.labels, c.display_zone,
	c.plan_interval_us, c.longest_gap_us, c.repeat_rule, c.lots_are_tracks, c.standardised,
	c.relevant_shift_sigmas, c.relevant_sigma_ratio, c.revision, c.archived, c.created_at`

func scanChart(row pgx.CollectableRow) (*chartRow, error) {
	var c chartRow
	var kind int16
	var planMicros, gapMicros int64
	err := row.Scan(&c.ID, &c.Timeline, &c.Name, &c.Title, &kind, &c.SubgroupSize, &c.Unit, &c.Decimals, &c.Labels, &c.DisplayZone,
		&planMicros, &gapMicros, &c.RepeatRule, &c.LotsAreTracks, &c.Standardised, &c.RelevantShiftSigmas, &c.RelevantSigmaRatio, &c.Revision, &c.Archived, &c.CreatedAt)
	if err != nil {
		return nil, err
	}
	c.Kind = chart.Kind(kind)
	c.PlanInterval, c.LongestGap = time.Duration(planMicros)*time.Microsecond, time.Duration(gapMicros)*time.Microsecond
	c.CreatedAt = c.CreatedAt.UTC()
	return &c, nil
}

// scope gives the labels a chart must have for the actor to see it.
func (a Actor) scope() map[string]string {
	if a.Key.Labels == nil {
		return map[string]string{} // contained in all labels, as null is not
	}
	return a.Key.Labels
}

// chartByName reads a chart that the actor may see.
func chartByName(ctx context.Context, q querier, a Actor, name string) (*chartRow, error) {
	rows, err := q.Query(ctx, `SELECT `+chartColumns+` FROM charts c WHERE c.name = $1 AND c.labels @> $2`, name, a.scope())
	if err != nil {
		return nil, err
	}
	c, err := pgx.CollectExactlyOneRow(rows, scanChart)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, noChart(name)
	}
	return c, err
}

// chartByID reads a chart that the actor may see; unseen is what to say where there is none.
func chartByID(ctx context.Context, q querier, a Actor, id int64, unseen error) (*chartRow, error) {
	rows, err := q.Query(ctx, `SELECT `+chartColumns+` FROM charts c WHERE c.chart_id = $1 AND c.labels @> $2`, id, a.scope())
	if err != nil {
		return nil, err
	}
	c, err := pgx.CollectExactlyOneRow(rows, scanChart)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, unseen
	}
	return c, err
}

// chartContent is a chart as its revisions keep it. Its names never change.
type chartContent struct {
	Name          string            `json:"name"`
	Title         string            `json:"title"`
	Kind          string            `json:"kind"`
	SubgroupSize  int               `json:"subgroup_size"`
	Unit          string            `json:"unit"`
	Decimals      *int              `json:"decimals"`
	Labels        map[string]string `json:"labels"`
	DisplayZone   string            `json:"display_zone"`
	PlanMicros    int64             `json:"plan_interval_us"`
	GapMicros     int64             `json:"longest_gap_us"`
	RepeatRule    string            `json:"repeat_rule"`
	LotsAreTracks bool              `json:"lots_are_tracks"`
	Archived      bool              `json:"archived"`
	Revision      int64             `json:"revision"`
	Standardised  bool              `json:"standardised,omitempty"`
	ShiftSigmas   float64           `json:"relevant_shift_sigmas,omitempty"`
	SigmaRatio    float64           `json:"relevant_sigma_ratio,omitempty"`
}

func contentOf(c definition.Chart) chartContent {
	return chartContent{c.Name, c.Title, c.Kind.String(), c.SubgroupSize, c.Unit, c.Decimals, c.Labels, c.DisplayZone,
		c.PlanInterval.Microseconds(), c.LongestGap.Microseconds(), c.RepeatRule, c.LotsAreTracks, c.Archived, c.Revision,
		c.Standardised, c.RelevantShiftSigmas, c.RelevantSigmaRatio}
}

// chartAnswer is what the repeat of a request that made or changed a chart finds again.
type chartAnswer struct {
	Chart string `json:"chart"`
}

func replayChart(a Actor, into *definition.Chart) func(context.Context, pgx.Tx, []byte) error {
	return func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier chartAnswer
		if err := json.Unmarshal(answer, &earlier); err != nil {
			return err
		}
		c, err := chartByName(ctx, tx, a, earlier.Chart)
		if err == nil {
			*into = c.Chart
		}
		return err
	}
}

// keepsInSight refuses labels that would put a chart where the actor's own key cannot see it.
func (a Actor) keepsInSight(labels map[string]string) error {
	if a.Key.Sees(labels) {
		return nil
	}
	return definition.Invalid("labels", "want at least %v, to which the key in use is limited", a.Key.Labels)
}

// CreateChart makes a chart with its audit chain, and its one track where lots are not tracks.
func (s *Store) CreateChart(ctx context.Context, a Actor, req Request, c definition.Chart) (made definition.Chart, err error) {
	defer wrap(ctx, &err, "CreateChart")
	if err := c.Check(); err != nil {
		return made, err
	}
	if err := a.keepsInSight(c.Labels); err != nil {
		return made, err
	}
	if c.Labels == nil {
		c.Labels = map[string]string{}
	}
	c.PlanInterval, c.LongestGap = c.PlanInterval.Truncate(time.Microsecond), c.LongestGap.Truncate(time.Microsecond)
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		made = c
		made.Revision, made.Archived, made.CreatedAt = 1, false, w.now
		row := &chartRow{Chart: made}
		err := w.tx.QueryRow(ctx, `INSERT INTO charts (name, title, kind, subgroup_size, unit, decimals, labels, display_zone,
				plan_interval_us, longest_gap_us, repeat_rule, lots_are_tracks, created_at,
				standardised, relevant_shift_sigmas, relevant_sigma_ratio)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16) RETURNING chart_id`,
			made.Name, made.Title, int16(made.Kind), made.SubgroupSize, made.Unit, made.Decimals, made.Labels, made.DisplayZone,
			made.PlanInterval.Microseconds(), made.LongestGap.Microseconds(), made.RepeatRule, made.LotsAreTracks, made.CreatedAt,
			made.Standardised, made.RelevantShiftSigmas, made.RelevantSigmaRatio).Scan(&row.ID)
		if err != nil {
			return nil, err
		}
		if !made.LotsAreTracks {
			if _, err := w.insertTrack(ctx, row.ID, ""); err != nil {
				return nil, err
			}
		}
		if _, err := w.tx.Exec(ctx, `INSERT INTO chain_heads (chain_id, entry, hash) VALUES ($1, 0, '')`, row.ID); err != nil {
			return nil, err
		}
		return chartAnswer{made.Name}, w.recordChart(ctx, row, "CREATE_CHART", "")
	}, replayChart(a, &made))
	return made, err
}

// recordChart keeps the chart's present revision and seals it in its audit chain.
func (w *work) recordChart(ctx context.Context, c *chartRow, kind, reason string) error {
	entry, err := w.entry(ctx, c.ID)
	if err != nil {
		return err
	}
	content := contentOf(c.Chart)
	_, err = w.tx.Exec(ctx, `INSERT INTO chart_revisions (chart_id, revision, content, author, reason, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7)`, c.ID, c.Revision, content, w.actor.Principal, reason, w.now, entry)
	if err != nil {
		return err
	}
	return w.seal(ctx, c.ID, entry, kind, struct {
		Chart  chartContent `json:"chart"`
		Reason string       `json:"reason"`
	}{content, reason})
}

// GetChart gives a chart.
func (s *Store) GetChart(ctx context.Context, a Actor, name string) (found definition.Chart, err error) {
	defer wrap(ctx, &err, "GetChart")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, name)
		if err == nil {
			found = c.Chart
		}
		return err
	})
	return found, err
}

// ListCharts gives the charts the actor may see that have all the labels, by name.
func (s *Store) ListCharts(ctx context.Context, a Actor, p Page, labels map[string]string, includeArchived bool) (list []definition.Chart, next string, err error) {
	defer wrap(ctx, &err, "ListCharts")
	if labels == nil {
		labels = map[string]string{}
	}
	filter := []any{"charts", a.scope(), labels, includeArchived}
	var after string
	size, _, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		rows, err := tx.Query(ctx, `SELECT `+chartColumns+` FROM charts c
			WHERE c.name > $1 AND c.labels @> $2 AND c.labels @> $3 AND (NOT c.archived OR $4) ORDER BY c.name LIMIT $5`,
			after, a.scope(), labels, includeArchived, size+1)
		if err != nil {
			return err
		}
		list, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (definition.Chart, error) {
			c, err := scanChart(row)
			if err != nil {
				return definition.Chart{}, err
			}
			return c.Chart, nil
		})
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(c definition.Chart) any { return c.Name })
}

// UpdateChart changes what a chart may change. Change is given the chart as it stands and may be called more than once.
func (s *Store) UpdateChart(ctx context.Context, a Actor, req Request, name string, expected int64, change func(*definition.Chart) error) (made definition.Chart, err error) {
	defer wrap(ctx, &err, "UpdateChart")
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, err := w.chartAt(ctx, name, expected)
		if err != nil {
			return nil, err
		}
		before := c.Chart
		if err := change(&c.Chart); err != nil {
			return nil, err
		}
		if err := mayBecome(before, &c.Chart); err != nil {
			return nil, err
		}
		if err := a.keepsInSight(c.Labels); err != nil {
			return nil, err
		}
		c.Revision++
		_, err = w.tx.Exec(ctx, `UPDATE charts SET title = $2, decimals = $3, labels = $4, display_zone = $5, plan_interval_us = $6,
				repeat_rule = $7, revision = $8, relevant_shift_sigmas = $9, relevant_sigma_ratio = $10 WHERE chart_id = $1`,
			c.ID, c.Title, c.Decimals, c.Labels, c.DisplayZone, c.PlanInterval.Microseconds(), c.RepeatRule, c.Revision,
			c.RelevantShiftSigmas, c.RelevantSigmaRatio)
		if err != nil {
			return nil, err
		}
		made = c.Chart
		return chartAnswer{c.Name}, w.recordChart(ctx, c, "UPDATE_CHART", "")
	}, replayChart(a, &made))
	return made, err
}

// mayBecome refuses a change of what a chart is for good, and brings the rest into the form it is stored in.
func mayBecome(before definition.Chart, after *definition.Chart) error {
	fixed := func(c definition.Chart) string {
		return fmt.Sprintf("%q %v %d %q %v %v %v", c.Name, c.Kind, c.SubgroupSize, c.Unit, c.LotsAreTracks, c.LongestGap, c.Standardised)
	}
	if fixed(before) != fixed(*after) {
		return definition.Invalid("chart", "name, kind, subgroup_size, unit, lots_are_tracks, standardised and longest_gap never change")
	}
	after.Revision, after.Archived, after.CreatedAt = before.Revision, before.Archived, before.CreatedAt
	after.PlanInterval = after.PlanInterval.Truncate(time.Microsecond)
	if after.Labels == nil {
		after.Labels = map[string]string{}
	}
	return after.CheckChangeable()
}

// chartAt locks a chart that is not archived, at the revision the caller has read.
func (w *work) chartAt(ctx context.Context, name string, expected int64) (*chartRow, error) {
	c, err := w.lockChart(ctx, name)
	switch {
	case err != nil:
		return nil, err
	case c.Archived:
		return nil, archived(name)
	case c.Revision != expected:
		return nil, &definition.Error{Reason: definition.RevisionMismatch, Field: "expected_revision",
			Text: fmt.Sprintf("%d: the chart is at revision %d", expected, c.Revision), Meta: map[string]string{"revision": fmt.Sprint(c.Revision)}}
	}
	return c, nil
}

// ArchiveChart ends posting to a chart, and every other change of it, for good.
func (s *Store) ArchiveChart(ctx context.Context, a Actor, req Request, name string, expected int64, reason string) (made definition.Chart, err error) {
	defer wrap(ctx, &err, "ArchiveChart")
	if err := definition.CheckText("reason", reason, 0, definition.TextBytesMax); err != nil {
		return made, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, err := w.chartAt(ctx, name, expected)
		if err != nil {
			return nil, err
		}
		c.Revision++
		c.Archived = true
		if _, err := w.tx.Exec(ctx, `UPDATE charts SET archived = true, revision = $2 WHERE chart_id = $1`, c.ID, c.Revision); err != nil {
			return nil, err
		}
		made = c.Chart
		return chartAnswer{c.Name}, w.recordChart(ctx, c, "ARCHIVE_CHART", reason)
	}, replayChart(a, &made))
	return made, err
}
