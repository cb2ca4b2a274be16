package store

import (
	"context"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/track"
)

// verdictReader turns stored verdicts into what people read: lines from the version, and the natural keys of the results
// that hits refer to, which it looks up together at the end.
type verdictReader struct {
	store *Store
	q     querier
	// wanted are the keys to fill in, by chart and result id.
	wanted map[int64]map[int64][]*Key
	// versions seen so far, by chart and number.
	versions map[versionKey]*track.Version
}

type versionKey struct {
	chartID int64
	number  int
}

// know spares the look-up of versions that are at hand.
func (v *verdictReader) know(chartID int64, versions []*track.Version) {
	if v.versions == nil {
		v.versions = map[versionKey]*track.Version{}
	}
	for _, each := range versions {
		v.versions[versionKey{chartID, each.Number}] = each
	}
}

func (v *verdictReader) version(ctx context.Context, chartID int64, number int) (*track.Version, error) {
	if known := v.versions[versionKey{chartID, number}]; known != nil {
		return known, nil
	}
	version, err := v.store.version(ctx, v.q, chartID, number)
	if err == nil {
		v.know(chartID, []*track.Version{version})
	}
	return version, err
}

// stored fills into from a stored verdict.
func (v *verdictReader) stored(ctx context.Context, chartID int64, into *Verdict, version int, form []byte, recordedAt time.Time) error {
	o, err := track.Decode(form)
	if err != nil {
		return err
	}
	o.Version = version
	return v.outcome(ctx, chartID, into, o, recordedAt)
}

// outcome fills into from an outcome of the judge.
func (v *verdictReader) outcome(ctx context.Context, chartID int64, into *Verdict, o *track.Outcome, recordedAt time.Time) error {
	*into = Verdict{Standing: o.Standing, Reason: o.Reason, ByBound: o.ByBound, Version: o.Version, Judge: judgeNumber, RecordedAt: recordedAt}
	if o.Version != 0 {
		version, err := v.version(ctx, chartID, o.Version)
		if err != nil {
			return err
		}
		into.Instruction = version.Instructions.For(o.Standing)
		into.Traces, into.By = tracesOf(version.Compiled, o), version.Compiled
	}
	into.Hits = make([]Hit, len(o.Hits))
	for i, h := range o.Hits {
		into.Hits[i] = Hit{Role: h.Role, Rule: h.Rule, Side: h.Side, Consequence: h.Consequence}
		v.want(chartID, h.WindowFirst.ID, &into.Hits[i].WindowFirst)
		v.want(chartID, h.FirstCounting.ID, &into.Hits[i].FirstCounting)
	}
	return nil
}

func tracesOf(j *judge.Judge, o *track.Outcome) (traces [chart.Roles]TraceVerdict) {
	for role, t := range o.Traces {
		if t.Point {
			traces[role] = TraceVerdict{true, t.Statistic, t.Scale, j.Lines(chart.Role(role), t.Scale)}
		}
	}
	return traces
}

// want asks for the natural key of a result, to be filled in by resolve.
func (v *verdictReader) want(chartID, resultID int64, into *Key) {
	if v.wanted == nil {
		v.wanted = map[int64]map[int64][]*Key{}
	}
	if v.wanted[chartID] == nil {
		v.wanted[chartID] = map[int64][]*Key{}
	}
	into.ResultID = resultID
	v.wanted[chartID][resultID] = append(v.wanted[chartID][resultID], into)
}

// knows fills in a key that needs no look-up.
func (v *verdictReader) knows(chartID int64, k Key) {
	for _, into := range v.wanted[chartID][k.ResultID] {
		*into = k
	}
	delete(v.wanted[chartID], k.ResultID)
}

// resolve looks up the natural keys asked for.
func (v *verdictReader) resolve(ctx context.Context) error {
	for chartID, wanted := range v.wanted {
		if len(wanted) == 0 {
			continue
		}
		ids := make([]int64, 0, len(wanted))
		for id := range wanted {
			ids = append(ids, id)
		}
		rows, err := v.q.Query(ctx, `SELECT r.result_id, r.source, r.source_id, p.order_key
			FROM results r JOIN places p USING (chart_id, result_id)
			WHERE r.chart_id = $1 AND r.result_id = ANY($2)`, chartID, ids)
		if err != nil {
			return err
		}
		var k Key
		var order []byte
		_, err = pgx.ForEachRow(rows, []any{&k.ResultID, &k.Source, &k.SourceID, &order}, func() error {
			k.MeasuredAt = keyTime(order)
			v.knows(chartID, k)
			return nil
		})
		if err != nil {
			return err
		}
	}
	v.wanted = nil
	return nil
}
