package validation

import (
	"context"
	"fmt"
	"maps"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// Signals is the subject of the worked examples' signals: the points that the judge finds beyond the limits of each
// example, held against those that its source names. It stands apart from Groups because its figures are points, not
// values to a tolerance.
func Signals() Group { return Group{"signals of worked examples", signalChecks} }

// asked tells how to find the points of each kind of answer.
var asked = map[string]func(*example) ([]int, error){
	"beyond_3sigma":                (*example).beyond,
	"beyond_3sigma_1based":         (*example).beyond,
	"beyond_revised_limits_1based": (*example).beyondRevised,
	"beyond_limits":                func(e *example) ([]int, error) { return e.judged(e.average()) },
	"C_plus_exceeds_H_1based":      func(e *example) ([]int, error) { return e.judged(e.sums(rules.UpperOnly)) },
	"C_minus_exceeds_H":            func(e *example) ([]int, error) { return e.judged(e.sums(rules.LowerOnly)) },
}

// onTheLine names the answer that lists points on a line: they are checked not to signal.
const onTheLine = "exactly_on_UCL_1based"

func signalChecks(context.Context) ([]Check, error) {
	var file workedFile
	if err := readJSON(examplesFile, &file); err != nil {
		return nil, err
	}
	var checks []Check
	for _, e := range file.Examples {
		more, err := e.signalChecks()
		checks = append(checks, more...)
		if err != nil {
			return checks, fmt.Errorf("%s: %w", e.ID, err)
		}
	}
	return checks, nil
}

// signalChecks gives one check for the number of points that signal and one for each of them.
func (e *example) signalChecks() (checks []Check, err error) {
	exactly := func(name string, want, got int) {
		checks = append(checks, Check{Name: e.ID + ": " + name, Source: e.Source, Want: float64(want), Printed: true}.Compare(float64(got)))
	}
	for _, name := range slices.Sorted(maps.Keys(e.Signals)) {
		if name == onTheLine {
			points, err := e.beyond()
			if err != nil {
				return checks, err
			}
			for _, p := range e.Signals[name] {
				exactly(fmt.Sprintf("signals at point %d, which lies on the line", p), 0, among(points, p))
			}
			continue
		}
		find, ok := asked[name]
		if !ok {
			return checks, fmt.Errorf("no way is known to answer %q", name)
		}
		points, err := find(e)
		if err != nil {
			return checks, err
		}
		exactly(name+", number of points", len(e.Signals[name]), len(points))
		for _, p := range e.Signals[name] {
			exactly(fmt.Sprintf("%s, signals at point %d", name, p), 1, among(points, p))
		}
	}
	return checks, nil
}

func among(points []int, p int) int {
	if slices.Contains(points, p) {
		return 1
	}
	return 0
}

var beyondThree = rules.Spec{ID: "beyond-3", Kind: rules.Beyond, Consequence: rules.Stop, K: 1, M: 1, Z: 3}

// beyond gives the points beyond three sigmas of either trace, counted from 1.
func (e *example) beyond() ([]int, error) { return e.beyondWithout(nil) }

// beyondRevised judges all samples by limits that leave out those beyond the first ones.
func (e *example) beyondRevised() ([]int, error) {
	out, err := e.beyond()
	if err != nil {
		return nil, err
	}
	return e.beyondWithout(out)
}

func (e *example) beyondWithout(leftOut []int) ([]int, error) {
	req, err := e.request(quantity{Without: leftOut})
	if err != nil {
		return nil, err
	}
	res, err := limits.Compute(req)
	if err != nil {
		return nil, err
	}
	points := make([]judge.Point, len(req.Groups))
	for i, g := range req.Groups {
		points[i] = judge.Point{Readings: g.Readings, Count: g.Count}
	}
	return walked(judgeable(res, beyondThree), points)
}

// judged gives the points, counted from 1, at which a rule about the data as they are completes.
func (e *example) judged(rule rules.Spec) ([]int, error) {
	l := judge.Limits{Places: decimal.Unrounded}
	l.Traces[chart.Location] = &judge.Trace{Trace: e.trace(), Rules: []rules.Spec{rule}}
	points := make([]judge.Point, len(e.Data.X))
	for i := range points {
		points[i].Readings = e.Data.X[i : i+1]
	}
	return walked(l, points)
}

// walked judges the points one by one.
func walked(l judge.Limits, points []judge.Point) (found []int, err error) {
	j, err := judge.New(l)
	if err != nil {
		return nil, err
	}
	st, v := j.NewState(), judge.Verdict{}
	for i, p := range points {
		j.Judge(st, p, &v)
		if v.Standing > judge.Clear {
			found = append(found, i+1)
		}
	}
	return found, nil
}
