package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// judgePosted judges the accepted rows, track by track in the order of their ids.
func (s *Store) judgePosted(ctx context.Context, conn *pgx.Conn, p *posting) error {
	p.now = p.now.UTC().Truncate(time.Microsecond)
	for _, t := range p.tracks {
		if after := t.LastRecordedAt.Add(time.Microsecond); p.now.Before(after) {
			p.now = after
		}
	}
	p.ledger = &ledger{now: p.now, principal: p.actor.Principal, results: make([]resultRow, 0, len(p.results)), places: make([]placeRow, 0, len(p.results))}
	p.outcomes, p.rowOf = map[int64]*track.Judged{}, map[int64]int{}
	trackIDs, _ := p.lockOrder()
	for _, id := range trackIDs {
		t := p.tracks[id]
		c := p.charts[t.Chart]
		if len(c.accepted[id]) == 0 {
			continue
		}
		if c.timeline == nil {
			var err error
			if c.timeline, err = s.timeline(ctx, conn, &c.chartRow); err != nil {
				return err
			}
		}
		if err := p.judgeTrack(ctx, conn, c, t); err != nil {
			return err
		}
	}
	return nil
}

func (p *posting) judgeTrack(ctx context.Context, conn *pgx.Conn, c *postChart, t *postTrack) error {
	items, err := p.items(c, t)
	if err != nil {
		return err
	}
	jd := &judgement{ledger: p.ledger, chart: &c.chartRow, track: &t.trackRow, timeline: c.timeline.forTrack(t.Lot), entry: c.head.entry + 1,
		isNew: func(id int64) bool { _, posted := p.rowOf[id]; return posted },
		found: func(j *track.Judged) { p.outcomes[j.Item.ID] = j }}
	if bytes.Equal(items[0].Key, t.lowest) {
		jd.known = &neighbours{t.before, t.tail}
	}
	update, err := jd.judge(ctx, conn, stir{changed: items})
	if err != nil {
		return err
	}
	p.updates = append(p.updates, update)
	for _, i := range c.accepted[t.ID] {
		j := p.outcomes[p.ids[i]]
		content, digest := encodeContent(&p.results[i])
		p.ledger.results = append(p.ledger.results, resultRow{c.ID, p.ids[i], t.ID, &p.results[i], content, digest, j.Verdict, j.Version, c.head.entry + 1})
	}
	return nil
}

// items makes the accepted rows of a track items in their order.
func (p *posting) items(c *postChart, t *postTrack) ([]*track.Item, error) {
	var items []*track.Item
	for _, i := range c.accepted[t.ID] {
		r := &p.results[i]
		pt, err := r.Point(c.Chart)
		if err != nil {
			return nil, err
		}
		p.rowOf[p.ids[i]] = i
		items = append(items, &track.Item{Ref: track.Ref{ID: p.ids[i], Key: r.OrderKey(), At: r.MeasuredAt}, Revision: 1,
			Point: pt, Repeat: r.Role == definition.Repeat, Force: true})
	}
	slices.SortFunc(items, func(a, b *track.Item) int { return bytes.Compare(a.Key, b.Key) })
	return items, nil
}

// postedRows is what a post's audit entry says.
type postedRows struct {
	Results int `json:"results"`
	// Rows is the digest of the result rows that carry the entry, see digestRows.
	Rows string `json:"rows"`
}

// seal adds the audit entries of the post, one a chart, and the new heads of their chains.
func (p *posting) seal(b *pgx.Batch) {
	byChart := map[int64][]*resultRow{}
	for i := range p.ledger.results {
		r := &p.ledger.results[i]
		byChart[r.chartID] = append(byChart[r.chartID], r)
	}
	var chains, entries []int64
	var payloads, previous, hashes [][]byte
	for _, c := range p.charts {
		rows := byChart[c.ID]
		if len(rows) == 0 {
			continue
		}
		entry := c.head.entry + 1
		payload, err := json.Marshal(auditPayload{c.ID, entry, "POST_RESULTS", p.actor.Principal, p.now, postedRows{len(rows), digestRows(rows)}})
		if err != nil {
			panic(err)
		}
		chains, entries, payloads = append(chains, c.ID), append(entries, entry), append(payloads, payload)
		previous, hashes = append(previous, c.head.hash), append(hashes, auditHash(c.head.hash, payload))
	}
	b.Queue(`WITH u AS (SELECT * FROM unnest($1::bigint[], $2::bigint[], $3::bytea[], $4::bytea[], $5::bytea[]) AS u (chain_id, entry, payload, previous, hash)),
		moved AS (UPDATE chain_heads h SET entry = u.entry, hash = u.hash FROM u WHERE h.chain_id = u.chain_id)
		INSERT INTO audit (chain_id, entry, kind, principal, payload, previous, hash, recorded_at)
		SELECT u.chain_id, u.entry, 'POST_RESULTS', $6, u.payload, u.previous, u.hash, $7 FROM u`,
		chains, entries, payloads, previous, hashes, p.actor.Principal, p.now)
}

// digestRows gives the digest of result rows as written: id, content digest, version and verdict of each, by id.
func digestRows(rows []*resultRow) string {
	slices.SortFunc(rows, func(a, b *resultRow) int { return int(a.resultID - b.resultID) })
	h := sha256.New()
	for _, r := range rows {
		var fixed [16]byte
		binary.BigEndian.PutUint64(fixed[:], uint64(r.resultID))
		binary.BigEndian.PutUint64(fixed[8:], uint64(r.version))
		h.Write(fixed[:])
		h.Write(r.digest)
		h.Write(r.verdict)
	}
	return hex.EncodeToString(h.Sum(nil))
}

// answer fills in verdicts, track states and what is stored.
func (s *Store) answer(ctx context.Context, conn *pgx.Conn, p *posting) error {
	v := &verdictReader{store: s, q: conn}
	for _, c := range p.charts {
		if c.timeline != nil {
			v.know(c.ID, c.timeline.versions)
		}
	}
	for i := range p.rows {
		row := &p.rows[i]
		if row.Outcome == Refused || row.Outcome == NotStored {
			continue
		}
		c := p.charts[p.results[i].Chart]
		if t := p.trackOf(i); t != nil {
			row.TrackState, row.HasTrack = t.State(), true
		}
		if row.Outcome == Accepted {
			if err := v.outcome(ctx, c.ID, &row.First, &p.outcomes[p.ids[i]].Outcome, p.now); err != nil {
				return err
			}
			continue
		}
		if err := s.answerStored(ctx, v, p, c, i); err != nil {
			return err
		}
	}
	for id, i := range p.rowOf {
		r := &p.results[i]
		v.knows(p.charts[r.Chart].ID, Key{id, r.Source, r.SourceID, r.MeasuredAt})
	}
	if err := v.resolve(ctx); err != nil {
		return err
	}
	for i := range p.rows {
		if p.rows[i].Outcome == Accepted {
			p.rows[i].Current = p.rows[i].First
		}
	}
	return nil
}

// answerStored answers a duplicate or a conflict. A row that repeats an earlier one of the same post has no stored row;
// it gets that one's verdict once it is known.
func (s *Store) answerStored(ctx context.Context, v *verdictReader, p *posting, c *postChart, i int) error {
	row, st := &p.rows[i], p.stored[i]
	if st == nil {
		j, twin := p.twins[i]
		judged := p.outcomes[p.ids[j]]
		if !twin || judged == nil {
			return nil // of a post that is not stored
		}
		if err := v.outcome(ctx, c.ID, &row.First, &judged.Outcome, p.now); err != nil {
			return err
		}
		return v.outcome(ctx, c.ID, &row.Current, &judged.Outcome, p.now)
	}
	if row.Outcome == Conflict {
		var err error
		if row.Stored, err = decodeContent(st.content); err != nil {
			return err
		}
	} else if err := v.stored(ctx, c.ID, &row.First, st.firstVersion, st.firstVerdict, st.recordedAt); err != nil {
		return err
	}
	return v.stored(ctx, c.ID, &row.Current, st.version, st.verdict, st.currentRecorded)
}
