package store

import (
	"bytes"
	"context"
	"fmt"
	"slices"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// RecheckReport is what a recheck found.
type RecheckReport struct {
	Tracks, Results, Signals int
	// Differences says where the stored state is not what history gives; at most differencesMax, then a count.
	Differences []string
	Dropped     int
}

// differencesMax bounds the report: whoever has this many needs the first of them.
const differencesMax = 1000

// Recheck recomputes every track from results, versions and marks, from its first result, and compares: of each result
// its place, revision, version, verdict and hits, and the state the judge keeps; of each track its episodes and counts.
// It reads one state of the database and changes nothing.
func (s *Store) Recheck(ctx context.Context, progress func(done, total int)) (report RecheckReport, err error) {
	defer wrap(ctx, &err, "Recheck")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		report = RecheckReport{}
		rows, err := tx.Query(ctx, `SELECT t.track_id, t.chart_id, c.name, t.lot, t.results, t.open_signals, c.timeline,
				c.kind, c.subgroup_size, c.standardised
			FROM tracks t JOIN charts c USING (chart_id) ORDER BY t.track_id`)
		if err != nil {
			return err
		}
		checks, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (*trackCheck, error) {
			k := &trackCheck{report: &report}
			var kind int16
			err := row.Scan(&k.track.ID, &k.chart.ID, &k.chart.Name, &k.track.Lot, &k.track.Results, &k.track.OpenSignals, &k.chart.Timeline,
				&kind, &k.chart.SubgroupSize, &k.chart.Standardised)
			k.chart.Kind = chart.Kind(kind)
			return k, err
		})
		if err != nil {
			return err
		}
		for i, k := range checks {
			tl, err := s.timeline(ctx, tx, &k.chart)
			if err != nil {
				return err
			}
			if err := k.run(ctx, tx, tl.forTrack(k.track.Lot)); err != nil {
				return fmt.Errorf("recheck of chart %q, lot %q: %w", k.chart.Name, k.track.Lot, err)
			}
			report.Tracks++
			if progress != nil {
				progress(i+1, len(checks))
			}
		}
		return nil
	})
	return report, err
}

// trackCheck recomputes one track.
type trackCheck struct {
	report *RecheckReport
	chart  chartRow
	track  trackRow
	found  []*track.Episode
	// running are the episodes that the newest point of their trace is part of.
	running map[track.EpisodeKey]*track.Episode
	alive   int64
}

func (k *trackCheck) differ(format string, args ...any) {
	if len(k.report.Differences) >= differencesMax {
		k.report.Dropped++
		return
	}
	where := fmt.Sprintf("chart %s, lot %q: ", k.chart.Name, k.track.Lot)
	k.report.Differences = append(k.report.Differences, where+fmt.Sprintf(format, args...))
}

func (k *trackCheck) run(ctx context.Context, tx pgx.Tx, tl track.Timeline) error {
	k.running = map[track.EpisodeKey]*track.Episode{}
	runner := track.NewRunner(tl, nil)
	read := 0
	for after := []byte{}; ; {
		chunk, err := k.read(ctx, tx, after)
		if err != nil {
			return err
		}
		for _, row := range chunk {
			if err := k.step(runner, row); err != nil {
				return err
			}
		}
		read += len(chunk)
		if len(chunk) < recheckChunk {
			break
		}
		after = chunk[len(chunk)-1].item.Key
	}
	k.report.Results += read
	if k.alive != k.track.Results {
		k.differ("the track counts %d results, there are %d", k.track.Results, k.alive)
	}
	if err := k.missing(ctx, tx, read); err != nil {
		return err
	}
	return k.compareEpisodes(ctx, tx)
}

// recheckChunk is how many results are read at a time.
const recheckChunk = 2000

// checkedRow is a stored place with the content history gives it.
type checkedRow struct {
	item             *track.Item
	content          definition.Result
	latest           int
	latestVoided     bool
	latestTrack      int64
	source, sourceID string
}

func (k *trackCheck) read(ctx context.Context, tx pgx.Tx, after []byte) ([]*checkedRow, error) {
	rows, err := tx.Query(ctx, `SELECT `+placesPrefixed+`, coalesce(v.content, r.content), coalesce(v.revision, 1), coalesce(v.voided, false),
			coalesce(v.track_id, r.track_id), r.source, r.source_id
		FROM places p JOIN results r USING (chart_id, result_id)
		LEFT JOIN LATERAL (SELECT * FROM result_revisions v WHERE v.chart_id = r.chart_id AND v.result_id = r.result_id ORDER BY v.revision DESC LIMIT 1) v ON true
		WHERE p.track_id = $1 AND p.order_key > $2 ORDER BY p.order_key LIMIT $3`, k.track.ID, after, recheckChunk)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (*checkedRow, error) {
		c := &checkedRow{}
		var content []byte
		var err error
		c.item, err = scanPlace(suffixed{row, []any{&content, &c.latest, &c.latestVoided, &c.latestTrack, &c.source, &c.sourceID}})
		if err == nil {
			c.content, err = decodeContent(content)
		}
		return c, err
	})
}

const placesPrefixed = `p.order_key, p.result_id, p.revision, p.voided, p.version, p.point, p.verdict, p.state`

// suffixed scans more columns after those of a place.
type suffixed struct {
	pgx.CollectableRow
	more []any
}

func (r suffixed) Scan(dest ...any) error { return r.CollectableRow.Scan(append(dest, r.more...)...) }

// step judges one result from its content and compares it with what is stored.
func (k *trackCheck) step(runner *track.Runner, row *checkedRow) error {
	name := fmt.Sprintf("result %s/%s", row.source, row.sourceID)
	pt, err := row.content.Point(k.chart.Chart)
	if err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	key := row.content.OrderKey()
	if !bytes.Equal(key, row.item.Key) {
		k.differ("%s is at another place than its content gives", name)
	}
	if row.item.Revision != row.latest || row.item.Voided != row.latestVoided || row.latestTrack != k.track.ID {
		k.differ("%s stands at revision %d (voided %v), history has %d (%v) on track %d", name, row.item.Revision, row.item.Voided, row.latest, row.latestVoided, row.latestTrack)
	}
	it := &track.Item{Ref: refOf(row.item.ID, key), Revision: row.latest, Point: pt, Repeat: row.content.Role == definition.Repeat, Voided: row.latestVoided}
	if !it.Voided {
		k.alive++
	}
	o, err := runner.Step(it)
	if err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	if form := o.Encode(); o.Version != row.item.Stored.Version || !bytes.Equal(form, row.item.Stored.Verdict) {
		k.differ("%s: stored verdict of version %d %s, recomputed of version %d %s", name, row.item.Stored.Version, row.item.Stored.Verdict, o.Version, form)
	}
	if !bytes.Equal(o.State, row.item.Stored.State) {
		k.differ("%s: the judge's stored state is not the recomputed one", name)
	}
	k.episodes(runner, it, o)
	return nil
}

// episodes follows the episodes the plain way: hits of one key at consecutive points of its trace, within one segment.
func (k *trackCheck) episodes(runner *track.Runner, it *track.Item, o *track.Outcome) {
	if runner.Began() {
		clear(k.running)
	}
	if it.Repeat {
		return
	}
	for role, t := range o.Traces {
		if !t.Point {
			continue
		}
		hit := map[track.EpisodeKey]bool{}
		for _, h := range o.Hits {
			if h.Role != chart.Role(role) {
				continue
			}
			hit[h.EpisodeKey] = true
			if e := k.running[h.EpisodeKey]; e != nil {
				e.LastHit = it.Ref
				continue
			}
			e := &track.Episode{EpisodeKey: h.EpisodeKey, Consequence: h.Consequence, Version: o.Version, FirstPoint: h.FirstCounting, FirstHit: it.Ref, LastHit: it.Ref}
			k.running[h.EpisodeKey] = e
			k.found = append(k.found, e)
		}
		for key := range k.running {
			if key.Role == chart.Role(role) && !hit[key] {
				delete(k.running, key)
			}
		}
	}
}

// missing compares the number of places with the number of results history has on the track.
func (k *trackCheck) missing(ctx context.Context, tx pgx.Tx, places int) error {
	var results int
	err := tx.QueryRow(ctx, `SELECT count(*) FROM results r
		LEFT JOIN LATERAL (SELECT v.track_id FROM result_revisions v WHERE v.chart_id = r.chart_id AND v.result_id = r.result_id ORDER BY v.revision DESC LIMIT 1) v ON true
		WHERE r.chart_id = $1 AND coalesce(v.track_id, r.track_id) = $2`, k.chart.ID, k.track.ID).Scan(&results)
	if err == nil && results != places {
		k.differ("history has %d results on the track, %d have a place", results, places)
	}
	return err
}

func (k *trackCheck) compareEpisodes(ctx context.Context, tx pgx.Tx) error {
	rows, err := tx.Query(ctx, `SELECT trace, rule, side, version, first_point, first_point_result, first_hit, first_hit_result, last_hit, last_hit_result, status = 'OPEN'
		FROM signals WHERE track_id = $1 AND status IN ('OPEN', 'CLOSED')`, k.track.ID)
	if err != nil {
		return err
	}
	var stored []string
	open := 0
	var trace, side int16
	var e track.Episode
	var isOpen bool
	_, err = pgx.ForEachRow(rows, []any{&trace, &e.Rule, &side, &e.Version, &e.FirstPoint.Key, &e.FirstPoint.ID, &e.FirstHit.Key, &e.FirstHit.ID, &e.LastHit.Key, &e.LastHit.ID, &isOpen}, func() error {
		e.Role, e.Side = chart.Role(trace), rules.Side(side)
		stored = append(stored, episodeText(&e))
		if isOpen {
			open++
		}
		return nil
	})
	if err != nil {
		return err
	}
	var found []string
	for _, e := range k.found {
		found = append(found, episodeText(e))
	}
	slices.Sort(stored)
	slices.Sort(found)
	k.report.Signals += len(stored)
	for _, text := range found {
		if !slices.Contains(stored, text) {
			k.differ("signal missing: %s", text)
		}
	}
	for _, text := range stored {
		if !slices.Contains(found, text) {
			k.differ("signal that history does not give: %s", text)
		}
	}
	if len(stored) != len(found) {
		k.differ("%d signals stored, %d recomputed", len(stored), len(found))
	}
	if open != k.track.OpenSignals {
		k.differ("the track counts %d open signals, there are %d", k.track.OpenSignals, open)
	}
	return nil
}

func episodeText(e *track.Episode) string {
	return fmt.Sprintf("%s %s %s of version %d, first point %d, hits %d to %d (%x, %x to %x)",
		e.Role, e.Rule, e.Side, e.Version, e.FirstPoint.ID, e.FirstHit.ID, e.LastHit.ID, e.FirstPoint.Key, e.FirstHit.Key, e.LastHit.Key)
}
