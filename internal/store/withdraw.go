package store

import (
	"context"
	"encoding/json"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// withdrawalCode is the reason code of a withdrawal asked for; a request for one gives a reason and no code.
const withdrawalCode = "WITHDRAWAL"

// WithdrawVersion takes an approved version out of force, for good; nothing is in force in its place until the next
// version begins. Stored results are touched by the rule of ApproveVersion. A withdrawal that touches some could take
// away every signal of the version, so it is a change for another principal to confirm, and so is any by the version's
// author; the version is then given as it still stands.
func (s *Store) WithdrawVersion(ctx context.Context, a Actor, req Request, chart string, number int, rejudge bool, reason string) (made definition.Version, rejudged int, ch *Change, err error) {
	defer wrap(ctx, &err, "WithdrawVersion")
	fail := func(err error) (definition.Version, int, *Change, error) { return definition.Version{}, 0, nil, err }
	if err := definition.CheckText("reason", reason, 0, definition.TextBytesMax); err != nil {
		return fail(err)
	}
	var id int64
	replayed := s.replayVersion(a, &made, &rejudged)
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (_ any, err error) {
		made, rejudged, id, err = s.withdraw(ctx, w, chart, number, rejudge, reason)
		return versionAnswer{chart, number, rejudged, id}, err
	}, func(ctx context.Context, tx pgx.Tx, answer []byte) error {
		var earlier versionAnswer
		if err := json.Unmarshal(answer, &earlier); err != nil {
			return err
		}
		id = earlier.Change
		return replayed(ctx, tx, answer)
	})
	if err != nil {
		return fail(err)
	}
	if id != 0 {
		if ch, err = s.readChange(ctx, s.pool, id); err != nil {
			return fail(err)
		}
	}
	return made, rejudged, ch, nil
}

func (s *Store) withdraw(ctx context.Context, w *work, chart string, number int, rejudge bool, reason string) (v definition.Version, rejudged int, change int64, err error) {
	c, tracks, err := w.openChart(ctx, chart)
	if err != nil {
		return v, 0, 0, err
	}
	if v, err = s.versionIn(ctx, w, c, number, definition.Approved); err != nil {
		return v, 0, 0, err
	}
	before, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return v, 0, 0, err
	}
	results, err := s.touches(ctx, w, c, tracks, before, before.withdrawn(number))
	if err != nil {
		return v, 0, 0, err
	}
	if results > 0 && (!rejudge || reason == "") {
		return v, 0, 0, retroactive(results)
	}
	if results > 0 || v.Author == w.actor.Principal {
		change, err = s.askWithdraw(ctx, w, c, tracks, before, v, reason)
		return v, 0, change, err
	}
	v, rejudged, err = s.decide(ctx, w, c, tracks, before, v, withdrawal(reason))
	return v, rejudged, 0, err
}

func withdrawal(reason string) decision {
	return decision{definition.Withdrawn, 2, "WITHDRAW_VERSION", reason, []string{}}
}

// askWithdraw records a withdrawal for another principal to confirm, with what it would do.
func (s *Store) askWithdraw(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, before *timeline, v definition.Version, reason string) (id int64, err error) {
	if err := definition.CheckText("reason", reason, 1, definition.TextBytesMax); err != nil {
		return 0, err
	}
	entry, err := w.entry(ctx, c.ID)
	if err != nil {
		return 0, err
	}
	updates, _, err := w.try(ctx, c, tracks, nothing, func(w *work, c *chartRow, tracks []*trackRow) ([]TrackUpdate, error) {
		tried := *c // the trial gives it a timeline that is rolled back
		return s.carryOutDecision(ctx, w, &tried, tracks, before, v, withdrawal(reason), entry)
	})
	if err != nil {
		return 0, err
	}
	verdicts, ended := effectOn(updates)
	if ended == nil {
		ended = []int64{}
	}
	const kind = "WITHDRAW_VERSION"
	err = w.tx.QueryRow(ctx, `INSERT INTO changes (chart_id, kind, version, reason_code, reason, author, verdicts_changed, signals_ended, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10) RETURNING change_id`,
		c.ID, kind, v.Number, withdrawalCode, reason, w.actor.Principal, verdicts, ended, w.now, entry).Scan(&id)
	if err != nil {
		return 0, err
	}
	return id, w.seal(ctx, c.ID, entry, "ASK_CHANGE", map[string]any{"change": id, "change_kind": kind, "version": v.Number, "digest": v.Digest, "reason": reason})
}

// applyWithdraw carries out a withdrawal that was asked for; the version is withdrawn by the one who confirms it, under
// the entry of the confirmation.
func (s *Store) applyWithdraw(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, p *pendingChange, entry int64) ([]TrackUpdate, error) {
	v, err := s.versionIn(ctx, w, c, *p.version, definition.Approved)
	if err != nil {
		return nil, err
	}
	before, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return nil, err
	}
	return s.carryOutDecision(ctx, w, c, tracks, before, v, withdrawal(p.reason), entry)
}
