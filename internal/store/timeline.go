package store

import (
	"context"
	"fmt"
	"slices"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/track"
)

const (
	// versionsCachedMax and timelinesCachedMax bound the caches: some kilobytes a version, and a few hundred bytes a
	// timeline, which shares its versions.
	versionsCachedMax  = 4096
	timelinesCachedMax = 4096
)

// compiled is the content of a version and its judge. It is found by the digest of the content, so it cannot be stale.
type compiled struct {
	content definition.Content
	judge   *judge.Judge
}

// timelineKey names one state of a chart's versions and marks. A state that was rolled back keeps its number for good.
type timelineKey struct{ chart, number int64 }

// timeline is one state of a chart's approved versions, withdrawn ones included, and of its marks that are not void. It
// is immutable.
type timeline struct {
	versions []*track.Version // by number
	marks    []track.Mark
}

// forTrack gives the spans of a lot's track; the lot is empty where lots are not tracks.
func (t *timeline) forTrack(lot string) track.Timeline {
	return track.BuildTimeline(lot, t.versions, t.marks)
}

// with gives the timeline with one more approved version.
func (t *timeline) with(v *track.Version) *timeline {
	versions := append(slices.Clone(t.versions), v)
	slices.SortFunc(versions, func(a, b *track.Version) int { return a.Number - b.Number })
	return &timeline{versions, t.marks}
}

// withdrawn gives the timeline with a version withdrawn.
func (t *timeline) withdrawn(number int) *timeline {
	versions := slices.Clone(t.versions)
	for i, v := range versions {
		if v.Number == number {
			versions[i] = &track.Version{Content: v.Content, Compiled: v.Compiled, Withdrawn: true}
		}
	}
	return &timeline{versions, t.marks}
}

// timeline gives the timeline of a chart as it is when read, and sets the chart's number of it.
func (s *Store) timeline(ctx context.Context, q querier, c *chartRow) (*timeline, error) {
	for {
		if t, ok := s.timelines.get(timelineKey{c.ID, c.Timeline}); ok {
			return t, nil
		}
		t, err := s.loadTimeline(ctx, q, c.ID)
		if err != nil {
			return nil, err
		}
		// The number read before and after is the same only if nothing was committed in between.
		var now int64
		if err := q.QueryRow(ctx, `SELECT timeline FROM charts WHERE chart_id = $1`, c.ID).Scan(&now); err != nil {
			return nil, err
		}
		if now == c.Timeline {
			s.timelines.put(timelineKey{c.ID, now}, t)
			return t, nil
		}
		c.Timeline = now
	}
}

func (s *Store) loadTimeline(ctx context.Context, q querier, chartID int64) (*timeline, error) {
	rows, err := q.Query(ctx, `SELECT v.number, v.digest, bool_or(d.decision = 'WITHDRAWN') AS withdrawn
		FROM versions v JOIN version_decisions d USING (chart_id, number)
		WHERE v.chart_id = $1 GROUP BY v.number, v.digest HAVING bool_or(d.decision = 'APPROVED') ORDER BY v.number`, chartID)
	if err != nil {
		return nil, err
	}
	type decided struct {
		Number    int
		Digest    string
		Withdrawn bool
	}
	list, err := pgx.CollectRows(rows, pgx.RowToStructByName[decided])
	if err != nil {
		return nil, err
	}
	t := &timeline{}
	for _, d := range list {
		v, err := s.versionContent(ctx, q, chartID, d.Number, d.Digest)
		if err != nil {
			return nil, err
		}
		t.versions = append(t.versions, &track.Version{Content: v.content, Compiled: v.judge, Withdrawn: d.Withdrawn})
	}
	rows, err = q.Query(ctx, `SELECT m.at, m.lot, m.break, m.restart FROM marks m
		WHERE m.chart_id = $1 AND (m.break OR m.restart)
			AND NOT EXISTS (SELECT FROM mark_voids v WHERE v.chart_id = m.chart_id AND v.mark_id = m.mark_id)
		ORDER BY m.at, m.mark_id`, chartID)
	if err != nil {
		return nil, err
	}
	t.marks, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (m track.Mark, err error) {
		err = row.Scan(&m.At, &m.Lot, &m.Break, &m.Restart)
		m.At = m.At.UTC()
		return m, err
	})
	return t, err
}

// version gives a version of a chart ready to judge, whatever was decided on it.
func (s *Store) version(ctx context.Context, q querier, chartID int64, number int) (*track.Version, error) {
	var digest string
	err := q.QueryRow(ctx, `SELECT digest FROM versions WHERE chart_id = $1 AND number = $2`, chartID, number).Scan(&digest)
	if err != nil {
		return nil, err
	}
	v, err := s.versionContent(ctx, q, chartID, number, digest)
	if err != nil {
		return nil, err
	}
	return &track.Version{Content: v.content, Compiled: v.judge}, nil
}

// versionContent gives the content of the digest, from the cache or the database.
func (s *Store) versionContent(ctx context.Context, q querier, chartID int64, number int, digest string) (*compiled, error) {
	if v, ok := s.versions.get(digest); ok {
		return v, nil
	}
	var canonical []byte
	err := q.QueryRow(ctx, `SELECT canonical FROM versions WHERE chart_id = $1 AND number = $2`, chartID, number).Scan(&canonical)
	if err != nil {
		return nil, err
	}
	content, err := definition.ParseContent(canonical, digest)
	if err != nil {
		return nil, fmt.Errorf("version %d of chart %d: %w", number, chartID, err)
	}
	return s.compile(content, digest)
}

func (s *Store) compile(content definition.Content, digest string) (*compiled, error) {
	j, err := judge.New(content.JudgeLimits())
	if err != nil {
		return nil, err
	}
	v := &compiled{content, j}
	s.versions.put(digest, v)
	return v, nil
}

// VersionJudge gives the judge of a version. It is immutable and shared.
func (s *Store) VersionJudge(v definition.Version) (*judge.Judge, error) {
	if known, ok := s.versions.get(v.Digest); ok {
		return known.judge, nil
	}
	known, err := s.compile(v.Content, definition.DigestOf(v.Content.Canonical()))
	if err != nil {
		return nil, fmt.Errorf("store: version %d of %s: %w", v.Number, v.Chart, err)
	}
	return known.judge, nil
}

// newTimeline gives the chart's timeline a number of its own, after versions or marks have changed.
func (w *work) newTimeline(ctx context.Context, c *chartRow) error {
	return w.tx.QueryRow(ctx, `UPDATE charts SET timeline = nextval('timeline_numbers') WHERE chart_id = $1 RETURNING timeline`, c.ID).Scan(&c.Timeline)
}
