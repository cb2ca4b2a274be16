package track_test

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/rules"
)

// dice gives a number from 0 to n-1: from a seeded generator in the tests of random schedules, from the input in the fuzz
// test.
type dice func(n int) int

func (d dice) oneIn(n int) bool { return d(n) == 0 }

func pick[T any](d dice, from ...T) T { return from[d(len(from))] }

const (
	// minutesMax bounds the time axis: so few that results, versions and marks often share a moment.
	minutesMax = 40
	// resultsMax bounds the numbers of results.
	resultsMax = 100
)

// drawer draws one schedule.
type drawer struct {
	dice
	*schedule
	// now is the minute the posts in order have come to, level what they scatter about, in halves of sigma.
	now, level int
	lots       []string
	posted     []int
	// restless schedules have many versions and marks.
	restless bool
}

func drawSchedule(d dice, opsMax int) *schedule {
	w := &drawer{dice: d, schedule: &schedule{}, lots: []string{""}, restless: d.oneIn(3)}
	w.kind = pick(d, chart.Individuals, chart.Individuals, chart.XbarR, chart.XbarS)
	if w.size = 1; w.kind != chart.Individuals {
		w.size = 2 + d(3)
	}
	if d.oneIn(3) {
		w.lots = []string{"A", "B"}
	}
	w.drawTemplates()
	if !d.oneIn(8) {
		w.ops = append(w.ops, op{kind: approve, minute: d(6) - 5})
	}
	for range 1 + d(opsMax) {
		w.ops = append(w.ops, w.op())
	}
	return w.schedule
}

// drawTemplates draws three versions to approve. The third differs from the first in one number or consequence, so that
// their signals have the same keys.
func (w *drawer) drawTemplates() {
	for range 2 {
		location, dispersion := w.rules(w.window), w.rules(w.window)
		if w.oneIn(4) {
			dispersion = nil
		} else if w.oneIn(8) {
			location = nil
		}
		c := content(w.kind, w.size, w.dice(3), pick(w.dice, 10.0, 10, 10.5), location, dispersion)
		if location != nil && w.oneIn(4) {
			c.Location.UpperAction = chart.Line{Value: 11, Basis: chart.MethodCriterion}
		}
		w.templates = append(w.templates, c)
	}
	third := w.templates[0]
	if third.Location == nil || w.oneIn(3) {
		third.ProcessSigma = 1.5
	} else {
		trace := *third.Location
		trace.Rules = append([]rules.Spec(nil), trace.Rules...)
		if i := w.dice(len(trace.Rules)); trace.Rules[i].Consequence == rules.Stop {
			trace.Rules[i].Consequence = rules.Look
		} else {
			trace.Rules[i].Consequence++
		}
		third.Location = &trace
	}
	w.templates = append(w.templates, third)
}

// window draws the length of a window: mostly short, so that patterns complete, up to 20.
func (w *drawer) window(least int) int {
	if w.oneIn(6) {
		return least + w.dice(21-least)
	}
	return least + w.dice(4)
}

// rules draws a list of rules, their windows with the given function. Ids are the same for both traces and all versions.
func (w *drawer) rules(window func(least int) int) (specs []rules.Spec) {
	for i := range 1 + w.dice(4) {
		s := rules.Spec{ID: fmt.Sprintf("r%d", i), Consequence: rules.Consequence(1 + w.dice(3)), Kind: rules.Kind(1 + w.dice(10))}
		if s.Kind != rules.Alternating && s.Kind != rules.Within && s.Kind != rules.Outside {
			s.Sides = pick(w.dice, rules.BothSides, rules.BothSides, rules.UpperOnly, rules.LowerOnly)
		}
		z := pick(w.dice, 1, 1.5, 2, 0.5)
		switch s.Kind {
		case rules.Beyond:
			s.M = window(1)
			s.K, s.Z = 1+w.dice(s.M), z
		case rules.BeyondLine:
			s.Line = pick(w.dice, rules.ActionLine, rules.WarningLine)
		case rules.SameSide, rules.Trend:
			s.N = window(2)
		case rules.Alternating:
			s.N = window(3)
		case rules.Within:
			s.N, s.Z = window(2), z
		case rules.Outside:
			s.N, s.Z, s.OneSideOK = window(2), z, w.oneIn(2)
		case rules.Span:
			s.Z = 2 * z
		case rules.EWMA:
			s.Lambda, s.Limit, s.Asymptotic = pick(w.dice, 0.25, 0.5, 1), pick(w.dice, 1, 1.5, 2.5), w.oneIn(2)
		case rules.CUSUM:
			s.Reference, s.Interval = pick(w.dice, 0.5, 0, 1), pick(w.dice, 1.0, 2, 4)
			s.HeadStart = pick(w.dice, 0, s.Interval/2, s.Interval)
		}
		specs = append(specs, s)
	}
	return specs
}

func (w *drawer) op() op {
	o := op{minute: w.minute()}
	k := w.dice(40)
	if w.restless && w.oneIn(3) {
		k = 33 + w.dice(7)
	}
	switch {
	case k < 20 || len(w.posted) == 0:
		o.rows = w.rows()
		return o
	case k < 22:
		o.kind, o.n = closeSignal, w.dice(8)
	case k < 33:
		o.kind = pick(w.dice, amendReadings, amendReadings, amendTime, amendTime, amendTime, amendRole, amendRole, amendLot, void, void)
		o.n = w.posted[w.dice(len(w.posted))]
		o.row = w.row(o.n, w.minute())
	case k < 35:
		o.kind, o.template = approve, pick(w.dice, 0, 0, 1, 2)
		o.lot = w.forLots()
	case k < 36:
		o.kind, o.n = withdraw, w.dice(4)
	case k < 38:
		o.kind, o.isBreak, o.restart = addMark, w.oneIn(2), w.oneIn(2)
		o.lot = w.forLots()
	default:
		o.kind, o.n = voidMark, w.dice(4)
	}
	return o
}

// forLots draws the lot of a version or mark: mostly every lot.
func (w *drawer) forLots() string {
	if w.oneIn(2) {
		return ""
	}
	return pick(w.dice, w.lots...)
}

func (w *drawer) minute() int { return w.dice(minutesMax) }

// rows draws a post: mostly in order, one or several, sometimes late, sometimes several late ones scattered.
func (w *drawer) rows() (rows []row) {
	late := w.oneIn(3)
	for range pick(w.dice, 1, 1, 1, 2, 4, 12) {
		minute := w.minute()
		if !late {
			w.now = min(w.now+w.dice(3), minutesMax-1)
			minute = w.now
		}
		n := w.dice(resultsMax)
		rows = append(rows, w.row(n, minute))
		w.posted = append(w.posted, n)
	}
	return rows
}

func (w *drawer) row(n, minute int) row {
	r := row{n: n, minute: minute, lot: pick(w.dice, w.lots...), repeat: w.oneIn(10)}
	if w.oneIn(4) {
		r.run = pick(w.dice, "a", "b")
	}
	if w.oneIn(4) {
		r.position = int32(w.dice(3))
	}
	if w.oneIn(6) {
		w.level = w.dice(7) - 3
	}
	readings := w.size
	if w.oneIn(5) {
		readings = 1 + w.dice(w.size)
	}
	bound := pick(w.dice, "", "", "", "", "", "", "", "", "<", ">")
	for range readings {
		halves := 20 + w.level + w.dice(3) - 1
		if w.oneIn(6) {
			halves += w.dice(9) - 4
		}
		r.readings = append(r.readings, fmt.Sprintf("%s%d.%d", bound, halves/2, halves%2*5))
	}
	return r
}
