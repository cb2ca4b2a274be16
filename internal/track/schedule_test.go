package track_test

import (
	"encoding/json"
	"fmt"
	"strings"
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// A schedule is what laboratories do to one chart, in the order in which it is done: the chart, the versions that can be
// approved for it, and the operations. Operations name results, versions and marks by number and do nothing where theirs
// does not exist, so that any subset of a schedule is a schedule: a failing one can be made small.
type schedule struct {
	kind      chart.Kind
	size      int
	templates []definition.Content
	ops       []op
}

type opKind uint8

const (
	post opKind = iota
	amendReadings
	amendTime
	amendRole
	amendLot
	void
	approve
	withdraw
	addMark
	voidMark
	closeSignal
	opKinds
)

var opNames = [opKinds]string{"post", "amendReadings", "amendTime", "amendRole", "amendLot", "void", "approve", "withdraw", "addMark", "voidMark", "closeSignal"}

// op is one operation; only the fields its kind names are used.
type op struct {
	kind opKind
	// rows are the results of a post.
	rows []row
	// n is the number of the result, version, mark or signal.
	n int
	// row has the readings, minute, role or lot of an amendment.
	row row
	// template and minute of a version, minute and lot of a mark.
	template, minute int
	lot              string
	isBreak, restart bool
}

// row is a result as posted. Its number is its source id.
type row struct {
	n, minute int
	run       string
	position  int32
	lot       string
	repeat    bool
	readings  []string
}

// start is minute 0.
var start = time.Date(2026, 3, 2, 0, 0, 0, 0, time.UTC)

func at(minute int) time.Time { return start.Add(time.Duration(minute) * time.Minute) }

func (r row) result() definition.Result {
	res := definition.Result{Chart: "c", Source: string(rune('a' + r.n%2)), SourceID: fmt.Sprint(r.n), MeasuredAt: at(r.minute), Lot: r.lot,
		RunID: r.run, Position: r.position, Role: definition.Routine, Readings: r.readings}
	if r.repeat {
		res.Role = definition.Repeat
	}
	return res
}

func (r row) key() []byte {
	res := r.result()
	return res.OrderKey()
}

func (r row) String() string {
	text := fmt.Sprintf("#%d @%d %s", r.n, r.minute, strings.Join(r.readings, ","))
	for _, extra := range []struct {
		on   bool
		text string
	}{{r.run != "", "run " + r.run}, {r.position != 0, fmt.Sprintf("position %d", r.position)}, {r.lot != "", "lot " + r.lot}, {r.repeat, "repeat"}} {
		if extra.on {
			text += " " + extra.text
		}
	}
	return text
}

func (o op) String() string {
	switch o.kind {
	case post:
		texts := make([]string, len(o.rows))
		for i, r := range o.rows {
			texts[i] = r.String()
		}
		return "post " + strings.Join(texts, "; ")
	case amendReadings:
		return fmt.Sprintf("amend #%d to %s", o.n, strings.Join(o.row.readings, ","))
	case amendTime:
		return fmt.Sprintf("amend #%d to @%d", o.n, o.row.minute)
	case amendLot:
		return fmt.Sprintf("amend #%d to lot %q", o.n, o.row.lot)
	case approve:
		return fmt.Sprintf("approve template %d from @%d lot %q", o.template, o.minute, o.lot)
	case addMark:
		return fmt.Sprintf("mark @%d lot %q break %v restart %v", o.minute, o.lot, o.isBreak, o.restart)
	}
	return fmt.Sprintf("%s %d", opNames[o.kind], o.n)
}

func (s *schedule) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s of size %d\n", s.kind, s.size)
	for i, t := range s.templates {
		fmt.Fprintf(&b, "template %d, %d decimals:", i, t.Decimals)
		for role, tr := range []*definition.Trace{t.Location, t.Dispersion} {
			if tr != nil {
				fmt.Fprintf(&b, " %s %v ± %v upper action %v %g rules", chart.Role(role), *tr.Centre, *tr.Sigma, tr.UpperAction.Basis, tr.UpperAction.Value)
				for _, r := range tr.Rules {
					text, _ := json.Marshal(r)
					fmt.Fprintf(&b, " %s", text)
				}
			}
		}
		b.WriteByte('\n')
	}
	for _, o := range s.ops {
		fmt.Fprintf(&b, "  %s\n", o)
	}
	return b.String()
}

// content is what the versions of a chart of the kind have in common: centre 10, process sigma 1, few decimals.
func content(kind chart.Kind, size, decimals int, centre float64, location, dispersion []rules.Spec) definition.Content {
	c := definition.Content{Chart: "c", Kind: kind, SubgroupSize: size, Decimals: decimals, ProcessSigma: 1, Judge: rules.JudgeNumber}
	scale, ok := limits.At(kind, 1, size)
	if !ok {
		panic("no such chart")
	}
	trace := func(centre, sigma float64, specs []rules.Spec) *definition.Trace {
		return &definition.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: specs}
	}
	if location != nil {
		c.Location = trace(centre, scale.LocationSigma, location)
	}
	if dispersion != nil {
		c.Dispersion = trace(1, scale.DispersionSigma, dispersion)
		c.Dispersion.LowerAction.Basis, c.Dispersion.LowerWarning.Basis = chart.Absent, chart.Absent
	}
	return c
}
