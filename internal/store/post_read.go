package store

import (
	"bytes"
	"context"
	"slices"

	"github.com/jackc/pgx/v5"

	"limitary/internal/track"
)

// begin opens the transaction, locks tracks and chains in the order of their ids, and only then reads: charts, clock,
// what is stored under the rows' natural keys, and what lies just before the first new place of each track. All of it
// travels in one batch; every statement sees what was committed before it began.
func (p *posting) begin(ctx context.Context, conn *pgx.Conn) error {
	trackIDs, lowest := p.lockOrder()
	chartIDs, byID := p.chartsByID()
	var b pgx.Batch
	b.Queue(`BEGIN ISOLATION LEVEL READ COMMITTED`)
	b.Queue(pinPlans)
	b.Queue(`SELECT track_id, results, open_signals, coalesce(occurrence, 0), hold_since, last_recorded_at
		FROM tracks WHERE track_id = ANY($1) ORDER BY track_id FOR UPDATE`, trackIDs).Query(p.readTracks)
	b.Queue(`SELECT chain_id, entry, hash FROM chain_heads WHERE chain_id = ANY($1) ORDER BY chain_id FOR UPDATE`, chartIDs).Query(func(rows pgx.Rows) error {
		var id int64
		var head chainHead
		_, err := pgx.ForEachRow(rows, []any{&id, &head.entry, &head.hash}, func() error {
			byID[id].head = chainHead{head.entry, bytes.Clone(head.hash)}
			return nil
		})
		return err
	})
	p.queueCharts(&b, chartIDs, byID)
	p.queueStored(&b)
	b.Queue(`SELECT nextval('result_ids') FROM generate_series(1, $1)`, len(p.results)).Query(func(rows pgx.Rows) (err error) {
		p.ids, err = pgx.CollectRows(rows, pgx.RowTo[int64])
		return err
	})
	p.queueNeighbours(&b, trackIDs, lowest)
	return conn.SendBatch(ctx, &b).Close()
}

// chartsByID gives the charts of the post by id, and the ids in order.
func (p *posting) chartsByID() (ids []int64, byID map[int64]*postChart) {
	byID = map[int64]*postChart{}
	for _, c := range p.charts {
		ids = append(ids, c.ID)
		byID[c.ID] = c
	}
	slices.Sort(ids)
	return ids, byID
}

// queueCharts asks for what can change of the charts, and for the clock.
func (p *posting) queueCharts(b *pgx.Batch, chartIDs []int64, byID map[int64]*postChart) {
	b.Queue(`SELECT chart_id, archived, labels, timeline, clock_timestamp() FROM charts WHERE chart_id = ANY($1) ORDER BY chart_id`, chartIDs).Query(func(rows pgx.Rows) error {
		for rows.Next() {
			var id, timeline int64
			var archived bool
			var labels map[string]string
			if err := rows.Scan(&id, &archived, &labels, &timeline, &p.now); err != nil {
				return err
			}
			byID[id].Archived, byID[id].Labels, byID[id].Timeline = archived, labels, timeline
		}
		return rows.Err()
	})
}

// pinPlans holds a post to the plans it is written for: every look-up through an index, planned once a connection. The
// planner would otherwise plan each statement anew, which costs more than running it, or settle on reading whole tables
// while they are still small and go on doing so when they are not.
const pinPlans = `SELECT set_config('plan_cache_mode', 'force_generic_plan', true), set_config('enable_seqscan', 'off', true),
	set_config('enable_hashjoin', 'off', true), set_config('enable_mergejoin', 'off', true)`

// lockOrder lists the tracks in the order they are locked, and the first place the post could take on each.
func (p *posting) lockOrder() (ids []int64, lowest [][]byte) {
	for id := range p.tracks {
		ids = append(ids, id)
	}
	slices.Sort(ids)
	for _, id := range ids {
		lowest = append(lowest, p.tracks[id].lowest)
	}
	return ids, lowest
}

func (p *posting) readTracks(rows pgx.Rows) error {
	for rows.Next() {
		var id int64
		var t Track
		var hold, last nullableTime
		if err := rows.Scan(&id, &t.Results, &t.OpenSignals, &t.Occurrence, &hold, &last); err != nil {
			return err
		}
		into := p.tracks[id]
		into.Results, into.OpenSignals, into.Occurrence = t.Results, t.OpenSignals, t.Occurrence
		into.HoldSince, into.LastRecordedAt = hold.time(), last.time()
	}
	return rows.Err()
}

// queueStored asks for what is stored under the natural keys of the rows.
func (p *posting) queueStored(b *pgx.Batch) {
	p.stored = map[int]*storedRow{}
	var at []int32
	var charts []int64
	var sources, ids []string
	for i := range p.results {
		if p.rows[i].Outcome == 0 {
			at, charts = append(at, int32(i)), append(charts, p.charts[p.results[i].Chart].ID)
			sources, ids = append(sources, p.results[i].Source), append(ids, p.results[i].SourceID)
		}
	}
	b.Queue(`SELECT u.i, r.result_id, r.track_id, r.digest, coalesce(v.digest, r.digest), coalesce(v.content, r.content), r.version, r.verdict, r.recorded_at,
			p.version, p.verdict, coalesce((SELECT j.recorded_at FROM verdicts j WHERE j.chart_id = r.chart_id AND j.result_id = r.result_id
				ORDER BY j.entry DESC LIMIT 1), r.recorded_at)
		FROM unnest($1::int[], $2::bigint[], $3::text[], $4::text[]) AS u (i, chart_id, source, source_id)
		JOIN results r USING (chart_id, source, source_id)
		JOIN places p ON p.chart_id = r.chart_id AND p.result_id = r.result_id
		LEFT JOIN result_revisions v ON v.chart_id = r.chart_id AND v.result_id = r.result_id AND v.revision = p.revision`,
		at, charts, sources, ids).Query(func(rows pgx.Rows) error {
		for rows.Next() {
			var i int
			st := &storedRow{}
			if err := rows.Scan(&i, &st.id, &st.trackID, &st.digest, &st.currentDigest, &st.content, &st.firstVersion, &st.firstVerdict,
				&st.recordedAt, &st.version, &st.verdict, &st.currentRecorded); err != nil {
				return err
			}
			st.recordedAt, st.currentRecorded = st.recordedAt.UTC(), st.currentRecorded.UTC()
			p.stored[i] = st
		}
		return rows.Err()
	})
}

// queueNeighbours asks, for each track, for the place just before the first new one and whether anything lies after it.
func (p *posting) queueNeighbours(b *pgx.Batch, trackIDs []int64, lowest [][]byte) {
	b.Queue(`SELECT u.track_id, NOT EXISTS (SELECT FROM places a WHERE a.track_id = u.track_id AND a.order_key >= u.lowest), p.order_key IS NOT NULL,
			coalesce(p.order_key, ''), coalesce(p.result_id, 0), coalesce(p.revision, 0), coalesce(p.voided, false), coalesce(p.version, 0),
			coalesce(p.point, '\x00'), coalesce(p.verdict, ''), coalesce(p.state, '')
		FROM unnest($1::bigint[], $2::bytea[]) AS u (track_id, lowest)
		LEFT JOIN LATERAL (SELECT * FROM places p WHERE p.track_id = u.track_id AND p.order_key < u.lowest ORDER BY p.order_key DESC LIMIT 1) p ON true`,
		trackIDs, lowest).Query(func(rows pgx.Rows) error {
		for rows.Next() {
			var id int64
			var tail, found bool
			it, err := scanNeighbour(prefixed{rows, []any{&id, &tail, &found}}, &found)
			if err != nil {
				return err
			}
			p.tracks[id].before, p.tracks[id].tail = it, tail
		}
		return rows.Err()
	})
}

// scanNeighbour scans a place that may not be there.
func scanNeighbour(row pgx.CollectableRow, found *bool) (*track.Item, error) {
	var it track.Item
	var stored track.Stored
	var point []byte
	err := row.Scan(&it.Key, &it.ID, &it.Revision, &it.Voided, &stored.Version, &point, &stored.Verdict, &stored.State)
	if err != nil || !*found {
		return nil, err
	}
	return placed(&it, stored, point)
}

// prefixed scans leading columns before those of a place.
type prefixed struct {
	pgx.Rows
	first []any
}

func (r prefixed) Scan(dest ...any) error { return r.Rows.Scan(append(r.first, dest...)...) }

// neighbours is what a post already knows of the places around its first new one.
type neighbours struct {
	before *track.Item
	tail   bool
}
