package store

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// BasisRow is one stored result as the basis of an estimate.
type BasisRow struct {
	Result definition.Result
	// BreakBefore is set where no difference or moving range may reach back across: a mark that breaks, a voided result, or
	// a gap longer than the chart's longest lies between this result and the one before it.
	BreakBefore bool
}

// basisResultsMax bounds the results behind one estimate, and so the memory they take.
const basisResultsMax = 100_000

// BasisResults gives the results of a track measured in [from, to), in their order: no voided ones and no repeats. A zero
// time is no bound. Where lots are not tracks, the lot does not matter.
func (s *Store) BasisResults(ctx context.Context, a Actor, chart, lot string, from, to time.Time) (list []BasisRow, err error) {
	defer wrap(ctx, &err, "BasisResults")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		of, err := trackLot(ctx, tx, c, lot)
		if err != nil {
			return err
		}
		tl, err := s.timeline(ctx, tx, c)
		if err != nil {
			return err
		}
		list, err = basisRows(ctx, tx, c, of, from, to, tl.marks)
		return err
	})
	return list, err
}

func basisRows(ctx context.Context, q querier, c *chartRow, lot string, from, to time.Time, marks []track.Mark) (list []BasisRow, err error) {
	lowest, highest := []byte{}, allKeys
	if !from.IsZero() {
		lowest = definition.KeyTime(from)
	}
	if !to.IsZero() {
		highest = definition.KeyTime(to)
	}
	rows, err := q.Query(ctx, `SELECT p.voided, coalesce(v.content, r.content)
		FROM tracks t JOIN places p USING (track_id) JOIN results r ON r.chart_id = p.chart_id AND r.result_id = p.result_id
		LEFT JOIN result_revisions v ON v.chart_id = p.chart_id AND v.result_id = p.result_id AND v.revision = p.revision
		WHERE t.chart_id = $1 AND t.lot = $2 AND p.order_key >= $3 AND p.order_key < $4
		ORDER BY p.order_key`, c.ID, lot, lowest, highest)
	if err != nil {
		return nil, err
	}
	var voided, afterVoid bool
	var content []byte
	_, err = pgx.ForEachRow(rows, []any{&voided, &content}, func() error {
		if voided {
			afterVoid = true
			return nil
		}
		result, err := decodeContent(content)
		if err != nil || result.Role == definition.Repeat {
			return err
		}
		if len(list) == basisResultsMax {
			return &definition.Error{Reason: definition.TooManyItems, Field: "basis",
				Text: fmt.Sprintf("more than %d results, which is the limit; choose a shorter time", basisResultsMax)}
		}
		row := BasisRow{Result: result}
		if len(list) > 0 {
			before := list[len(list)-1].Result.MeasuredAt
			row.BreakBefore = afterVoid || c.LongestGap > 0 && result.MeasuredAt.Sub(before) > c.LongestGap ||
				markBetween(marks, lot, before, result.MeasuredAt)
		}
		list, afterVoid = append(list, row), false
		return nil
	})
	return list, err
}

// markBetween reports a break after one moment and not after another.
func markBetween(marks []track.Mark, lot string, after, upTo time.Time) bool {
	for _, m := range marks {
		if (m.Lot == "" || m.Lot == lot) && m.At.After(after) && !m.At.After(upTo) {
			return true
		}
	}
	return false
}
