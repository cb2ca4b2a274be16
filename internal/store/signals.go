package store

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/rules"
)

// SignalFilter selects signals; zero fields select all.
type SignalFilter struct {
	Chart, Lot, Rule string
	// Labels that the chart must have.
	Labels      map[string]string
	Consequence rules.Consequence
	// Statuses are OPEN, CLOSED, MERGED and RETRACTED.
	Statuses []string
	// Occurrence the signals belong to.
	Occurrence int64
	// The last hit was measured in [From, To).
	From, To            time.Time
	ChangedAfterClosing bool
}

const signalColumns = `s.signal_id, s.chart_id, c.name, t.lot, s.trace, s.rule, s.side, s.consequence, s.version, s.status, s.occurrence,
	s.first_point_result, s.first_point, s.first_hit_result, s.first_hit, s.last_hit_result, s.last_hit, coalesce(s.merged_into, 0),
	s.changed_after_closing, s.opened_at, s.closed_at, coalesce(s.closed_by, ''), s.decision, s.cause`

const signalTables = `signals s JOIN charts c USING (chart_id) JOIN tracks t USING (track_id)`

// signalRead is a signal with what its description is looked up by.
type signalRead struct {
	Signal
	chartID int64
}

func scanSignal(row pgx.CollectableRow) (r signalRead, err error) {
	var trace, side, consequence int16
	var closed nullableTime
	var firstPoint, firstHit, lastHit []byte
	err = row.Scan(&r.ID, &r.chartID, &r.Chart, &r.Lot, &trace, &r.Rule, &side, &consequence, &r.Version, &r.Status, &r.Occurrence,
		&r.FirstPoint.ResultID, &firstPoint, &r.FirstHit.ResultID, &firstHit, &r.LastHit.ResultID, &lastHit, &r.MergedInto,
		&r.ChangedAfterClosing, &r.OpenedAt, &closed, &r.ClosedBy, &r.Decision, &r.Cause)
	if err != nil {
		return r, err
	}
	r.Role, r.Side, r.Consequence = chart.Role(trace), rules.Side(side), rules.Consequence(consequence)
	r.OpenedAt, r.ClosedAt = r.OpenedAt.UTC(), closed.time()
	for key, order := range map[*Key][]byte{&r.FirstPoint: firstPoint, &r.FirstHit: firstHit, &r.LastHit: lastHit} {
		if err := key.readOrder(order); err != nil {
			return r, err
		}
	}
	return r, nil
}

// readOrder fills a key from the order key of its result, see definition.Result.OrderKey.
func (k *Key) readOrder(order []byte) error {
	bad := errors.New("store: stored order key has an unknown form")
	if len(order) < 8 {
		return bad
	}
	k.MeasuredAt = time.UnixMicro(int64(binary.BigEndian.Uint64(order) ^ 1<<63)).UTC()
	_, rest, ok := bytes.Cut(order[8:], []byte{0}) // the run id ends here
	if !ok || len(rest) < 8 {
		return bad
	}
	source, id, ok := bytes.Cut(rest[8:], []byte{0}) // position and replicate are four bytes each
	if !ok {
		return bad
	}
	k.Source, k.SourceID = string(source), string(id)
	return nil
}

// readSignals reads signals and describes the rule of each as its version has it.
func (s *Store) readSignals(ctx context.Context, q querier, condition string, args ...any) ([]Signal, error) {
	rows, err := q.Query(ctx, `SELECT `+signalColumns+` FROM `+signalTables+` WHERE `+condition, args...)
	if err != nil {
		return nil, err
	}
	read, err := pgx.CollectRows(rows, scanSignal)
	if err != nil {
		return nil, err
	}
	list := make([]Signal, len(read))
	described := map[string]string{}
	for i, r := range read {
		key := fmt.Sprint(r.chartID, r.Version, r.Role, r.Rule)
		if _, known := described[key]; !known {
			v, err := s.version(ctx, q, r.chartID, r.Version)
			if err != nil {
				return nil, err
			}
			if plan := v.Compiled.Plan(r.Role); plan != nil {
				if at := slices.IndexFunc(plan.Specs(), func(spec rules.Spec) bool { return spec.ID == r.Rule }); at >= 0 {
					described[key] = plan.Specs()[at].Describe()
				}
			}
		}
		list[i] = r.Signal
		list[i].Description = described[key]
	}
	return list, nil
}

// conditions collects parts of a WHERE clause and their parameters. Parts are constants; what comes from outside travels
// as a parameter only.
type conditions struct {
	parts []string
	args  []any
}

// add adds a part, in which every "$?" stands for the next parameter.
func (c *conditions) add(part string, args ...any) {
	for _, arg := range args {
		c.args = append(c.args, arg)
		part = strings.Replace(part, "$?", fmt.Sprintf("$%d", len(c.args)), 1)
	}
	c.parts = append(c.parts, part)
}

func (c *conditions) where() string { return strings.Join(c.parts, " AND ") }

var signalStatuses = []string{"OPEN", "CLOSED", "MERGED", "RETRACTED"}

func (f SignalFilter) check() error {
	for i, status := range f.Statuses {
		if !slices.Contains(signalStatuses, status) {
			return definition.Invalid(fmt.Sprintf("statuses[%d]", i), "%q: want OPEN, CLOSED, MERGED or RETRACTED", status)
		}
	}
	if f.Consequence > rules.Stop {
		return definition.Invalid("consequence", "%d: want LOOK, ACT or STOP", f.Consequence)
	}
	if !f.From.IsZero() && !f.To.IsZero() && !f.From.Before(f.To) {
		return definition.Invalid("to", "%s is not after from, %s", f.To.Format(time.RFC3339), f.From.Format(time.RFC3339))
	}
	return nil
}

// conditions writes the filter as SQL; the id is that of the chart it names. A query for open signals alone says so in the words of the partial index.
func (f SignalFilter) conditions(a Actor, chartID int64) *conditions {
	c := &conditions{}
	if scope := a.scope(); len(scope) > 0 {
		c.add(`c.labels @> $?`, scope)
	}
	if len(f.Labels) > 0 {
		c.add(`c.labels @> $?`, f.Labels)
	}
	if f.Chart != "" {
		c.add(`s.chart_id = $?`, chartID)
	}
	if f.Lot != "" {
		c.add(`t.lot = $?`, f.Lot)
	}
	if f.Rule != "" {
		c.add(`s.rule = $?`, f.Rule)
	}
	if f.Consequence != 0 {
		c.add(`s.consequence = $?`, int16(f.Consequence))
	}
	if f.Occurrence != 0 {
		c.add(`s.occurrence = $?`, f.Occurrence)
	}
	if !f.From.IsZero() {
		c.add(`s.last_hit_at >= $?`, f.From)
	}
	if !f.To.IsZero() {
		c.add(`s.last_hit_at < $?`, f.To)
	}
	if f.ChangedAfterClosing {
		c.add(`s.changed_after_closing`)
	}
	switch {
	case len(f.Statuses) == 1 && f.Statuses[0] == "OPEN":
		c.add(`s.status = 'OPEN'`)
	case len(f.Statuses) > 0:
		c.add(`s.status = ANY($?)`, f.Statuses)
	}
	return c
}

// signalsOrder is the order of a list of signals: the latest hit first.
const signalsOrder = ` ORDER BY s.last_hit_at DESC, s.signal_id DESC`

// QuerySignals finds signals, the latest hit first. A signal that gets another last hit between two pages moves in the
// list, and may then be missed or come again.
func (s *Store) QuerySignals(ctx context.Context, a Actor, f SignalFilter, p Page) (list []Signal, next string, err error) {
	defer wrap(ctx, &err, "QuerySignals")
	if err := f.check(); err != nil {
		return nil, "", err
	}
	filter := []any{"signals", a.scope(), f}
	var after struct {
		At time.Time
		ID int64
	}
	size, more, err := p.open(filter, &after)
	if err != nil {
		return nil, "", err
	}
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		var chartID int64
		if f.Chart != "" {
			of, err := chartByName(ctx, tx, a, f.Chart)
			if err != nil {
				return err
			}
			chartID = of.ID
		}
		c := f.conditions(a, chartID)
		if more {
			c.add(`(s.last_hit_at, s.signal_id) < ($?, $?)`, after.At, after.ID)
		}
		c.add(`true`+signalsOrder+` LIMIT $?`, size+1)
		list, err = s.readSignals(ctx, tx, c.where(), c.args...)
		return err
	})
	if err != nil {
		return nil, "", err
	}
	return cut(list, size, filter, func(sig Signal) any { return map[string]any{"At": sig.LastHit.MeasuredAt, "ID": sig.ID} })
}

func noSignal(id int64) *definition.Error {
	return &definition.Error{Reason: definition.NotFound, Field: "signal", Text: fmt.Sprintf("there is no signal %d", id)}
}

// GetSignal gives a signal with everything that happened to it and all notes, oldest first.
func (s *Store) GetSignal(ctx context.Context, a Actor, id int64) (sig Signal, events []SignalEvent, notes []Note, err error) {
	defer wrap(ctx, &err, "GetSignal")
	err = s.read(ctx, func(ctx context.Context, tx pgx.Tx) error {
		list, err := s.readSignals(ctx, tx, `s.signal_id = $1 AND c.labels @> $2`, id, a.scope())
		if err != nil {
			return err
		}
		if len(list) == 0 {
			return noSignal(id)
		}
		sig = list[0]
		if events, err = s.signalEvents(ctx, tx, id); err != nil {
			return err
		}
		notes, err = signalNotes(ctx, tx, id)
		return err
	})
	return sig, events, notes, err
}

func (s *Store) signalEvents(ctx context.Context, q querier, id int64) ([]SignalEvent, error) {
	rows, err := q.Query(ctx, `SELECT e.chart_id, e.change, e.status, e.version, e.first_point_result, e.first_hit_result, e.last_hit_result,
			coalesce(e.merged_into, 0), e.principal, e.text, e.recorded_at
		FROM signal_events e JOIN signals s USING (chart_id, signal_id) WHERE s.signal_id = $1 ORDER BY e.entry, e.change <> 'OPENED', e.change`, id)
	if err != nil {
		return nil, err
	}
	var chartID int64
	list, err := pgx.CollectRows(rows, func(row pgx.CollectableRow) (*SignalEvent, error) {
		e := &SignalEvent{}
		err := row.Scan(&chartID, &e.Change, &e.Status, &e.Version, &e.FirstPoint.ResultID, &e.FirstHit.ResultID, &e.LastHit.ResultID,
			&e.MergedInto, &e.Principal, &e.Text, &e.RecordedAt)
		e.RecordedAt = e.RecordedAt.UTC()
		return e, err
	})
	if err != nil {
		return nil, err
	}
	keys := &verdictReader{store: s, q: q}
	for _, e := range list {
		for _, k := range []*Key{&e.FirstPoint, &e.FirstHit, &e.LastHit} {
			keys.want(chartID, k.ResultID, k)
		}
	}
	if err := keys.resolve(ctx); err != nil {
		return nil, err
	}
	events := make([]SignalEvent, len(list))
	for i, e := range list {
		events[i] = *e
	}
	return events, nil
}

func signalNotes(ctx context.Context, q querier, id int64) ([]Note, error) {
	rows, err := q.Query(ctx, `SELECT n.author, n.text, n.recorded_at FROM signal_notes n JOIN signals s USING (chart_id, signal_id)
		WHERE s.signal_id = $1 ORDER BY n.entry`, id)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, func(row pgx.CollectableRow) (n Note, err error) {
		err = row.Scan(&n.Author, &n.Text, &n.RecordedAt)
		n.RecordedAt = n.RecordedAt.UTC()
		return n, err
	})
}
