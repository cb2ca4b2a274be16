package store

import (
	"context"
	"errors"
	"fmt"
	"slices"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

const changeColumns = `h.change_id, h.kind, c.name, coalesce(r.source, ''), coalesce(r.source_id, ''), coalesce(h.mark_id, 0), coalesce(h.version, 0),
	h.reason_code, h.reason, h.author, h.recorded_at, coalesce(d.decided_by, ''), d.recorded_at, coalesce(d.reason, ''), d.confirmed,
	h.verdicts_changed, h.signals_ended, h.content, v.content`

const changeTables = `changes h JOIN charts c USING (chart_id) LEFT JOIN change_decisions d ON d.change_id = h.change_id
	LEFT JOIN results r ON r.chart_id = h.chart_id AND r.result_id = h.result_id
	LEFT JOIN LATERAL (
		SELECT coalesce((SELECT w.content FROM result_revisions w WHERE w.chart_id = r.chart_id AND w.result_id = r.result_id
			ORDER BY w.revision DESC LIMIT 1), r.content) AS content) v ON true`

func scanChange(row pgx.CollectableRow) (ch Change, err error) {
	var decided nullableTime
	var confirmed *bool
	var proposed, current []byte
	err = row.Scan(&ch.ID, &ch.Kind, &ch.Chart, &ch.Source, &ch.SourceID, &ch.MarkID, &ch.Version, &ch.ReasonCode, &ch.Reason, &ch.Author, &ch.CreatedAt,
		&ch.DecidedBy, &decided, &ch.DecisionReason, &confirmed, &ch.VerdictsChanged, &ch.SignalsEnded, &proposed, &current)
	if err != nil {
		return ch, err
	}
	ch.Fields, err = fieldChanges(ch.Kind, proposed, current)
	ch.CreatedAt, ch.DecidedAt = ch.CreatedAt.UTC(), decided.time()
	switch {
	case confirmed == nil:
		ch.Status = "PENDING"
	case *confirmed:
		ch.Status = "CONFIRMED"
	default:
		ch.Status = "REJECTED"
	}
	return ch, err
}

// readChange reads a change whose chart the caller has found to be in sight.
func (s *Store) readChange(ctx context.Context, q querier, id int64) (*Change, error) {
	rows, err := q.Query(ctx, `SELECT `+changeColumns+` FROM `+changeTables+` WHERE h.change_id = $1`, id)
	if err != nil {
		return nil, err
	}
	ch, err := pgx.CollectExactlyOneRow(rows, scanChange)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, &definition.Error{Reason: definition.NotFound, Field: "change", Text: fmt.Sprintf("there is no change %d", id)}
	}
	return &ch, err
}

// ListChanges gives the changes asked for on a chart, or on all charts in sight where none is named, newest first. Status
// is PENDING, CONFIRMED or REJECTED, or empty for all.
func (s *Store) ListChanges(ctx context.Context, a Actor, chart, status string, p Page) (list []Change, next string, err error) {
	defer wrap(ctx, &err, "ListChanges")
	if !slices.Contains([]string{"", "PENDING", "CONFIRMED", "REJECTED"}, status) {
		return nil, "", definition.Invalid("status", "%q: want PENDING, CONFIRMED or REJECTED", status)
	}
	filter := []any{"changes", a.scope(), chart, status}
	var after int64
	size, more, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		if chart != "" {
			if _, err := chartByName(ctx, tx, a, chart); err != nil {
				return err
			}
		}
		rows, err := tx.Query(ctx, `SELECT `+changeColumns+` FROM `+changeTables+`
			WHERE c.labels @> $1 AND ($2 = '' OR c.name = $2) AND (NOT $3 OR h.change_id < $4)
				AND CASE $5 WHEN 'PENDING' THEN d.change_id IS NULL WHEN 'CONFIRMED' THEN d.confirmed WHEN 'REJECTED' THEN NOT d.confirmed ELSE true END
			ORDER BY h.change_id DESC LIMIT $6`, a.scope(), chart, more, after, status, size+1)
		if err != nil {
			return err
		}
		list, err = pgx.CollectRows(rows, scanChange)
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(ch Change) any { return ch.ID })
}
