package track_test

import (
	"fmt"
	"maps"
	"slices"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// bench carries out named operations and compares with the plain route after each.
type bench struct {
	*testing.T
	*model
	n int
}

// newBench starts an individuals chart. Version 1, of template 0, is in force from minute 0.
func newBench(t *testing.T, templates ...[2][]rules.Spec) *bench {
	s := &schedule{kind: chart.Individuals, size: 1}
	for _, specs := range templates {
		s.templates = append(s.templates, content(chart.Individuals, 1, 1, 10, specs[0], specs[1]))
	}
	b := &bench{T: t, model: newModel(s)}
	b.do(op{kind: approve})
	return b
}

// location is a template with rules for the location trace only.
func location(specs ...rules.Spec) [2][]rules.Spec { return [2][]rules.Spec{specs, nil} }

// threeOnASide completes at the third of three points on a side.
var threeOnASide = rules.Spec{ID: "run", Kind: rules.SameSide, N: 3, Consequence: rules.Act}

func (b *bench) do(o op) {
	b.Helper()
	b.apply(o)
	b.check()
	if len(b.problems) > 0 {
		b.Fatalf("after %s:\n%s", o, strings.Join(b.problems, "\n"))
	}
}

// row gives the next result: numbers count from 1, as ids do.
func (b *bench) row(minute int, reading string) row {
	b.n++
	return row{n: b.n, minute: minute, readings: []string{reading}}
}

// series posts results one by one, ten minutes apart, the first at the given minute.
func (b *bench) series(minute int, readings ...string) {
	b.Helper()
	for i, reading := range readings {
		b.do(op{kind: post, rows: []row{b.row(minute+10*i, reading)}})
	}
}

// signals describes every signal there ever was, by id: status, first point, first and last hit.
func (b *bench) signals() (list []string) {
	all := b.track("").signals
	for _, id := range slices.Sorted(maps.Keys(all)) {
		s := all[id]
		text := fmt.Sprintf("%d %s %d: %d-%d", id, s.status, s.FirstPoint.ID, s.FirstHit.ID, s.LastHit.ID)
		switch s.status {
		case "MERGED":
			text = fmt.Sprintf("%d MERGED into %d", id, s.mergedInto)
		case "RETRACTED":
			text = fmt.Sprintf("%d RETRACTED", id)
		}
		if s.changedAfterClosing {
			text += " changed after closing"
		}
		list = append(list, text)
	}
	return list
}

func (b *bench) wantSignals(want ...string) {
	b.Helper()
	if got := b.signals(); !slices.Equal(got, want) {
		b.Fatalf("signals\n  got  %q\n  want %q", got, want)
	}
}

// told gives what the latest operation told of signals.
func (b *bench) told() (list []string) {
	for _, c := range b.changes {
		if c.Kind != track.Unchanged {
			list = append(list, fmt.Sprintf("%d %s", c.ID, c.Kind))
		}
	}
	return list
}

func (b *bench) wantTold(want ...string) {
	b.Helper()
	if got := b.told(); !slices.Equal(got, want) {
		b.Fatalf("told\n  got  %q\n  want %q", got, want)
	}
}

// order gives the ids of the track's results in order.
func (b *bench) order() (ids []int64) {
	for _, p := range b.track("").places {
		ids = append(ids, p.ID)
	}
	return ids
}

// verdict gives what is stored of a result.
func (b *bench) verdict(id int64) (o *track.Outcome, version int) {
	b.Helper()
	places := b.track("").places
	p := places[slices.IndexFunc(places, func(p place) bool { return p.ID == id })]
	o, err := track.Decode(p.verdict)
	if err != nil {
		b.Fatal(err)
	}
	return o, p.version
}

func (b *bench) wantVerdict(id int64, version int, standing judge.Standing, reason judge.Reason) {
	b.Helper()
	if o, v := b.verdict(id); v != version || o.Standing != standing || o.Reason != reason {
		b.Fatalf("result %d: got %v %v by version %d, want %v %v by version %d", id, o.Standing, o.Reason, v, standing, reason, version)
	}
}
