package store

import (
	"bytes"
	"context"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// querier is a transaction or a connection inside one.
type querier interface {
	Query(ctx context.Context, sql string, args ...any) (pgx.Rows, error)
	QueryRow(ctx context.Context, sql string, args ...any) pgx.Row
	Exec(ctx context.Context, sql string, args ...any) (pgconn.CommandTag, error)
	SendBatch(ctx context.Context, b *pgx.Batch) pgx.BatchResults
}

// placesChunk is how many places are read at a time: enough for a state to forget a changed point in one read.
const placesChunk = 2 * rules.WindowPointsMax

const placeColumns = `order_key, result_id, revision, voided, version, point, verdict, state`

// scanPlace reads placeColumns as an item.
func scanPlace(row pgx.CollectableRow) (*track.Item, error) {
	var it track.Item
	var stored track.Stored
	var point []byte
	if err := row.Scan(&it.Key, &it.ID, &it.Revision, &it.Voided, &stored.Version, &point, &stored.Verdict, &stored.State); err != nil {
		return nil, err
	}
	return placed(&it, stored, point)
}

// placed completes an item from the columns of its place.
func placed(it *track.Item, stored track.Stored, point []byte) (_ *track.Item, err error) {
	if it.Point, it.Repeat, err = decodePoint(point); err != nil {
		return nil, err
	}
	it.Ref = refOf(it.ID, it.Key)
	stored.Key, stored.Repeat = it.Key, it.Repeat
	it.Stored = &stored
	return it, nil
}

// placeBefore gives the place just before a key, nil where there is none.
func placeBefore(ctx context.Context, q querier, trackID int64, key []byte) (*track.Item, error) {
	rows, err := q.Query(ctx, `SELECT `+placeColumns+` FROM places WHERE track_id = $1 AND order_key < $2
		ORDER BY order_key DESC LIMIT 1`, trackID, key)
	if err != nil {
		return nil, err
	}
	items, err := pgx.CollectRows(rows, scanPlace)
	if err != nil || len(items) == 0 {
		return nil, err
	}
	return items[0], nil
}

// placesFrom gives the places at and after a key, in order, chunk by chunk.
func placesFrom(ctx context.Context, q querier, trackID int64, from []byte) func() (*track.Item, error) {
	var chunk []*track.Item
	done := false
	return func() (*track.Item, error) {
		if len(chunk) == 0 && !done {
			rows, err := q.Query(ctx, `SELECT `+placeColumns+` FROM places WHERE track_id = $1 AND order_key >= $2
				ORDER BY order_key LIMIT $3`, trackID, from, placesChunk)
			if err != nil {
				return nil, err
			}
			if chunk, err = pgx.CollectRows(rows, scanPlace); err != nil {
				return nil, err
			}
			done = len(chunk) < placesChunk
			if len(chunk) > 0 {
				from = next(chunk[len(chunk)-1].Key)
			}
		}
		if len(chunk) == 0 {
			return nil, nil
		}
		it := chunk[0]
		chunk = chunk[1:]
		return it, nil
	}
}

// merged gives stored items and changed ones in one order. Stored items whose result is in gone are passed over: they
// are amended, and come again among the changed ones, or have left the track.
func merged(stored func() (*track.Item, error), changed []*track.Item, gone map[int64]bool) func() (*track.Item, error) {
	var held *track.Item
	return func() (*track.Item, error) {
		for held == nil && stored != nil {
			it, err := stored()
			if err != nil {
				return nil, err
			}
			if it == nil {
				stored = nil
			} else if !gone[it.ID] {
				held = it
			}
		}
		if len(changed) > 0 && (held == nil || bytes.Compare(changed[0].Key, held.Key) < 0) {
			it := changed[0]
			changed = changed[1:]
			return it, nil
		}
		it := held
		held = nil
		return it, nil
	}
}

// earlierPoints reads the points of a trace before a key for a runner.
func earlierPoints(ctx context.Context, q querier, trackID int64, before []byte) track.Earlier {
	return func(role chart.Role, n int) ([]track.Ref, error) {
		var found []track.Ref // newest first
		for key := before; len(found) < n; {
			rows, err := q.Query(ctx, `SELECT `+placeColumns+` FROM places WHERE track_id = $1 AND order_key < $2
				ORDER BY order_key DESC LIMIT $3`, trackID, key, placesChunk)
			if err != nil {
				return nil, err
			}
			items, err := pgx.CollectRows(rows, scanPlace)
			if err != nil {
				return nil, err
			}
			for _, it := range items {
				o, err := track.Decode(it.Stored.Verdict)
				if err != nil {
					return nil, err
				}
				if o.Traces[role].Point && !it.Repeat {
					found = append(found, it.Ref)
				}
			}
			if len(items) < placesChunk {
				break
			}
			key = items[len(items)-1].Key
		}
		oldestFirst := make([]track.Ref, 0, len(found))
		for i := min(n, len(found)) - 1; i >= 0; i-- {
			oldestFirst = append(oldestFirst, found[i])
		}
		return oldestFirst, nil
	}
}

// next gives the lowest key above a key.
func next(key []byte) []byte { return append(bytes.Clone(key), 0) }
