package store

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// ResultFilter selects results of a chart.
type ResultFilter struct {
	Chart, Lot string
	// Measured in [From, To); zero for no bound.
	From, To                  time.Time
	IncludeVoided, Descending bool
}

// resultsOfRunMax bounds the controls of one analytical run.
const resultsOfRunMax = 10_000

// resultColumns and resultTables read a result as it stands: its latest content, its place and its current verdict.
const resultColumns = `r.chart_id, r.result_id, p.track_id, p.order_key, coalesce(v.content, r.content), p.revision, p.voided, r.poster,
	coalesce(v.recorded_at, r.recorded_at), p.version, p.verdict,
	coalesce((SELECT j.recorded_at FROM verdicts j WHERE j.chart_id = r.chart_id AND j.result_id = r.result_id ORDER BY j.entry DESC LIMIT 1), r.recorded_at)`

const resultTables = `places p JOIN results r ON r.chart_id = p.chart_id AND r.result_id = p.result_id
	LEFT JOIN result_revisions v ON v.chart_id = p.chart_id AND v.result_id = p.result_id AND v.revision = p.revision`

// readResult is a stored result on its way out: its verdict is filled in after the row has been read.
type readResult struct {
	StoredResult
	chartID, trackID int64
	orderKey         []byte
	version          int
	verdict          []byte
	judgedAt         time.Time
}

func scanResult(row pgx.CollectableRow) (*readResult, error) {
	r := &readResult{}
	var content []byte
	err := row.Scan(&r.chartID, &r.ID, &r.trackID, &r.orderKey, &content, &r.Revision, &r.Voided, &r.Poster, &r.RecordedAt, &r.version, &r.verdict, &r.judgedAt)
	if err != nil {
		return nil, err
	}
	r.RecordedAt, r.judgedAt = r.RecordedAt.UTC(), r.judgedAt.UTC()
	r.Result, err = decodeContent(content)
	return r, err
}

// results reads results with their verdicts.
func (s *Store) results(ctx context.Context, q querier, sql string, args ...any) ([]*readResult, error) {
	rows, err := q.Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	list, err := pgx.CollectRows(rows, scanResult)
	if err != nil {
		return nil, err
	}
	v := &verdictReader{store: s, q: q}
	for _, r := range list {
		if err := v.stored(ctx, r.chartID, &r.Verdict, r.version, r.verdict, r.judgedAt); err != nil {
			return nil, err
		}
	}
	return list, v.resolve(ctx)
}

func plain(list []*readResult) []StoredResult {
	out := make([]StoredResult, len(list))
	for i, r := range list {
		out[i] = r.StoredResult
	}
	return out
}

// resultByKey reads one result by its natural key.
func (s *Store) resultByKey(ctx context.Context, q querier, c *chartRow, source, sourceID string) (*readResult, error) {
	list, err := s.results(ctx, q, `SELECT `+resultColumns+` FROM `+resultTables+` WHERE r.chart_id = $1 AND r.source = $2 AND r.source_id = $3`, c.ID, source, sourceID)
	if err == nil && len(list) == 0 {
		err = noResult(c.Name, source, sourceID)
	}
	if err != nil {
		return nil, err
	}
	return list[0], nil
}

// GetResult gives a result as it stands, and every revision it has had with the verdicts on each, oldest first.
func (s *Store) GetResult(ctx context.Context, a Actor, chart, source, sourceID string) (found StoredResult, revisions []Revision, err error) {
	defer wrap(ctx, &err, "GetResult")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		r, err := s.resultByKey(ctx, tx, c, source, sourceID)
		if err != nil {
			return err
		}
		found = r.StoredResult
		revisions, err = s.revisions(ctx, tx, r)
		return err
	})
	return found, revisions, err
}

// revisions reads what a result has been and how it was judged.
func (s *Store) revisions(ctx context.Context, q querier, r *readResult) ([]Revision, error) {
	rows, err := q.Query(ctx, `
		SELECT 1, content, false, poster, '', '', '', recorded_at FROM results WHERE chart_id = $1 AND result_id = $2
		UNION ALL
		SELECT revision, content, voided, author, coalesce(confirmed_by, ''), reason_code, reason, recorded_at
			FROM result_revisions WHERE chart_id = $1 AND result_id = $2
		ORDER BY 1`, r.chartID, r.ID)
	if err != nil {
		return nil, err
	}
	list, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (v Revision, err error) {
		var content []byte
		if err = row.Scan(&v.Number, &content, &v.Voided, &v.Author, &v.ConfirmedBy, &v.ReasonCode, &v.ReasonText, &v.RecordedAt); err != nil {
			return v, err
		}
		v.RecordedAt = v.RecordedAt.UTC()
		v.Result, err = decodeContent(content)
		return v, err
	})
	if err != nil {
		return nil, err
	}
	return list, s.verdictsOf(ctx, q, r, list)
}

func (s *Store) verdictsOf(ctx context.Context, q querier, r *readResult, revisions []Revision) error {
	rows, err := q.Query(ctx, `
		SELECT entry, 1, version, verdict, recorded_at FROM results WHERE chart_id = $1 AND result_id = $2
		UNION ALL
		SELECT entry, revision, version, verdict, recorded_at FROM verdicts WHERE chart_id = $1 AND result_id = $2
		ORDER BY 1`, r.chartID, r.ID)
	if err != nil {
		return err
	}
	type storedVerdict struct {
		revision, version int
		form              []byte
		at                time.Time
	}
	list, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (v storedVerdict, err error) {
		var entry int64
		err = row.Scan(&entry, &v.revision, &v.version, &v.form, &v.at)
		return v, err
	})
	if err != nil {
		return err
	}
	reader := &verdictReader{store: s, q: q}
	for i := range revisions {
		for _, v := range list {
			if v.revision != revisions[i].Number {
				continue
			}
			var verdict Verdict
			if err := reader.stored(ctx, r.chartID, &verdict, v.version, v.form, v.at.UTC()); err != nil {
				return err
			}
			revisions[i].Verdicts = append(revisions[i].Verdicts, verdict)
		}
	}
	return reader.resolve(ctx)
}

// listKey is the place a page of results ends at.
type listKey struct {
	Track int64  `json:"t"`
	Order []byte `json:"o"`
}

// ListResults gives the results of a chart in the order they are judged, track by track.
func (s *Store) ListResults(ctx context.Context, a Actor, f ResultFilter, p Page) (list []StoredResult, token string, err error) {
	defer wrap(ctx, &err, "ListResults")
	var after listKey
	size, more, err := p.open(f, &after)
	if err != nil {
		return nil, "", err
	}
	if !more && f.Descending {
		after = listKey{1 << 62, allKeys}
	}
	if after.Order == nil {
		after.Order = []byte{}
	}
	from, to := []byte{}, allKeys
	if !f.From.IsZero() {
		from = definition.KeyTime(f.From)
	}
	if !f.To.IsZero() {
		to = definition.KeyTime(f.To)
	}
	var read []*readResult
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, f.Chart)
		if err != nil {
			return err
		}
		read, err = s.results(ctx, tx, listSQL(f.Descending), c.ID, f.Lot, f.Lot == "" || !c.LotsAreTracks, from, to,
			f.IncludeVoided, after.Track, after.Order, size+1)
		return err
	})
	if err != nil {
		return nil, "", err
	}
	read, token, err = cut(read, size, f, func(r *readResult) any { return listKey{r.trackID, r.orderKey} })
	return plain(read), token, err
}

// The two orders of a list. The tracks of a chart are few, and each is read in the order of its primary key.
const (
	listAscending = `SELECT ` + resultColumns + ` FROM ` + resultTables + `
		WHERE p.track_id IN (SELECT t.track_id FROM tracks t WHERE t.chart_id = $1 AND (t.lot = $2 OR $3))
			AND p.order_key >= $4 AND p.order_key < $5 AND ($6 OR NOT p.voided) AND (p.track_id, p.order_key) > ($7, $8)
		ORDER BY p.track_id, p.order_key LIMIT $9`
	listDescending = `SELECT ` + resultColumns + ` FROM ` + resultTables + `
		WHERE p.track_id IN (SELECT t.track_id FROM tracks t WHERE t.chart_id = $1 AND (t.lot = $2 OR $3))
			AND p.order_key >= $4 AND p.order_key < $5 AND ($6 OR NOT p.voided) AND (p.track_id, p.order_key) < ($7, $8)
		ORDER BY p.track_id DESC, p.order_key DESC LIMIT $9`
)

func listSQL(descending bool) string {
	if descending {
		return listDescending
	}
	return listAscending
}

// GetRun gives the results of an analytical run, on all charts the actor may see, in the order of chart and judging.
func (s *Store) GetRun(ctx context.Context, a Actor, runID string, from, to time.Time) (list []StoredResult, err error) {
	defer wrap(ctx, &err, "GetRun")
	if to.IsZero() {
		to = farFuture
	}
	var read []*readResult
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		// A result that was amended into or out of the run is found by its history and kept by its present content.
		read, err = s.results(ctx, tx, `SELECT `+resultColumns+` FROM `+resultTables+` JOIN charts c ON c.chart_id = p.chart_id
			WHERE (p.chart_id, p.result_id) IN (
				SELECT h.chart_id, h.result_id FROM results h WHERE h.run_id = $1 AND h.measured_at >= $2 AND h.measured_at < $3
				UNION
				SELECT h.chart_id, h.result_id FROM result_revisions h WHERE h.run_id = $1 AND h.measured_at >= $2 AND h.measured_at < $3)
			AND coalesce(CASE WHEN v.revision IS NULL THEN r.run_id ELSE v.run_id END, '') = $1
			AND coalesce(v.measured_at, r.measured_at) >= $2 AND coalesce(v.measured_at, r.measured_at) < $3
			AND c.labels @> $4
			ORDER BY c.name, p.track_id, p.order_key LIMIT $5`, runID, from, to, a.scope(), resultsOfRunMax+1)
		return err
	})
	switch {
	case err != nil:
		return nil, err
	case len(read) > resultsOfRunMax:
		return nil, &definition.Error{Reason: definition.TooManyItems, Field: "run_id",
			Text: fmt.Sprintf("the run has more than %d results; narrow from and to", resultsOfRunMax)}
	case len(read) == 0:
		return nil, &definition.Error{Reason: definition.NotFound, Field: "run_id", Text: fmt.Sprintf("there is no result of run %q", runID)}
	}
	return plain(read), nil
}

// Window gives a result and up to a number of results before it in the same segment of its track, oldest first.
func (s *Store) Window(ctx context.Context, a Actor, chart, source, sourceID string, points int) (found StoredResult, before []StoredResult, err error) {
	defer wrap(ctx, &err, "Window")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		r, err := s.resultByKey(ctx, tx, c, source, sourceID)
		if err != nil {
			return err
		}
		found = r.StoredResult
		start, err := s.segmentStart(ctx, tx, c, r)
		if err != nil {
			return err
		}
		earlier, err := s.results(ctx, tx, `SELECT `+resultColumns+` FROM `+resultTables+`
			WHERE p.track_id = $1 AND p.order_key >= $2 AND p.order_key < $3 AND NOT p.voided ORDER BY p.order_key DESC LIMIT $4`,
			r.trackID, start, r.orderKey, points)
		for i := len(earlier) - 1; i >= 0; i-- {
			before = append(before, earlier[i].StoredResult)
		}
		return err
	})
	return found, before, err
}

// segmentStart gives the lowest order key of the segment a result lies in.
func (s *Store) segmentStart(ctx context.Context, tx pgx.Tx, c *chartRow, r *readResult) ([]byte, error) {
	var lot string
	if err := tx.QueryRow(ctx, `SELECT lot FROM tracks WHERE track_id = $1`, r.trackID).Scan(&lot); err != nil {
		return nil, err
	}
	tl, err := s.timeline(ctx, tx, c)
	if err != nil {
		return nil, err
	}
	from := tl.forTrack(lot).SegmentStart(r.Result.MeasuredAt)
	if from.IsZero() {
		return []byte{}, nil
	}
	return definition.KeyTime(from), nil
}
