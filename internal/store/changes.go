package store

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"slices"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// currentResult is a result as it stands, read under its chart's locks.
type currentResult struct {
	id, trackID int64
	poster      string
	content     definition.Result
	revision    int
	voided      bool
	item        *track.Item
}

func (w *work) currentResult(ctx context.Context, c *chartRow, source, sourceID string) (*currentResult, error) {
	cur := &currentResult{}
	var content, point []byte
	var stored track.Stored
	err := w.tx.QueryRow(ctx, `SELECT r.result_id, p.track_id, r.poster, coalesce(v.content, r.content), p.revision, p.voided,
			p.order_key, p.version, p.point, p.verdict, p.state
		FROM results r JOIN places p USING (chart_id, result_id)
		LEFT JOIN result_revisions v ON v.chart_id = r.chart_id AND v.result_id = r.result_id AND v.revision = p.revision
		WHERE r.chart_id = $1 AND r.source = $2 AND r.source_id = $3`, c.ID, source, sourceID).
		Scan(&cur.id, &cur.trackID, &cur.poster, &content, &cur.revision, &cur.voided,
			&stored.Key, &stored.Version, &point, &stored.Verdict, &stored.State)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, noResult(c.Name, source, sourceID)
	}
	if err != nil {
		return nil, err
	}
	if cur.content, err = decodeContent(content); err != nil {
		return nil, err
	}
	pt, repeat, err := decodePoint(point)
	stored.Repeat = repeat
	cur.item = &track.Item{Ref: refOf(cur.id, stored.Key), Revision: cur.revision, Point: pt, Repeat: repeat, Voided: cur.voided, Stored: &stored}
	return cur, err
}

func noResult(chart, source, sourceID string) *definition.Error {
	return &definition.Error{Reason: definition.NotFound, Field: "source_id",
		Text: fmt.Sprintf("chart %q has no result %q of source %q", chart, sourceID, source)}
}

// own refuses a result of another principal's source.
func (cur *currentResult) own(a Actor) error {
	if cur.poster == a.Principal || slices.Contains(a.Key.Sources, cur.content.Source) {
		return nil
	}
	return &definition.Error{Reason: definition.SourceNotOwn, Field: "source",
		Text: fmt.Sprintf("the result was posted by %q; only that principal, or a key for source %q, may ask for a change of it", cur.poster, cur.content.Source)}
}

func (cur *currentResult) expect(revision int) error {
	if cur.revision != revision {
		return &definition.Error{Reason: definition.RevisionMismatch, Field: "expected_revision",
			Text: fmt.Sprintf("%d: the result is at revision %d", revision, cur.revision), Meta: map[string]string{"revision": fmt.Sprint(cur.revision)}}
	}
	if cur.voided {
		return definition.Refuse(definition.WrongState, "the result is voided, which is final")
	}
	return nil
}

// revise describes a new revision of a result.
type revise struct {
	content             definition.Result
	voided              bool
	author, confirmedBy string
	changeID            int64
	reasonCode, reason  string
}

// applyRevision gives a result a new revision and judges anew what it touches.
func (s *Store) applyRevision(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, cur *currentResult, r revise, entry int64) ([]TrackUpdate, error) {
	pt, err := r.content.Point(c.Chart)
	if err != nil {
		return nil, err
	}
	old := trackByID(tracks, cur.trackID)
	dest, err := s.destination(ctx, w, c, tracks, r.content, old)
	if err != nil {
		return nil, err
	}
	tl, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return nil, err
	}
	key := r.content.OrderKey()
	item := &track.Item{Ref: track.Ref{ID: cur.id, Key: key, At: r.content.MeasuredAt}, Revision: cur.revision + 1, Point: pt,
		Repeat: r.content.Role == definition.Repeat, Voided: r.voided, Stored: cur.item.Stored, Force: true}
	l := &ledger{now: w.now, principal: w.actor.Principal}
	content, digest := encodeContent(&r.content)
	l.revisions = []revisionRow{{c.ID, cur.id, dest.ID, item.Revision, r.content, content, digest, r.voided,
		r.author, r.confirmedBy, r.changeID, r.reasonCode, r.reason, entry}}
	gone := map[int64]bool{cur.id: true}
	stirOf := func(t *trackRow, st stir) (TrackUpdate, error) {
		jd := &judgement{ledger: l, chart: c, track: t, timeline: tl.forTrack(t.Lot), entry: entry}
		return jd.judge(ctx, w.tx, st)
	}
	var updates []TrackUpdate
	if dest != old {
		was, err := track.Decode(cur.item.Stored.Verdict)
		if err != nil {
			return nil, err
		}
		hits := was.Hits
		if cur.item.Repeat {
			hits = nil
		}
		item.Stored = nil
		l.deletes = append(l.deletes, placeKey{old.ID, cur.item.Key})
		old.Results--
		dest.Results++
		update, err := stirOf(old, stir{gone: gone, removed: []track.Removed{{Key: cur.item.Key, Hits: hits}}})
		if err != nil {
			return nil, err
		}
		updates = append(updates, update)
	}
	if r.voided {
		dest.Results--
	}
	st := stir{changed: []*track.Item{item}, gone: gone}
	if item.Stored != nil && !bytes.Equal(item.Key, item.Stored.Key) {
		// One region from the lower to the higher of both places: the episodes on the way are matched together.
		st.until = next(slices.MaxFunc([][]byte{item.Key, item.Stored.Key}, bytes.Compare))
	}
	update, err := stirOf(dest, st)
	if err != nil {
		return nil, err
	}
	return append(updates, update), l.flush(ctx, w.tx)
}

func trackByID(tracks []*trackRow, id int64) *trackRow {
	i := slices.IndexFunc(tracks, func(t *trackRow) bool { return t.ID == id })
	return tracks[i]
}

// destination gives the track a result's content belongs to. Moving to a lot without a track is refused: a lot is opened
// on purpose or by its own first result, not by a correction.
func (s *Store) destination(_ context.Context, _ *work, c *chartRow, tracks []*trackRow, r definition.Result, old *trackRow) (*trackRow, error) {
	if !c.LotsAreTracks {
		return old, nil
	}
	for _, t := range tracks {
		if t.Lot == r.Lot {
			return t, nil
		}
	}
	return nil, definition.Invalid("lot", "%q: chart %q has no track for this lot; start the lot first", r.Lot, c.Name)
}

// effectOn sums up what a change would do to verdicts and signals.
func effectOn(updates []TrackUpdate) (verdicts int, ended []int64) {
	for _, u := range updates {
		verdicts += u.Rejudged
		for _, s := range u.Signals {
			if s.Change == "RETRACTED" || s.Change == "MERGED" {
				ended = append(ended, s.SignalID)
			}
		}
	}
	return verdicts, ended
}

// try runs apply on copies of the chart and its tracks in a savepoint, and keeps what it did only where keep says so.
func (w *work) try(ctx context.Context, c *chartRow, tracks []*trackRow, keep func([]TrackUpdate) bool,
	apply func(*work, *chartRow, []*trackRow) ([]TrackUpdate, error)) (updates []TrackUpdate, kept bool, err error) {
	err = w.inSavepoint(ctx, func(inner *work) (bool, error) {
		chart := *c
		copies := make([]*trackRow, len(tracks))
		for i, t := range tracks {
			row := *t
			copies[i] = &row
		}
		updates, err = apply(inner, &chart, copies)
		kept = err == nil && keep(updates)
		return kept, err
	})
	return updates, kept, err
}

// nothing keeps nothing: the change is tried only to see what it would do.
func nothing([]TrackUpdate) bool { return false }

// changeAnswer is what a repeated request finds again.
type changeAnswer struct {
	ChangeID int64 `json:"change,omitempty"`
}

// AmendResult replaces the content of a result. What the judge does not see takes effect at once and gives the result;
// anything else, of a result that was judged, is a change for another principal to confirm.
func (s *Store) AmendResult(ctx context.Context, a Actor, req Request, content definition.Result, expectedRevision int, reasonCode, reason string) (amended *StoredResult, ch *Change, err error) {
	defer wrap(ctx, &err, "AmendResult")
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		ch = nil
		c, tracks, err := w.chartAndTracks(ctx, content.Chart)
		if err != nil {
			return nil, err
		}
		cur, err := s.amendable(ctx, w, c, &content, expectedRevision)
		if err != nil {
			return nil, err
		}
		entry, err := w.entry(ctx, c.ID)
		if err != nil {
			return nil, err
		}
		r := revise{content: content, author: a.Principal, reasonCode: reasonCode, reason: reason}
		apply := func(w *work, c *chartRow, tracks []*trackRow) ([]TrackUpdate, error) {
			return s.applyRevision(ctx, w, c, tracks, cur, r, entry)
		}
		updates, kept, err := w.tryAmendment(ctx, c, tracks, cur, content, apply)
		if err != nil {
			return nil, err
		}
		if kept {
			return changeAnswer{}, w.seal(ctx, c.ID, entry, "AMEND_RESULT", revisionSaid{cur.id, cur.revision + 1, content.Digest(), 0})
		}
		form, _ := encodeContent(&content)
		id, err := s.ask(ctx, w, c, entry, asked{"AMEND_RESULT", &cur.id, nil, cur.revision, form, reasonCode, reason}, updates)
		if err != nil {
			return nil, err
		}
		ch = &Change{ID: id}
		return changeAnswer{id}, nil
	}, func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var ans changeAnswer
		if err := json.Unmarshal(answer, &ans); err != nil {
			return err
		}
		if ans.ChangeID != 0 {
			ch = &Change{ID: ans.ChangeID}
		}
		return nil
	})
	if err != nil {
		return nil, nil, err
	}
	if ch != nil {
		ch, err = s.readChange(ctx, s.pool, ch.ID)
		return nil, ch, err
	}
	res, _, err := s.GetResult(ctx, a, content.Chart, content.Source, content.SourceID)
	return &res, nil, err
}

// revisionSaid is what the audit entry of a new revision says.
type revisionSaid struct {
	Result   int64  `json:"result"`
	Revision int    `json:"revision"`
	Digest   []byte `json:"digest"`
	Change   int64  `json:"change,omitempty"`
}

// tryAmendment keeps an amendment that the judge cannot see, or one of a result that no version judged, where it leaves
// every verdict and signal as it was. Any other is only tried: one that changes place, readings, role or lot of a judged
// result may cut off a pattern on its way though it alters no verdict yet, and that is not for one person to do.
func (w *work) tryAmendment(ctx context.Context, c *chartRow, tracks []*trackRow, cur *currentResult, content definition.Result,
	apply func(*work, *chartRow, []*trackRow) ([]TrackUpdate, error)) (updates []TrackUpdate, kept bool, err error) {
	if content.JudgesAlike(cur.content, c.Chart) || cur.item.Stored.Version == 0 {
		return w.try(ctx, c, tracks, leavesEarlier, apply)
	}
	return w.try(ctx, c, tracks, nothing, apply)
}

// amendable reads the result to amend and checks that it may be, and that the new content is sound.
func (s *Store) amendable(ctx context.Context, w *work, c *chartRow, content *definition.Result, expectedRevision int) (*currentResult, error) {
	cur, err := w.currentResult(ctx, c, content.Source, content.SourceID)
	if err != nil {
		return nil, err
	}
	if err := cur.own(w.actor); err != nil {
		return nil, err
	}
	if err := cur.expect(expectedRevision); err != nil {
		return nil, err
	}
	if _, err := content.Prepare(c.Chart, w.now); err != nil {
		return nil, err
	}
	if content.SameContent(cur.content) {
		return nil, definition.Refuse(definition.NothingToDo, "the content is what is stored")
	}
	return cur, nil
}

// VoidResult asks for a result to be taken out of judgement. It is always for another principal to confirm.
func (s *Store) VoidResult(ctx context.Context, a Actor, req Request, chart, source, sourceID string, expectedRevision int, reasonCode, reason string) (ch *Change, err error) {
	defer wrap(ctx, &err, "VoidResult")
	var id int64
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, tracks, err := w.openChart(ctx, chart)
		if err != nil {
			return nil, err
		}
		cur, err := w.currentResult(ctx, c, source, sourceID)
		if err != nil {
			return nil, err
		}
		if err := cur.own(a); err != nil {
			return nil, err
		}
		if err := cur.expect(expectedRevision); err != nil {
			return nil, err
		}
		entry, err := w.entry(ctx, c.ID)
		if err != nil {
			return nil, err
		}
		// The trial names a second principal that does not exist, which the schema asks of a void.
		r := revise{content: cur.content, voided: true, author: a.Principal, confirmedBy: "trial of " + a.Principal, reasonCode: reasonCode, reason: reason}
		updates, _, err := w.try(ctx, c, tracks, nothing, func(w *work, c *chartRow, tracks []*trackRow) ([]TrackUpdate, error) {
			return s.applyRevision(ctx, w, c, tracks, cur, r, entry)
		})
		if err != nil {
			return nil, err
		}
		id, err = s.ask(ctx, w, c, entry, asked{"VOID_RESULT", &cur.id, nil, cur.revision, nil, reasonCode, reason}, updates)
		return changeAnswer{id}, err
	}, func(_ context.Context, _ pgx.Tx, answer []byte) error {
		var ans changeAnswer
		err := json.Unmarshal(answer, &ans)
		id = ans.ChangeID
		return err
	})
	if err != nil {
		return nil, err
	}
	return s.readChange(ctx, s.pool, id)
}

// asked is a change to record for confirmation.
type asked struct {
	kind               string
	resultID, markID   *int64
	revision           int
	content            []byte
	reasonCode, reason string
}

// ask records a change for another principal to confirm, with what it would do, and seals the entry.
func (s *Store) ask(ctx context.Context, w *work, c *chartRow, entry int64, ask asked, updates []TrackUpdate) (id int64, err error) {
	if err := definition.CheckText("reason_code", ask.reasonCode, 1, definition.NameBytesMax); err != nil {
		return 0, err
	}
	if err := definition.CheckText("reason", ask.reason, 1, definition.TextBytesMax); err != nil {
		return 0, err
	}
	verdicts, ended := effectOn(updates)
	if ended == nil {
		ended = []int64{}
	}
	err = w.tx.QueryRow(ctx, `INSERT INTO changes (chart_id, kind, result_id, mark_id, expected_revision, content, reason_code, reason, author,
			verdicts_changed, signals_ended, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13) RETURNING change_id`,
		c.ID, ask.kind, ask.resultID, ask.markID, ask.revision, ask.content, ask.reasonCode, ask.reason, w.actor.Principal,
		verdicts, ended, w.now, entry).Scan(&id)
	if err != nil {
		return 0, err
	}
	return id, w.seal(ctx, c.ID, entry, "ASK_CHANGE", map[string]any{"change": id, "change_kind": ask.kind, "result": ask.resultID, "mark": ask.markID,
		"content": ask.content, "reason_code": ask.reasonCode, "reason": ask.reason})
}
