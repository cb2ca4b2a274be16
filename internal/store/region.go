package store

import (
	"bytes"
	"context"
	"fmt"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// stir is what a transaction does to one track before judging: results that are new or have new content, results that
// left, and a stretch whose version changes.
type stir struct {
	// changed are new items and those with other content, in order.
	changed []*track.Item
	// gone are the ids of results whose stored place is not theirs any more.
	gone map[int64]bool
	// removed are the places and hits of results that left the track.
	removed []track.Removed
	// from and until bound a stretch to judge anew whatever is stored; nil for none. An until of allKeys is the end.
	from, until []byte
}

// allKeys lies above every order key.
var allKeys = []byte{0xff}

// effect is what judging one region found.
type effect struct {
	track   *trackRow
	judged  []*track.Judged
	changes []track.Change
	// orderNotKnown is set where results have equal times and nothing tells their order.
	orderNotKnown bool
}

// judgement is one transaction's judging of one track.
type judgement struct {
	ledger   *ledger
	chart    *chartRow
	track    *trackRow
	timeline track.Timeline
	entry    int64
	// isNew tells results that this transaction posts; nil where it posts none.
	isNew func(resultID int64) bool
	// known spares the first region two reads, where it starts at the first new place.
	known *neighbours
	// found, where set, is shown every judged item.
	found func(*track.Judged)
}

// judge judges what a stir touches, region by region, and takes what it finds into the ledger.
func (jd *judgement) judge(ctx context.Context, q querier, st stir) (TrackUpdate, error) {
	update := TrackUpdate{}
	for from := st.start(); from != nil; {
		e, err := jd.region(ctx, q, st, from)
		if err != nil {
			return update, err
		}
		if err := jd.take(ctx, q, e, &update); err != nil {
			return update, err
		}
		if from = st.pass(e); from != nil {
			// The next region reads what this one wrote.
			if err := jd.ledger.flush(ctx, q); err != nil {
				return update, err
			}
		}
	}
	jd.ledger.tracks = append(jd.ledger.tracks, jd.track)
	update.Track = jd.track.Track
	return update, nil
}

// pass drops what a region has dealt with and gives where the next one starts, nil for nowhere.
func (st *stir) pass(e *effect) []byte {
	st.from, st.until, st.removed = nil, nil, nil
	if n := len(e.judged); n > 0 {
		for len(st.changed) > 0 && bytes.Compare(st.changed[0].Key, e.judged[n-1].Item.Key) <= 0 {
			st.changed = st.changed[1:]
		}
	}
	return st.start()
}

// region judges one region from a place on.
func (jd *judgement) region(ctx context.Context, q querier, st stir, from []byte) (*effect, error) {
	before, stored, err := jd.around(ctx, q, from)
	if err != nil {
		return nil, err
	}
	earlier := earlierPoints(ctx, q, jd.track.ID, from)
	runner := track.NewRunner(jd.timeline, earlier)
	if before != nil {
		if err := runner.Resume(before.At, before.Stored.State); err != nil {
			return nil, err
		}
	}
	reg, err := track.JudgeRegion(runner, st.until, merged(stored, st.changed, st.gone))
	if err != nil {
		return nil, err
	}
	reg.Removed = st.removed
	return effectOf(ctx, q, jd.track, reg, earlier)
}

// around gives the place before a region and those from its start on.
func (jd *judgement) around(ctx context.Context, q querier, from []byte) (before *track.Item, stored func() (*track.Item, error), err error) {
	if known := jd.known; known != nil {
		jd.known = nil
		if !known.tail {
			stored = placesFrom(ctx, q, jd.track.ID, from)
		}
		return known.before, stored, nil
	}
	before, err = placeBefore(ctx, q, jd.track.ID, from)
	return before, placesFrom(ctx, q, jd.track.ID, from), err
}

// effectOf matches a region's hits with the stored episodes.
func effectOf(ctx context.Context, q querier, t *trackRow, reg *track.Region, earlier track.Earlier) (*effect, error) {
	e := &effect{track: t, judged: reg.Items}
	for i := 1; i < len(reg.Items); i++ {
		a, b := reg.Items[i-1].Item, reg.Items[i].Item
		if a.At.Equal(b.At) && (a.Stored == nil || b.Stored == nil) && positionless(a.Key) && positionless(b.Key) {
			e.orderNotKnown = true
		}
	}
	keys := reg.Keys()
	if len(keys) == 0 {
		return e, nil
	}
	stored, err := episodes(ctx, q, t.ID, keys, reg.From(), reg.To())
	if err != nil {
		return nil, err
	}
	e.changes, err = reg.Episodes(stored, func(role chart.Role) (track.Ref, error) {
		refs, err := earlier(role, 1)
		if err == nil && len(refs) == 0 {
			err = fmt.Errorf("store: track %d has no point before a region that continues a signal", t.ID)
		}
		if err != nil {
			return track.Ref{}, err
		}
		return refs[0], nil
	})
	return e, err
}

// start is the first place a stir touches, nil where it touches none.
func (st stir) start() []byte {
	from := st.from
	lower := func(key []byte) {
		if from == nil || bytes.Compare(key, from) < 0 {
			from = key
		}
	}
	for _, it := range st.changed {
		lower(it.Key)
		if it.Stored != nil {
			lower(it.Stored.Key)
		}
	}
	for _, r := range st.removed {
		lower(r.Key)
	}
	return from
}

// positionless reports whether the result of an order key has neither position nor replicate.
func positionless(key []byte) bool {
	end := bytes.IndexByte(key[8:], 0)
	return end >= 0 && bytes.Equal(key[8+end+1:8+end+9], make([]byte, 8))
}

// episodes reads the stored episodes of some keys that a region may touch: for each key the one that began last before
// it and all that begin in it.
func episodes(ctx context.Context, q querier, trackID int64, keys []track.EpisodeKey, from, to []byte) ([]*track.Episode, error) {
	traces, names, sides := make([]int16, len(keys)), make([]string, len(keys)), make([]int16, len(keys))
	for i, k := range keys {
		traces[i], names[i], sides[i] = int16(k.Role), k.Rule, int16(k.Side)
	}
	const columns = `s.signal_id, s.trace, s.rule, s.side, s.consequence, s.version, s.first_point_result, s.first_point,
		s.first_hit_result, s.first_hit, s.last_hit_result, s.last_hit, s.status = 'CLOSED' AS closed`
	rows, err := q.Query(ctx, `
		SELECT e.* FROM unnest($2::smallint[], $3::text[], $4::smallint[]) AS k (trace, rule, side)
		CROSS JOIN LATERAL (
			(SELECT `+columns+` FROM signals s
				WHERE s.track_id = $1 AND s.trace = k.trace AND s.rule = k.rule AND s.side = k.side
				AND s.status IN ('OPEN', 'CLOSED') AND s.first_hit < $5
				ORDER BY s.first_hit DESC LIMIT 1)
			UNION ALL
			(SELECT `+columns+` FROM signals s
				WHERE s.track_id = $1 AND s.trace = k.trace AND s.rule = k.rule AND s.side = k.side
				AND s.status IN ('OPEN', 'CLOSED') AND s.first_hit >= $5 AND s.first_hit <= $6)
		) e ORDER BY e.signal_id`, trackID, traces, names, sides, from, to)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (*track.Episode, error) {
		var e track.Episode
		var trace, side, consequence int16
		err := row.Scan(&e.ID, &trace, &e.Rule, &side, &consequence, &e.Version, &e.FirstPoint.ID, &e.FirstPoint.Key,
			&e.FirstHit.ID, &e.FirstHit.Key, &e.LastHit.ID, &e.LastHit.Key, &e.Closed)
		if err != nil {
			return nil, err
		}
		e.Role, e.Side, e.Consequence = chart.Role(trace), rules.Side(side), rules.Consequence(consequence)
		for _, ref := range []*track.Ref{&e.FirstPoint, &e.FirstHit, &e.LastHit} {
			ref.At = keyTime(ref.Key)
		}
		return &e, nil
	})
}
