// Package judge gives the verdict on control results: the one judge that service, replay, command line and sheets share.
//
// A Judge is built from the published limits and rules of a chart. It turns the readings of each result into the
// statistics of the chart's two traces, rounds them as published, and lets the rules of each trace look at them. A
// State is what it remembers of the current segment; it can be stored after any result and resumed, so that judging a
// tail gives what judging the whole gives.
//
// The judge sees results in their order and knows no clock, no lot and no version: whoever calls it starts a new
// segment where one of these says so.
package judge

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// Limits is everything the judge needs to know of a chart, at the nominal subgroup size.
type Limits struct {
	Kind         chart.Kind
	SubgroupSize int
	// Places is the number of published decimals, or decimal.Unrounded.
	Places int
	// ProcessSigma is the published standard deviation of a single reading, in the chart's unit. It gives the scale of
	// a subgroup with fewer readings than nominal; 0 where only full ones can come.
	ProcessSigma float64
	// Model is what the scale of a point follows from besides.
	Model chart.Model
	// Traces has the location and the dispersion trace; nil where that trace is not judged.
	Traces [chart.Roles]*Trace
}

// Trace is one trace with its rules.
type Trace struct {
	chart.Trace
	Rules []rules.Spec
}

// Error says which part of the limits cannot be judged by, in the contract's words.
type Error struct{ Field, Problem string }

func (e *Error) Error() string { return e.Field + ": " + e.Problem }

// Judge is immutable and safe for concurrent use.
type Judge struct {
	limits Limits
	plans  [chart.Roles]*rules.Plan
	// boundsWatched: a bound can enter a rule of the location trace.
	boundsWatched bool
	// straight: readings are judged as they are, and lines follow from centre and sigma.
	straight bool
}

// New checks the limits and compiles the rules. Errors are *Error.
func New(l Limits) (*Judge, error) {
	j := &Judge{limits: l}
	if l.Places < decimal.Unrounded || l.Places > decimal.PlacesMax {
		return nil, &Error{"published_decimals", fmt.Sprintf("%d: want 0 to %d", l.Places, decimal.PlacesMax)}
	}
	if err := l.Kind.CheckSize(l.SubgroupSize); err != nil {
		return nil, &Error{"subgroup_size", err.Error()}
	}
	if l.ProcessSigma < 0 || !finite(l.ProcessSigma) {
		return nil, &Error{"process_sigma", fmt.Sprintf("%v: want a finite number of at least 0", l.ProcessSigma)}
	}
	if l.Traces[chart.Location] == nil && l.Traces[chart.Dispersion] == nil {
		return nil, &Error{"location", "neither a location nor a dispersion trace is given"}
	}
	for role := range chart.Roles {
		if l.Traces[role] == nil || l.Kind.Has(role) {
			continue
		}
		if l.Kind == chart.Given {
			return nil, &Error{"dispersion", "statistics plotted as given make one trace; name a chart kind for a second"}
		}
		return nil, &Error{role.String(), fmt.Sprintf("a chart of kind %s has no such trace", l.Kind)}
	}
	if err := l.checkModel(); err != nil {
		return nil, err
	}
	j.straight = !l.Model.Scaled() && !l.Kind.Counts()
	for role, t := range l.Traces {
		if t == nil {
			continue
		}
		plan, err := j.compile(chart.Role(role), t)
		if err != nil {
			err.Field = chart.Role(role).String() + "." + err.Field
			return nil, err
		}
		j.plans[role] = plan
	}
	j.boundsWatched = watchesBounds(j.plans[chart.Location])
	return j, nil
}

func (j *Judge) compile(role chart.Role, t *Trace) (*rules.Plan, *Error) {
	if t.Centre != nil && !finite(*t.Centre) {
		return nil, &Error{"centre", fmt.Sprintf("%v: want a finite number", *t.Centre)}
	}
	if j.limits.Kind.Counts() {
		if err := j.checkCountTrace(t); err != nil {
			return nil, err
		}
	}
	if t.Sigma != nil && (!finite(*t.Sigma) || *t.Sigma <= 0) {
		return nil, &Error{"sigma", fmt.Sprintf("%v: want a finite number above 0", *t.Sigma)}
	}
	named := []struct {
		field string
		line  chart.Line
	}{
		{"lower_action", t.LowerAction}, {"upper_action", t.UpperAction},
		{"lower_warning", t.LowerWarning}, {"upper_warning", t.UpperWarning},
	}
	for _, n := range named {
		if n.line.Fixed() && !finite(n.line.Value) {
			return nil, &Error{n.field, fmt.Sprintf("value %v: want a finite number", n.line.Value)}
		}
	}
	byFunction := func(l chart.Line) bool { return j.limits.Kind.Counts() && l.Basis == chart.TailProbability }
	if l, u := t.LowerAction, t.UpperAction; l.Fixed() && u.Fixed() && l.Value >= u.Value && !byFunction(l) && !byFunction(u) {
		return nil, &Error{"lower_action", fmt.Sprintf("value %v is not below upper_action, %v", l.Value, u.Value)}
	}
	plan, err := j.plan(role, t, t.Rules)
	if err != nil {
		e := err.(*rules.SpecError)
		return nil, &Error{e.Field, e.Problem}
	}
	return plan, nil
}

// plan compiles rules for a trace, with the lines of its kind.
func (j *Judge) plan(role chart.Role, t *Trace, specs []rules.Spec) (*rules.Plan, error) {
	if j.limits.Kind.Duplicates() {
		specs = rules.OneSide(specs, rules.UpperOnly)
	}
	trace := t.Trace
	if j.limits.Kind.Counts() && trace.Sigma == nil { // it follows from the centre
		sigma, _ := limits.CountSigma(j.limits.Kind, *trace.Centre, j.limits.Model.Inspected, &j.limits.Model)
		trace.Sigma = &sigma
	}
	return rules.CompileLines(trace, j.limits.Places, specs, j.limits.Model.Inspected, j.lineFunc(role))
}

// Alone compiles one rule for a trace that is judged, to be asked about points apart from the rest.
func (j *Judge) Alone(role chart.Role, spec rules.Spec) (*rules.Plan, error) {
	return j.plan(role, j.limits.Traces[role], []rules.Spec{spec})
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// Limits gives what the judge was built from. The caller must not change it.
func (j *Judge) Limits() Limits { return j.limits }

// Plan gives the compiled rules of a trace, nil where it is not judged.
func (j *Judge) Plan(role chart.Role) *rules.Plan { return j.plans[role] }

// Window is the longest window of any rule of either trace, in points.
func (j *Judge) Window() int {
	w := 1
	for _, p := range j.plans {
		if p != nil {
			w = max(w, p.Window())
		}
	}
	return w
}

// Lines are the positions of a trace's lines at one point; nil where there is none.
type Lines struct {
	Centre                     *float64
	LowerAction, UpperAction   *float64
	LowerWarning, UpperWarning *float64
}

// Lines gives the lines of a trace at a scale, rounded as they are judged.
func (j *Judge) Lines(role chart.Role, at rules.Scale) Lines {
	plan, t := j.plans[role], j.limits.Traces[role]
	if plan == nil {
		return Lines{}
	}
	where := func(l chart.Line, multiple float64) *float64 {
		v, ok := plan.Where(l, at, multiple)
		if !ok || role == chart.Dispersion && multiple < 0 && !l.Fixed() && (v <= 0 || j.limits.Kind.Duplicates()) {
			return nil // no statistic of spread can fall below zero, so the line is impossible
		}
		return &v
	}
	var lines Lines
	if t.Centre != nil {
		c := decimal.Round(at.Centre, j.limits.Places)
		lines.Centre = &c
	}
	lines.LowerAction, lines.UpperAction = where(t.LowerAction, -chart.ActionMultiple), where(t.UpperAction, chart.ActionMultiple)
	lines.LowerWarning, lines.UpperWarning = where(t.LowerWarning, -chart.WarningMultiple), where(t.UpperWarning, chart.WarningMultiple)
	return lines
}
