package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
)

const versionColumns = `v.number, v.digest, coalesce(d.decision, ''), coalesce(d.decided_by, ''), d.recorded_at, coalesce(d.reason, ''),
	coalesce(x.decided_by, ''), x.recorded_at, coalesce(x.reason, '')`

const versionTables = `versions v
	LEFT JOIN version_decisions d ON d.chart_id = v.chart_id AND d.number = v.number AND d.step = 1
	LEFT JOIN version_decisions x ON x.chart_id = v.chart_id AND x.number = v.number AND x.step = 2`

// readVersions reads the versions of a chart that a condition selects, with what was decided on them.
func (s *Store) readVersions(ctx context.Context, q querier, c *chartRow, condition string, args ...any) ([]definition.Version, error) {
	rows, err := q.Query(ctx, `SELECT `+versionColumns+` FROM `+versionTables+` WHERE `+condition, args...)
	if err != nil {
		return nil, err
	}
	list, err := pgx.CollectRows(rows, scanVersion)
	if err != nil {
		return nil, err
	}
	for i := range list {
		v, err := s.versionContent(ctx, q, c.ID, list[i].Number, list[i].Digest)
		if err != nil {
			return nil, err
		}
		list[i].Content = v.content
	}
	return list, nil
}

// scanVersion reads what was decided on a version, and its number and digest.
func scanVersion(row pgx.CollectableRow) (v definition.Version, err error) {
	var decision string
	var decided, withdrawn nullableTime
	err = row.Scan(&v.Number, &v.Digest, &decision, &v.DecidedBy, &decided, &v.DecisionReason, &v.WithdrawnBy, &withdrawn, &v.WithdrawnReason)
	v.DecidedAt, v.WithdrawnAt = decided.time(), withdrawn.time()
	switch {
	case !v.WithdrawnAt.IsZero():
		v.State = definition.Withdrawn
	case decision == "":
		v.State = definition.Proposed
	default:
		v.State = definition.VersionState(decision)
	}
	return v, err
}

func (s *Store) readVersion(ctx context.Context, q querier, c *chartRow, number int) (definition.Version, error) {
	list, err := s.readVersions(ctx, q, c, `v.chart_id = $1 AND v.number = $2`, c.ID, number)
	if err != nil {
		return definition.Version{}, err
	}
	if len(list) == 0 {
		return definition.Version{}, noVersion(c.Name, number)
	}
	return list[0], nil
}

// versionAnswer is what the repeat of a request about a version finds again.
type versionAnswer struct {
	Chart    string `json:"chart"`
	Number   int    `json:"version"`
	Rejudged int    `json:"rejudged"`
	// Change is set where a withdrawal is for another principal to confirm.
	Change int64 `json:"change,omitempty"`
}

func (s *Store) replayVersion(a Actor, into *definition.Version, rejudged *int) func(context.Context, pgx.Tx, []byte) error {
	return func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier versionAnswer
		if err := json.Unmarshal(answer, &earlier); err != nil {
			return err
		}
		c, err := chartByName(ctx, tx, a, earlier.Chart)
		if err != nil {
			return err
		}
		*rejudged = earlier.Rejudged
		*into, err = s.readVersion(ctx, tx, c, earlier.Number)
		return err
	}
}

// ProposeVersion numbers and stores a version. Build is given the number and the moment of proposing, under the chart's
// lock, and may be called more than once; it must not use the store, whose connections may all be waiting for this one.
// Numbers have no holes.
func (s *Store) ProposeVersion(ctx context.Context, a Actor, req Request, chart string,
	build func(number int, proposedAt time.Time) (definition.Content, error)) (made definition.Version, err error) {
	defer wrap(ctx, &err, "ProposeVersion")
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, err := w.lockChart(ctx, chart)
		if err != nil {
			return nil, err
		}
		if c.Archived {
			return nil, archived(chart)
		}
		var number int
		if err := w.tx.QueryRow(ctx, `SELECT coalesce(max(number), 0) + 1 FROM versions WHERE chart_id = $1`, c.ID).Scan(&number); err != nil {
			return nil, err
		}
		content, err := build(number, w.now)
		if err != nil {
			return nil, err
		}
		content.EffectiveFrom = content.EffectiveFrom.UTC().Truncate(time.Microsecond)
		if err := w.checkContent(ctx, c, &content, number); err != nil {
			return nil, err
		}
		made, err = w.insertVersion(ctx, c, content)
		return versionAnswer{Chart: chart, Number: number}, err
	}, s.replayVersion(a, &made, new(int)))
	return made, err
}

func (w *work) insertVersion(ctx context.Context, c *chartRow, content definition.Content) (v definition.Version, err error) {
	canonical := content.Canonical()
	digest := definition.DigestOf(canonical)
	// What is read back must be what was proposed.
	if v.Content, err = definition.ParseContent(canonical, digest); err != nil {
		return v, err
	}
	v.Digest, v.State = digest, definition.Proposed
	entry, err := w.entry(ctx, c.ID)
	if err != nil {
		return v, err
	}
	_, err = w.tx.Exec(ctx, `INSERT INTO versions (chart_id, number, lot, canonical, digest, author, effective_from, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9)`,
		c.ID, v.Number, v.Lot, canonical, digest, w.actor.Principal, v.EffectiveFrom, w.now, entry)
	if err != nil {
		return v, err
	}
	return v, w.seal(ctx, c.ID, entry, "PROPOSE_VERSION", versionSaid{Version: v.Number, Digest: digest})
}

// versionSaid is what the audit entry of a proposal or a decision says.
type versionSaid struct {
	Version  int      `json:"version"`
	Digest   string   `json:"digest"`
	Reason   string   `json:"reason,omitempty"`
	Patterns []string `json:"accepted_patterns,omitempty"`
	Rejudged int      `json:"rejudged,omitempty"`
}

// checkContent reports a content that is not of the chart, or that cannot be judged by.
func (w *work) checkContent(ctx context.Context, c *chartRow, content *definition.Content, number int) error {
	if _, err := json.Marshal(content); err != nil {
		return fmt.Errorf("store: content of a version: %w", err)
	}
	switch {
	case content.Chart != c.Name || content.Number != number || content.Author != w.actor.Principal || !content.ProposedAt.Equal(w.now):
		return errors.New("store: a proposed version with another chart, number, author or time than was given")
	case content.Kind != c.Kind || content.SubgroupSize != c.SubgroupSize || content.Unit != c.Unit:
		return definition.Invalid("kind", "%v of %d readings in %q: chart %q is %v of %d in %q",
			content.Kind, content.SubgroupSize, content.Unit, c.Name, c.Kind, c.SubgroupSize, c.Unit)
	case c.Standardised != (content.Model != nil && len(content.Model.Levels) > 0):
		return definition.Invalid("options.levels", "chart %q is standardised: %v; a version has levels exactly where its chart is", c.Name, c.Standardised)
	case content.EffectiveFrom.Year() < 1900 || content.EffectiveFrom.Year() > 9998:
		return definition.Invalid("effective_from", "%s: want a time from 1900 to 9998", content.EffectiveFrom.Format(time.RFC3339))
	case content.Judge != judgeNumber:
		return definition.Invalid("judge", "%d: this build judges by number %d", content.Judge, judgeNumber)
	case content.Decimals == decimal.Unrounded:
		return definition.Invalid("published_decimals", "want 0 to %d: what is published is what is judged", decimal.PlacesMax)
	}
	if _, err := judge.New(content.JudgeLimits()); err != nil {
		var unsound *judge.Error
		if errors.As(err, &unsound) {
			return definition.Invalid(unsound.Field, "%s", unsound.Problem)
		}
		return err
	}
	return w.checkLot(ctx, c, content.Lot)
}

func (w *work) checkLot(ctx context.Context, c *chartRow, lot string) error {
	if lot == "" {
		return nil
	}
	if !c.LotsAreTracks {
		return definition.Invalid("lot", "%q: the lots of chart %q are not tracks of their own", lot, c.Name)
	}
	var found bool
	if err := w.tx.QueryRow(ctx, `SELECT EXISTS (SELECT FROM tracks WHERE chart_id = $1 AND lot = $2)`, c.ID, lot).Scan(&found); err != nil {
		return err
	}
	if !found {
		return noLot(c.Name, lot)
	}
	return nil
}

// GetVersion gives a version: its patterns in progress if it is a proposal, and whether it is in force now on at least
// one track.
func (s *Store) GetVersion(ctx context.Context, a Actor, chart string, number int) (v definition.Version, patterns []Pattern, inForce bool, err error) {
	defer wrap(ctx, &err, "GetVersion")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		if v, err = s.readVersion(ctx, tx, c, number); err != nil {
			return err
		}
		tracks, err := readTracks(ctx, tx, c, `chart_id = $1 ORDER BY track_id`, c.ID)
		if err != nil {
			return err
		}
		tl, err := s.timeline(ctx, tx, c)
		if err != nil {
			return err
		}
		if v.State == definition.Proposed {
			patterns, err = patternsEnded(ctx, tx, tl, tracks, v.Content)
			return err
		}
		now, err := clock(ctx, tx)
		if err != nil {
			return err
		}
		inForce = slices.ContainsFunc(tracks, func(t *trackRow) bool { return numberOf(tl.forTrack(t.Lot).InForce(now)) == number })
		return nil
	})
	return v, patterns, inForce, err
}

// ListVersions gives the versions of a chart, the newest number first.
func (s *Store) ListVersions(ctx context.Context, a Actor, chart string, p Page) (list []definition.Version, next string, err error) {
	defer wrap(ctx, &err, "ListVersions")
	filter := []any{"versions", chart}
	var after int
	size, more, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		list, err = s.readVersions(ctx, tx, c, `v.chart_id = $1 AND (NOT $2 OR v.number < $3) ORDER BY v.number DESC LIMIT $4`, c.ID, more, after, size+1)
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(v definition.Version) any { return v.Number })
}

// VersionInForce gives the version in force for a lot's track at a moment; the zero moment is now, by the database's
// clock. Where lots are not tracks, the lot does not matter.
func (s *Store) VersionInForce(ctx context.Context, a Actor, chart, lot string, at time.Time) (v definition.Version, err error) {
	defer wrap(ctx, &err, "VersionInForce")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		of, err := trackLot(ctx, tx, c, lot)
		if err != nil {
			return err
		}
		moment := at
		if moment.IsZero() {
			if moment, err = clock(ctx, tx); err != nil {
				return err
			}
		}
		tl, err := s.timeline(ctx, tx, c)
		if err != nil {
			return err
		}
		number := numberOf(tl.forTrack(of).InForce(moment))
		if number == 0 {
			return definition.Refuse(definition.NoVersionInForce, "no version is in force for %s at %s", trackName(chart, of), moment.UTC().Format(time.RFC3339))
		}
		v, err = s.readVersion(ctx, tx, c, number)
		return err
	})
	return v, err
}

// trackLot gives the lot of the track a lot belongs to: none where lots are not tracks.
func trackLot(ctx context.Context, q querier, c *chartRow, lot string) (string, error) {
	if !c.LotsAreTracks || lot == "" {
		return "", nil
	}
	tracks, err := readTracks(ctx, q, c, `chart_id = $1 AND lot = $2`, c.ID, lot)
	if err == nil && len(tracks) == 0 {
		err = noLot(c.Name, lot)
	}
	return lot, err
}

func trackName(chart, lot string) string {
	if lot == "" {
		return fmt.Sprintf("chart %q", chart)
	}
	return fmt.Sprintf("chart %q, lot %q", chart, lot)
}

// CountProposals counts the versions of a chart, of the lot or of all lots, that were proposed within the latest period.
func (s *Store) CountProposals(ctx context.Context, a Actor, chart, lot string, period time.Duration) (n int, err error) {
	defer wrap(ctx, &err, "CountProposals")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		now, err := clock(ctx, tx)
		if err != nil {
			return err
		}
		return tx.QueryRow(ctx, `SELECT count(*) FROM versions WHERE chart_id = $1 AND (lot = $2 OR lot = '' OR $2 = '') AND recorded_at > $3`,
			c.ID, lot, now.Add(-period)).Scan(&n)
	})
	return n, err
}
