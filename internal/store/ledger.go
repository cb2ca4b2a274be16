package store

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// ledger collects the rows one transaction writes, so that they travel in one batch.
type ledger struct {
	now       time.Time
	principal string
	results   []resultRow
	revisions []revisionRow
	places    []placeRow // new or moved
	updates   []placeRow // same place
	deletes   []placeKey
	verdicts  []verdictRow
	signals   []signalRow
	tracks    []*trackRow
}

type placeKey struct {
	trackID int64
	key     []byte
}

type resultRow struct {
	chartID, resultID, trackID int64
	result                     *definition.Result
	content, digest, verdict   []byte
	version                    int
	entry                      int64
}

type revisionRow struct {
	chartID, resultID, trackID int64
	number                     int
	result                     definition.Result
	content, digest            []byte
	voided                     bool
	author                     string
	confirmedBy                string // empty: took effect at once
	changeID                   int64
	reasonCode, reason         string
	entry                      int64
}

type placeRow struct {
	placeKey
	chartID, resultID int64
	revision          int
	voided            bool
	version           int
	standing          judge.Standing
	point             []byte
	verdict, state    []byte
}

type verdictRow struct {
	chartID, resultID, entry int64
	revision, version        int
	verdict                  []byte
}

// signalRow is one change of a signal, as an event and as its new state.
type signalRow struct {
	track.Change
	chartID, trackID, entry int64
	occurrence              int64
	mergedInto              int64
}

// judgeNumber is the judge of every verdict this build writes.
const judgeNumber = rules.JudgeNumber

// place records what judging found for a region: new places, changed verdicts, changed states. Rejudged counts results
// that were stored before and whose verdict changed.
func (l *ledger) place(jd *judgement, e *effect) (rejudged int) {
	for _, j := range e.judged {
		it := j.Item
		row := placeRow{placeKey{jd.track.ID, it.Key}, jd.chart.ID, it.ID, 0, it.Voided, j.Version, j.Standing, nil, j.Verdict, j.State}
		fresh := jd.isNew != nil && jd.isNew(it.ID)
		moved := it.Stored == nil || string(it.Stored.Key) != string(it.Key)
		if moved || it.Force {
			row.revision = it.Revision
			row.point = encodePoint(it.Point, it.Repeat)
		}
		switch {
		case moved:
			if it.Stored != nil {
				l.deletes = append(l.deletes, placeKey{jd.track.ID, it.Stored.Key})
			}
			l.places = append(l.places, row)
		case it.Force || j.VerdictChanged || j.StateChanged:
			l.updates = append(l.updates, row)
		}
		if j.VerdictChanged && !fresh {
			rejudged++
			l.verdicts = append(l.verdicts, verdictRow{jd.chart.ID, it.ID, jd.entry, it.Revision, j.Version, j.Verdict})
		}
	}
	return rejudged
}

// flush writes what the ledger holds and empties it of rows.
func (l *ledger) flush(ctx context.Context, q querier) error {
	var b pgx.Batch
	l.queue(&b)
	*l = ledger{now: l.now, principal: l.principal}
	if b.Len() == 0 {
		return nil
	}
	return q.SendBatch(ctx, &b).Close()
}

// queue adds the statements that write the ledger's rows.
func (l *ledger) queue(b *pgx.Batch) {
	l.queueResults(b)
	l.queueRevisions(b)
	l.queuePlaces(b)
	l.queueVerdicts(b)
	l.queueSignals(b)
	l.queueTracks(b)
}

func (l *ledger) queueResults(b *pgx.Batch) {
	n := len(l.results)
	if n == 0 {
		return
	}
	charts, ids, tracks, entries := make([]int64, n), make([]int64, n), make([]int64, n), make([]int64, n)
	sources, sourceIDs, runs := make([]string, n), make([]string, n), make([]*string, n)
	measured, versions := make([]time.Time, n), make([]int32, n)
	contents, digests, verdicts := make([][]byte, n), make([][]byte, n), make([][]byte, n)
	for i := range l.results {
		r := &l.results[i]
		charts[i], ids[i], tracks[i], entries[i] = r.chartID, r.resultID, r.trackID, r.entry
		sources[i], sourceIDs[i], runs[i] = r.result.Source, r.result.SourceID, orNull(r.result.RunID)
		measured[i], versions[i] = r.result.MeasuredAt, int32(r.version)
		contents[i], digests[i], verdicts[i] = r.content, r.digest, r.verdict
	}
	b.Queue(`INSERT INTO results (chart_id, result_id, track_id, source, source_id, measured_at, content, digest, run_id, poster,
			version, judge, verdict, recorded_at, entry)
		SELECT u.chart_id, u.result_id, u.track_id, u.source, u.source_id, u.measured_at, u.content, u.digest, u.run_id, $11,
			u.version, $12, u.verdict, $13, u.entry
		FROM unnest($1::bigint[], $2::bigint[], $3::bigint[], $4::text[], $5::text[], $6::timestamptz[], $7::bytea[], $8::bytea[], $9::text[],
			$10::int[], $14::bytea[], $15::bigint[])
			AS u (chart_id, result_id, track_id, source, source_id, measured_at, content, digest, run_id, version, verdict, entry)`,
		charts, ids, tracks, sources, sourceIDs, measured, contents, digests, runs, versions, l.principal, judgeNumber, l.now, verdicts, entries)
}

func timeOrNull(t time.Time) *time.Time {
	if t.IsZero() {
		return nil
	}
	return &t
}

func orNull(s string) *string {
	if s == "" {
		return nil
	}
	return &s
}

func (l *ledger) queueRevisions(b *pgx.Batch) {
	for _, r := range l.revisions {
		var change *int64
		if r.changeID != 0 {
			change = &r.changeID
		}
		b.Queue(`INSERT INTO result_revisions (chart_id, result_id, revision, track_id, measured_at, content, digest, run_id, voided,
				author, confirmed_by, change_id, reason_code, reason, recorded_at, entry)
			VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16)`,
			r.chartID, r.resultID, r.number, r.trackID, r.result.MeasuredAt, r.content, r.digest, orNull(r.result.RunID), r.voided,
			r.author, orNull(r.confirmedBy), change, r.reasonCode, r.reason, l.now, r.entry)
	}
}

func (l *ledger) queuePlaces(b *pgx.Batch) {
	for _, d := range l.deletes {
		b.Queue(`DELETE FROM places WHERE track_id = $1 AND order_key = $2`, d.trackID, d.key)
	}
	if n := len(l.places); n > 0 {
		tracks, keys, charts, ids := make([]int64, n), make([][]byte, n), make([]int64, n), make([]int64, n)
		revisions, voided, versions, standings := make([]int32, n), make([]bool, n), make([]int32, n), make([]int16, n)
		points, verdicts, states := make([][]byte, n), make([][]byte, n), make([][]byte, n)
		for i, p := range l.places {
			tracks[i], keys[i], charts[i], ids[i] = p.trackID, p.key, p.chartID, p.resultID
			revisions[i], voided[i], versions[i], standings[i] = int32(p.revision), p.voided, int32(p.version), int16(p.standing)
			points[i], verdicts[i], states[i] = p.point, p.verdict, p.state
		}
		b.Queue(`INSERT INTO places (track_id, order_key, chart_id, result_id, revision, voided, version, standing, point, verdict, state)
			SELECT * FROM unnest($1::bigint[], $2::bytea[], $3::bigint[], $4::bigint[], $5::int[], $6::bool[], $7::int[], $8::smallint[],
				$9::bytea[], $10::bytea[], $11::bytea[])`,
			tracks, keys, charts, ids, revisions, voided, versions, standings, points, verdicts, states)
	}
	if n := len(l.updates); n > 0 {
		tracks, keys := make([]int64, n), make([][]byte, n)
		revisions, voided, versions, standings := make([]*int32, n), make([]bool, n), make([]int32, n), make([]int16, n)
		points, verdicts, states := make([][]byte, n), make([][]byte, n), make([][]byte, n)
		for i, p := range l.updates {
			tracks[i], keys[i], voided[i], versions[i], standings[i] = p.trackID, p.key, p.voided, int32(p.version), int16(p.standing)
			points[i], verdicts[i], states[i] = p.point, p.verdict, p.state
			if p.revision > 0 {
				number := int32(p.revision)
				revisions[i] = &number
			}
		}
		b.Queue(`UPDATE places p SET revision = coalesce(u.revision, p.revision), voided = u.voided, version = u.version, standing = u.standing,
				point = coalesce(u.point, p.point), verdict = u.verdict, state = u.state
			FROM unnest($1::bigint[], $2::bytea[], $3::int[], $4::bool[], $5::int[], $6::smallint[], $7::bytea[], $8::bytea[], $9::bytea[])
				AS u (track_id, order_key, revision, voided, version, standing, point, verdict, state)
			WHERE p.track_id = u.track_id AND p.order_key = u.order_key`,
			tracks, keys, revisions, voided, versions, standings, points, verdicts, states)
	}
}

func (l *ledger) queueVerdicts(b *pgx.Batch) {
	n := len(l.verdicts)
	if n == 0 {
		return
	}
	charts, ids, entries := make([]int64, n), make([]int64, n), make([]int64, n)
	revisions, versions, verdicts := make([]int32, n), make([]int32, n), make([][]byte, n)
	for i, v := range l.verdicts {
		charts[i], ids[i], entries[i] = v.chartID, v.resultID, v.entry
		revisions[i], versions[i], verdicts[i] = int32(v.revision), int32(v.version), v.verdict
	}
	b.Queue(`INSERT INTO verdicts (chart_id, result_id, entry, revision, version, judge, verdict, recorded_at)
		SELECT u.chart_id, u.result_id, u.entry, u.revision, u.version, $7, u.verdict, $8
		FROM unnest($1::bigint[], $2::bigint[], $3::bigint[], $4::int[], $5::int[], $6::bytea[])
			AS u (chart_id, result_id, entry, revision, version, verdict)`,
		charts, ids, entries, revisions, versions, verdicts, judgeNumber, l.now)
}

func (l *ledger) queueTracks(b *pgx.Batch) {
	n := len(l.tracks)
	if n == 0 {
		return
	}
	ids, results, open := make([]int64, n), make([]int64, n), make([]int32, n)
	occurrences, holds := make([]*int64, n), make([]*time.Time, n)
	for i, t := range l.tracks {
		ids[i], results[i], open[i], holds[i] = t.ID, t.Results, int32(t.OpenSignals), timeOrNull(t.HoldSince)
		if t.Occurrence != 0 {
			occurrences[i] = &t.Occurrence
		}
	}
	b.Queue(`UPDATE tracks t SET results = u.results, open_signals = u.open_signals, occurrence = u.occurrence, hold_since = u.hold_since, last_recorded_at = $6
		FROM unnest($1::bigint[], $2::bigint[], $3::int[], $4::bigint[], $5::timestamptz[]) AS u (track_id, results, open_signals, occurrence, hold_since)
		WHERE t.track_id = u.track_id`, ids, results, open, occurrences, holds, l.now)
}
