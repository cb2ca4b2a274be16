package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
)

// markForm is a mark as a change keeps it until it is confirmed. Its names never change.
type markForm struct {
	Lot     string    `json:"lot"`
	At      time.Time `json:"at"`
	Text    string    `json:"text"`
	Break   bool      `json:"break"`
	Restart bool      `json:"restart"`
	Author  string    `json:"author"`
}

// markAnswer is what the repeat of a request about a mark finds again: a mark, or a change that asks for it.
type markAnswer struct {
	Chart  string `json:"chart"`
	Mark   int64  `json:"mark,omitempty"`
	Change int64  `json:"change,omitempty"`
}

const markColumns = `m.mark_id, m.lot, m.at, m.text, m.break, m.restart, m.author, m.recorded_at, v.mark_id IS NOT NULL`

const markTables = `marks m LEFT JOIN mark_voids v USING (chart_id, mark_id)`

func scanMark(chart string) pgx.RowToFunc[Mark] {
	return func(row pgx.CollectableRow) (Mark, error) {
		m := Mark{Chart: chart}
		err := row.Scan(&m.ID, &m.Lot, &m.At, &m.Text, &m.Break, &m.Restart, &m.Author, &m.RecordedAt, &m.Voided)
		m.At, m.RecordedAt = m.At.UTC(), m.RecordedAt.UTC()
		return m, err
	}
}

func markByID(ctx context.Context, q querier, c *chartRow, id int64) (*Mark, error) {
	rows, err := q.Query(ctx, `SELECT `+markColumns+` FROM `+markTables+` WHERE m.chart_id = $1 AND m.mark_id = $2`, c.ID, id)
	if err != nil {
		return nil, err
	}
	m, err := pgx.CollectExactlyOneRow(rows, scanMark(c.Name))
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, &definition.Error{Reason: definition.NotFound, Field: "mark", Text: fmt.Sprintf("chart %q has no mark %d", c.Name, id)}
	}
	return &m, err
}

// AddMark sets a mark on the time axis of a chart, or of one lot's track. A mark that neither breaks nor restarts takes
// effect at once, and so does one that leaves every earlier verdict and signal as it is. Any other becomes a change for
// another principal to confirm, which needs a reason code and a reason, and alters nothing until then.
func (s *Store) AddMark(ctx context.Context, a Actor, req Request, m Mark, reasonCode, reason string) (mark *Mark, asked *Change, err error) {
	defer wrap(ctx, &err, "AddMark")
	form := markForm{m.Lot, m.At.UTC().Truncate(time.Microsecond), m.Text, m.Break, m.Restart, a.Principal}
	if err := form.check(); err != nil {
		return nil, nil, err
	}
	answer := markAnswer{Chart: m.Chart}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		answer = markAnswer{Chart: m.Chart}
		c, tracks, err := w.openChart(ctx, m.Chart)
		if err != nil {
			return nil, err
		}
		if err := form.fits(c, tracks); err != nil {
			return nil, err
		}
		entry, err := w.entry(ctx, c.ID)
		if err != nil {
			return nil, err
		}
		updates, kept, err := w.try(ctx, c, tracks, leavesEarlier, func(w *work, c *chartRow, tracks []*trackRow) (updates []TrackUpdate, err error) {
			answer.Mark, updates, err = s.placeMark(ctx, w, c, tracks, form, "", entry)
			return updates, err
		})
		if err != nil {
			return nil, err
		}
		if kept {
			return answer, w.seal(ctx, c.ID, entry, "ADD_MARK", markSaid{answer.Mark, form})
		}
		content, err := json.Marshal(form)
		if err != nil {
			return nil, err
		}
		answer.Mark = 0
		answer.Change, err = s.askMark(ctx, w, c, entry, "ADD_MARK", nil, content, reasonCode, reason, updates)
		return answer, err
	}, replayMark(&answer))
	if err != nil {
		return nil, nil, err
	}
	return s.markOrChange(ctx, a, answer)
}

// markSaid is what the audit entry of a mark says.
type markSaid struct {
	ID int64 `json:"mark_id"`
	markForm
}

func (f markForm) check() error {
	if f.At.IsZero() {
		return definition.Invalid("mark.at", "is not set")
	}
	if f.At.Year() < 1900 || f.At.Year() > 9998 {
		return definition.Invalid("mark.at", "%s: want a year from 1900 to 9998", f.At.Format(time.RFC3339))
	}
	return definition.CheckText("mark.text", f.Text, 1, definition.TextBytesMax)
}

// fits reports a lot that the chart has no track for.
func (f markForm) fits(c *chartRow, tracks []*trackRow) error {
	if f.Lot == "" {
		return nil
	}
	if !c.LotsAreTracks {
		return definition.Invalid("mark.lot", "%q: the lots of chart %q are not tracks of their own", f.Lot, c.Name)
	}
	for _, t := range tracks {
		if t.Lot == f.Lot {
			return nil
		}
	}
	return noLot(c.Name, f.Lot)
}

// openChart locks a chart that is not archived, and its tracks.
func (w *work) openChart(ctx context.Context, name string) (*chartRow, []*trackRow, error) {
	c, tracks, err := w.chartAndTracks(ctx, name)
	if err == nil && c.Archived {
		err = archived(name)
	}
	return c, tracks, err
}

// leavesEarlier reports whether no verdict changed and every signal that was there is as it was.
func leavesEarlier(updates []TrackUpdate) bool {
	for _, u := range updates {
		if u.Rejudged > 0 {
			return false
		}
		for _, s := range u.Signals {
			if s.Change != "OPENED" {
				return false
			}
		}
	}
	return true
}

// askMark records the change for confirmation; a reason is needed now.
func (s *Store) askMark(ctx context.Context, w *work, c *chartRow, entry int64, kind string, markID *int64, content []byte,
	reasonCode, reason string, updates []TrackUpdate) (int64, error) {
	verdicts, _ := effectOn(updates)
	for _, field := range [][2]string{{"reason_code", reasonCode}, {"reason", reason}} {
		if field[1] == "" {
			return 0, definition.Invalid(field[0], "is empty, and the change would alter %d verdicts or their signals: another principal must confirm it, and needs to know why", verdicts)
		}
	}
	return s.ask(ctx, w, c, entry, asked{kind: kind, markID: markID, content: content, reasonCode: reasonCode, reason: reason}, updates)
}

// placeMark records a mark and judges anew what it touches.
func (s *Store) placeMark(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, f markForm, confirmedBy string, entry int64) (id int64, updates []TrackUpdate, err error) {
	before, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return 0, nil, err
	}
	err = w.tx.QueryRow(ctx, `INSERT INTO marks (chart_id, lot, at, text, break, restart, author, confirmed_by, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10) RETURNING mark_id`,
		c.ID, f.Lot, f.At, f.Text, f.Break, f.Restart, f.Author, orNull(confirmedBy), w.now, entry).Scan(&id)
	if err != nil {
		return 0, nil, err
	}
	if err := w.newTimeline(ctx, c); err != nil {
		return 0, nil, err
	}
	updates, err = s.rejudgeStretches(ctx, w, c, tracks, before, entry)
	return id, updates, err
}

// applyMark carries out a confirmed change of kind ADD_MARK, whose content is given.
func (s *Store) applyMark(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, content []byte, confirmedBy string, entry int64) ([]TrackUpdate, error) {
	var f markForm
	if err := json.Unmarshal(content, &f); err != nil {
		return nil, fmt.Errorf("store: stored mark: %w", err)
	}
	_, updates, err := s.placeMark(ctx, w, c, tracks, f, confirmedBy, entry)
	return updates, err
}

// VoidMark takes a mark back, by the rule of AddMark.
func (s *Store) VoidMark(ctx context.Context, a Actor, req Request, chart string, id int64, reasonCode, reason string) (mark *Mark, asked *Change, err error) {
	defer wrap(ctx, &err, "VoidMark")
	if err := definition.CheckText("reason", reason, 0, definition.TextBytesMax); err != nil {
		return nil, nil, err
	}
	answer := markAnswer{Chart: chart}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		answer = markAnswer{Chart: chart}
		c, tracks, err := w.openChart(ctx, chart)
		if err != nil {
			return nil, err
		}
		entry, err := w.entry(ctx, c.ID)
		if err != nil {
			return nil, err
		}
		updates, kept, err := w.try(ctx, c, tracks, leavesEarlier, func(w *work, c *chartRow, tracks []*trackRow) ([]TrackUpdate, error) {
			return s.applyMarkVoid(ctx, w, c, tracks, id, a.Principal, "", reason, entry)
		})
		if err != nil {
			return nil, err
		}
		if kept {
			answer.Mark = id
			return answer, w.seal(ctx, c.ID, entry, "VOID_MARK", struct {
				ID     int64  `json:"mark_id"`
				Reason string `json:"reason"`
			}{id, reason})
		}
		answer.Change, err = s.askMark(ctx, w, c, entry, "VOID_MARK", &id, nil, reasonCode, reason, updates)
		return answer, err
	}, replayMark(&answer))
	if err != nil {
		return nil, nil, err
	}
	return s.markOrChange(ctx, a, answer)
}

// applyMarkVoid voids a mark and judges anew what it touched: at once, or as a confirmed change of kind VOID_MARK.
func (s *Store) applyMarkVoid(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, id int64, author, confirmedBy, reason string, entry int64) ([]TrackUpdate, error) {
	m, err := markByID(ctx, w.tx, c, id)
	if err != nil {
		return nil, err
	}
	if m.Voided {
		return nil, &definition.Error{Reason: definition.WrongState, Field: "mark", Text: fmt.Sprintf("mark %d is void already", id)}
	}
	before, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return nil, err
	}
	_, err = w.tx.Exec(ctx, `INSERT INTO mark_voids (chart_id, mark_id, author, confirmed_by, reason, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7)`, c.ID, id, author, orNull(confirmedBy), reason, w.now, entry)
	if err != nil {
		return nil, err
	}
	if err := w.newTimeline(ctx, c); err != nil {
		return nil, err
	}
	return s.rejudgeStretches(ctx, w, c, tracks, before, entry)
}

func replayMark(into *markAnswer) func(context.Context, pgx.Tx, []byte) error {
	return func(_ context.Context, _ pgx.Tx, answer []byte) error {
		*into = markAnswer{}
		return json.Unmarshal(answer, into)
	}
}

// markOrChange reads what a request about a mark led to.
func (s *Store) markOrChange(ctx context.Context, a Actor, answer markAnswer) (mark *Mark, asked *Change, err error) {
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, answer.Chart)
		if err != nil {
			return err
		}
		if answer.Change != 0 {
			asked, err = s.readChange(ctx, tx, answer.Change)
			return err
		}
		mark, err = markByID(ctx, tx, c, answer.Mark)
		return err
	})
	return mark, asked, err
}

// ListMarks gives the marks of a chart in the order of their moments.
func (s *Store) ListMarks(ctx context.Context, a Actor, chart string, p Page, includeVoided bool) (list []Mark, next string, err error) {
	defer wrap(ctx, &err, "ListMarks")
	filter := []any{"marks", chart, includeVoided}
	var after struct {
		At time.Time
		ID int64
	}
	size, more, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		c, err := chartByName(ctx, tx, a, chart)
		if err != nil {
			return err
		}
		rows, err := tx.Query(ctx, `SELECT `+markColumns+` FROM `+markTables+`
			WHERE m.chart_id = $1 AND (v.mark_id IS NULL OR $2) AND (NOT $3 OR (m.at, m.mark_id) > ($4, $5))
			ORDER BY m.at, m.mark_id LIMIT $6`, c.ID, includeVoided, more, after.At, after.ID, size+1)
		if err != nil {
			return err
		}
		list, err = pgx.CollectRows(rows, scanMark(c.Name))
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(m Mark) any { return map[string]any{"At": m.At, "ID": m.ID} })
}
