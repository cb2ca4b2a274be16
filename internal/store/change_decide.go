package store

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// pendingChange is a change as it was asked for.
type pendingChange struct {
	chartID          int64
	chart            string
	kind, author     string
	resultID, markID *int64
	version          *int // the number, of a withdrawal
	revision         *int
	content          []byte
	reasonCode       string
	reason           string
	source, sourceID string
	signalsEnded     []int64
}

// DecideChange confirms or rejects a change that another principal asked for. A confirmed one takes effect now, on what
// is stored now: a result amended in the meantime refuses it.
//
// Ended are the signals the confirmer has read that it ends. A confirmation that would end others than these and those
// known when it was asked for is refused with all of them, so that nobody confirms what has grown since.
func (s *Store) DecideChange(ctx context.Context, a Actor, req Request, id int64, confirm bool, reason string, ended []int64) (ch Change, updates []TrackUpdate, err error) {
	defer wrap(ctx, &err, "DecideChange")
	if err := definition.CheckText("reason", reason, 0, definition.TextBytesMax); err != nil {
		return ch, nil, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		updates = nil
		pending, err := pendingByID(ctx, w.tx, id)
		if err != nil {
			return nil, err
		}
		c, tracks, err := w.chartAndTracks(ctx, pending.chart)
		if err != nil {
			return nil, unseenChange(err, id)
		}
		if err := w.mayDecide(ctx, id, pending, confirm); err != nil {
			return nil, err
		}
		if confirm && c.Archived {
			return nil, archived(c.Name)
		}
		entry, err := w.entry(ctx, c.ID)
		if err != nil {
			return nil, err
		}
		_, err = w.tx.Exec(ctx, `INSERT INTO change_decisions (change_id, author, confirmed, decided_by, reason, recorded_at, entry) VALUES ($1, $2, $3, $4, $5, $6, $7)`,
			id, pending.author, confirm, a.Principal, reason, w.now, entry)
		if err != nil {
			return nil, err
		}
		if confirm {
			if updates, err = s.carryOut(ctx, w, c, tracks, id, pending, entry); err != nil {
				return nil, err
			}
			if err := pending.endsOnly(updates, ended); err != nil {
				return nil, err
			}
		}
		return changeAnswer{id}, w.seal(ctx, c.ID, entry, "DECIDE_CHANGE", changeDecided{id, confirm, reason, updatesSaid(updates)})
	}, func(context.Context, pgx.Tx, []byte) error { return nil })
	if err != nil {
		return ch, nil, err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		decided, err := s.readChange(ctx, tx, id)
		if err != nil {
			return err
		}
		ch = *decided
		_, err = chartByName(ctx, tx, a, ch.Chart)
		return unseenChange(err, id)
	})
	if err != nil {
		return Change{}, nil, err
	}
	return ch, updates, nil
}

// changeDecided is what the audit entry of a decision says.
type changeDecided struct {
	Change    int64       `json:"change"`
	Confirmed bool        `json:"confirmed"`
	Reason    string      `json:"reason"`
	Tracks    []trackSaid `json:"tracks,omitempty"`
}

// trackSaid sums up what an entry did to a track.
type trackSaid struct {
	Track    int64          `json:"track"`
	Rejudged int            `json:"rejudged"`
	Signals  []SignalChange `json:"signals,omitempty"`
}

func updatesSaid(updates []TrackUpdate) (said []trackSaid) {
	for _, u := range updates {
		said = append(said, trackSaid{u.Track.ID, u.Rejudged, u.Signals})
	}
	return said
}

func pendingByID(ctx context.Context, q querier, id int64) (*pendingChange, error) {
	p := &pendingChange{}
	err := q.QueryRow(ctx, `SELECT h.chart_id, c.name, h.kind, h.author, h.result_id, h.mark_id, h.expected_revision, h.content, h.reason_code, h.reason,
			coalesce(r.source, ''), coalesce(r.source_id, ''), h.signals_ended, h.version
		FROM `+changeTables+` WHERE h.change_id = $1`, id).
		Scan(&p.chartID, &p.chart, &p.kind, &p.author, &p.resultID, &p.markID, &p.revision, &p.content, &p.reasonCode, &p.reason, &p.source, &p.sourceID, &p.signalsEnded, &p.version)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, noChange(id)
	}
	return p, err
}

func noChange(id int64) *definition.Error {
	return &definition.Error{Reason: definition.NotFound, Field: "change", Text: fmt.Sprintf("there is no change %d", id)}
}

// unseenChange answers a change on a chart out of the actor's sight as one that does not exist.
func unseenChange(err error, id int64) error {
	var refusal *definition.Error
	if errors.As(err, &refusal) && refusal.Reason == definition.NotFound {
		return noChange(id)
	}
	return err
}

// endsOnly refuses a change that ends signals which neither the one who asked nor the one who confirms knew of.
func (p *pendingChange) endsOnly(updates []TrackUpdate, read []int64) error {
	_, ended := effectOn(updates)
	var unread []int64
	for _, id := range ended {
		if !slices.Contains(p.signalsEnded, id) && !slices.Contains(read, id) {
			unread = append(unread, id)
		}
	}
	if len(unread) == 0 {
		return nil
	}
	return &definition.Error{Reason: definition.WrongState, Field: "signals_ended",
		Text: fmt.Sprintf("since it was asked for, the change has come to end signals %v too; look at them, and confirm with their ids", unread),
		Meta: map[string]string{"signals": strings.Trim(fmt.Sprint(unread), "[]")}}
}

// mayDecide checks, under the chart's lock, that the change is pending and, to confirm it, of another principal. Whoever
// asked may take it back.
func (w *work) mayDecide(ctx context.Context, id int64, p *pendingChange, confirm bool) error {
	if confirm && p.author == w.actor.Principal {
		return definition.Refuse(definition.SamePrincipal, "%q asked for the change and cannot decide on it", p.author)
	}
	var decided bool
	if err := w.tx.QueryRow(ctx, `SELECT EXISTS (SELECT FROM change_decisions WHERE change_id = $1)`, id).Scan(&decided); err != nil {
		return err
	}
	if decided {
		return definition.Refuse(definition.WrongState, "change %d has been decided on already", id)
	}
	return nil
}

// carryOut applies a confirmed change.
func (s *Store) carryOut(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, id int64, p *pendingChange, entry int64) ([]TrackUpdate, error) {
	switch p.kind {
	case "ADD_MARK":
		return s.applyMark(ctx, w, c, tracks, p.content, w.actor.Principal, entry)
	case "WITHDRAW_VERSION":
		return s.applyWithdraw(ctx, w, c, tracks, p, entry)
	case "VOID_MARK":
		return s.applyMarkVoid(ctx, w, c, tracks, *p.markID, p.author, w.actor.Principal, p.reason, entry)
	}
	cur, err := w.currentResult(ctx, c, p.source, p.sourceID)
	if err != nil {
		return nil, err
	}
	if err := cur.expect(*p.revision); err != nil {
		return nil, definition.Refuse(definition.WrongState, "the result is at revision %d, and the change was asked for at revision %d: reject it and ask anew", cur.revision, *p.revision)
	}
	r := revise{content: cur.content, voided: p.kind == "VOID_RESULT", author: p.author, confirmedBy: w.actor.Principal, changeID: id,
		reasonCode: p.reasonCode, reason: p.reason}
	if p.kind == "AMEND_RESULT" {
		if r.content, err = decodeContent(p.content); err != nil {
			return nil, err
		}
	}
	return s.applyRevision(ctx, w, c, tracks, cur, r, entry)
}
