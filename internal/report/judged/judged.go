// Package judged lets the judge look at the results of a file.
//
// Run judges a table row by row, or as whole segments where that is possible and nobody asks about single rows; both
// give the same hits. Rows are indices in the table; what a reader calls the row is its line in the file, see
// resultfile.Table.Line.
//
// Hits of one rule, trace and side at consecutive points of a segment are one signal (an episode). A result that is no
// point, because it is missing or not judged, neither ends a signal nor lengthens it.
package judged

import (
	"context"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/resultfile"
	"limitary/internal/rules"
)

// Hit is one rule completing at one row.
type Hit struct {
	Row  int
	Role chart.Role
	// Rule is the index in the trace's rules.
	Rule int
	Side rules.Side
	// WindowFirst is the row where the examined window begins, FirstCounting the first that counts towards the pattern.
	WindowFirst, FirstCounting int
	// Statistic is the value plotted at Row, rounded as it was judged.
	Statistic float64
	// place numbers the point within its trace and segment.
	place, segment int
}

// Signal is one episode: Hits hits from FirstHit to LastHit, the pattern of which begins at FirstCounting.
type Signal struct {
	Role                             chart.Role
	Rule                             int
	Side                             rules.Side
	FirstCounting, FirstHit, LastHit int
	Hits                             int
}

// Outcome is what the judge said of the rows.
type Outcome struct {
	Judge *judge.Judge
	// First is the first row that is reported; those before it are context.
	First, Rows int
	Hits        []Hit
	Signals     []Signal
	// Standings counts the reported rows by standing, Reasons those not judged by reason; ByBound those that a bound
	// decides.
	Standings [judge.StopAt + 1]int
	Reasons   [judge.NoScale + 1]int
	ByBound   int
}

// Spec gives the rule of a trace.
func (o *Outcome) Spec(role chart.Role, rule int) rules.Spec {
	return o.Judge.Plan(role).Specs()[rule]
}

// Worst is the worst standing of the reported rows; NotJudged where none was judged.
func (o *Outcome) Worst() judge.Standing {
	for s := judge.StopAt; s > judge.NotJudged; s-- {
		if o.Standings[s] > 0 {
			return s
		}
	}
	return judge.NotJudged
}

// Run judges rows that were checked. Rows before first are context: they count and are not
// reported. Each, if set, is called for every row with its verdict, context included; the verdict is reused.
func Run(ctx context.Context, j *judge.Judge, rows *Rows, first int, each func(row int, v *judge.Verdict)) (*Outcome, error) {
	o := &Outcome{Judge: j, First: first, Rows: rows.Table.Len()}
	values, single := rows.Table.Series()
	var err error
	if each == nil && single && wholeSegments(j) {
		err = o.segments(ctx, rows.Table, values)
	} else {
		err = o.walk(ctx, rows, each)
	}
	o.signals()
	return o, err
}

// wholeSegments reports whether every single value is a point of the location trace, so that nothing needs to be known of
// the rows one by one. On another scale a value may have no place and is then not judged.
func wholeSegments(j *judge.Judge) bool {
	l := j.Limits()
	return (l.Kind == chart.Given || l.Kind == chart.Individuals) && j.Plan(chart.Location) != nil &&
		l.Model.Transform.Kind == chart.Identity && len(l.Model.Levels) == 0
}

// segments judges whole segments of single values.
func (o *Outcome) segments(ctx context.Context, t *resultfile.Table, values []float64) error {
	worst := judge.NotJudged
	for from := 0; from < len(values); {
		if err := ctx.Err(); err != nil {
			return err
		}
		to := from + 1
		for to < len(values) && !t.Break(to) {
			to++
		}
		hits := o.Judge.Series(values[from:to])
		for k, h := range hits {
			row := from + h.Point
			if row < o.First {
				continue
			}
			o.Hits = append(o.Hits, Hit{Row: row, Role: h.Role, Rule: h.Rule, Side: h.Side, WindowFirst: from + h.WindowFirst,
				FirstCounting: from + h.FirstCounting, Statistic: o.statistic(values, row, h.Role), place: row, segment: from})
			worst = max(worst, judge.StandingOf(o.Spec(h.Role, h.Rule).Consequence))
			if k == len(hits)-1 || hits[k+1].Point != h.Point {
				o.Standings[worst]++
				worst = judge.NotJudged
			}
		}
		from = to
	}
	clear := o.Rows - o.First
	for _, n := range o.Standings {
		clear -= n
	}
	o.Standings[judge.Clear] = clear
	return nil
}

// statistic gives the value plotted at a row of single values.
func (o *Outcome) statistic(values []float64, row int, role chart.Role) float64 {
	places := o.Judge.Limits().Places
	if role == chart.Location {
		return decimal.Mean(values[row:row+1], places)
	}
	return decimal.Difference(max(values[row], values[row-1]), min(values[row], values[row-1]), places)
}

// rowsBetweenLooks is how many rows are judged from one look at the context to the next.
const rowsBetweenLooks = 1 << 14

// walk judges row by row.
func (o *Outcome) walk(ctx context.Context, rows *Rows, each func(row int, v *judge.Verdict)) error {
	st, v := o.Judge.NewState(), judge.Verdict{}
	var places [chart.Roles][]int32 // the rows of the points of each trace: hits count back in them
	segment := 0
	for row := range rows.Table.Len() {
		if row%rowsBetweenLooks == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		pt := rows.Point(row)
		if pt.Break {
			segment = row
		}
		o.Judge.Judge(st, pt, &v)
		for role, tv := range v.Traces {
			if tv.Point {
				places[role] = append(places[role], int32(row))
			}
		}
		if each != nil {
			each(row, &v)
		}
		if row < o.First {
			continue
		}
		o.count(&v)
		for _, h := range v.Hits {
			at := places[h.Role]
			last := len(at) - 1
			o.Hits = append(o.Hits, Hit{Row: row, Role: h.Role, Rule: h.Rule, Side: h.Side, WindowFirst: int(at[last-h.WindowBack]),
				FirstCounting: int(at[last-h.FirstBack]), Statistic: v.Traces[h.Role].Statistic, place: last, segment: segment})
		}
	}
	return nil
}

func (o *Outcome) count(v *judge.Verdict) {
	o.Standings[v.Standing]++
	if v.Standing == judge.NotJudged {
		o.Reasons[v.Reason]++
	}
	if v.ByBound {
		o.ByBound++
	}
}

// signals joins hits of one rule, trace and side at consecutive points of a segment.
func (o *Outcome) signals() {
	type watched struct {
		role chart.Role
		rule int
		side rules.Side
	}
	type latest struct{ index, place, segment int }
	open := map[watched]latest{}
	for _, h := range o.Hits {
		key := watched{h.Role, h.Rule, h.Side}
		before, ok := open[key]
		if ok && before.segment == h.segment && before.place == h.place-1 {
			s := &o.Signals[before.index]
			s.LastHit, s.Hits = h.Row, s.Hits+1
			open[key] = latest{before.index, h.place, h.segment}
			continue
		}
		open[key] = latest{len(o.Signals), h.place, h.segment}
		o.Signals = append(o.Signals, Signal{Role: h.Role, Rule: h.Rule, Side: h.Side,
			FirstCounting: h.FirstCounting, FirstHit: h.Row, LastHit: h.Row, Hits: 1})
	}
}
