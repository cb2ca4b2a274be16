// Package rules is the run-rule judge of one trace: what each rule looks for, and a fast, resumable search for it.
//
// A Spec is one rule, a Plan a list of them compiled for one trace, a State what the plan remembers of the points so
// far in the current segment. The plan sees points only: a result that is no point (missing, voided, repeated, not
// judged) is never shown to it, and a new segment starts with a new state.
//
// Everything the windowed rules need to know of a point fits in a few bits: beyond this line or that, inside, rising,
// falling. The plan keeps these bits as words of 64 points and evaluates a rule for 64 points at once with shifts. A
// window is at most WindowPointsMax points, so the bits of the latest 64 points are the whole state; it can be stored
// after any point and resumed, and it forgets an old difference after one window.
//
// The meaning of every rule, of ties and of windows is that of judge number 1 and never changes; see JudgeNumber.
package rules

import (
	"fmt"
	"math"
	"regexp"
	"slices"
)

// JudgeNumber numbers the meaning of ties, rounding, gaps and windows implemented here. Verdicts carry it. Changing
// what any input gives is a new number beside this one, not an edit.
const JudgeNumber = 1

const (
	// WindowPointsMax bounds every window: one machine word of history. The longest published pattern has 15 points.
	WindowPointsMax = 64
	// RulesMax bounds the rules of one trace; the largest published set has eight.
	RulesMax = 32
	// SigmasMax bounds distances and decision intervals in multiples of sigma.
	SigmasMax = 100.0
)

// Kind is what a rule looks for.
type Kind uint8

const (
	// Beyond completes where at least K of the M latest points are beyond Z on one side, the newest among them.
	Beyond Kind = iota + 1
	// BeyondLine completes where the point is beyond the action or warning line.
	BeyondLine
	// SameSide completes where the latest N points lie on one side of the centre.
	SameSide
	// Trend completes where the latest N-1 differences all rise or all fall.
	Trend
	// Alternating completes where the latest N-1 differences alternate in sign.
	Alternating
	// Within completes where the latest N points are all inside Z.
	Within
	// Outside completes where the latest N points are all beyond Z, both sides present unless OneSideOK.
	Outside
	// Span completes where the point and its predecessor are beyond Z/2 on opposite sides.
	Span
	// EWMA completes where the exponentially weighted moving average passes Limit times its own sigma.
	EWMA
	// CUSUM completes where an arm of the tabular cumulative sum passes the decision interval.
	CUSUM
)

// Consequence is what follows when a rule completes, from mild to severe.
type Consequence uint8

const (
	// Look at the chart; nothing need be done.
	Look Consequence = iota + 1
	// Act soon; the result is reported.
	Act
	// Stop: do not report, hold the track.
	Stop
)

// String is the name used in output and canonical bytes.
func (c Consequence) String() string {
	return [...]string{"", "LOOK", "ACT", "STOP"}[c&3]
}

// Sides are the sides of the centre a rule watches.
type Sides uint8

const (
	// BothSides is the default.
	BothSides Sides = iota
	// UpperOnly watches high values and rising trends.
	UpperOnly
	// LowerOnly watches low values and falling trends.
	LowerOnly
)

// Side is the side a rule completed on.
type Side uint8

const (
	// NoSide is for patterns that belong to no side.
	NoSide Side = iota
	// Upper is above the centre, or rising.
	Upper
	// Lower is below the centre, or falling.
	Lower
)

// String is the name used in output and canonical bytes.
func (s Side) String() string { return [...]string{"NONE", "UPPER", "LOWER", ""}[s&3] }

// LineKind names a line for BeyondLine.
type LineKind uint8

const (
	// ActionLine is the outer line.
	ActionLine LineKind = iota + 1
	// WarningLine is the inner line.
	WarningLine
)

// Spec is one rule. Only the fields its kind names are used; the others are zero. The JSON form is part of a version's
// canonical bytes: names and numbers in it are never changed.
type Spec struct {
	ID          string      `json:"id"`
	Kind        Kind        `json:"kind"`
	Consequence Consequence `json:"consequence"`
	Sides       Sides       `json:"sides,omitempty"`
	// K and M: at least K of the M latest points (Beyond).
	K int `json:"k,omitempty"`
	M int `json:"m,omitempty"`
	// N latest points (SameSide, Trend, Alternating, Within, Outside).
	N int `json:"n,omitempty"`
	// Z is a distance from the centre in sigmas (Beyond, Within, Outside; Span uses half of it).
	Z         float64  `json:"z,omitempty"`
	Line      LineKind `json:"line,omitempty"`
	OneSideOK bool     `json:"one_side_ok,omitempty"`
	// Lambda is the weight of the newest point, Limit the width in sigmas of the average (EWMA).
	Lambda float64 `json:"lambda,omitempty"`
	Limit  float64 `json:"limit,omitempty"`
	// Asymptotic uses the limit the average's sigma tends to from the first point on.
	Asymptotic bool `json:"asymptotic,omitempty"`
	// Reference, Interval and HeadStart are the k, h and starting value of a CUSUM, in sigmas.
	Reference float64 `json:"reference,omitempty"`
	Interval  float64 `json:"interval,omitempty"`
	HeadStart float64 `json:"head_start,omitempty"`
}

// SpecError names the field of a rule that cannot be.
type SpecError struct {
	// Field is the contract's name of the field, such as "beyond.k".
	Field   string
	Problem string
}

func (e *SpecError) Error() string { return e.Field + ": " + e.Problem }

var idForm = regexp.MustCompile(`^[a-z0-9][a-z0-9._/-]{0,63}$`)

// Check reports the first thing wrong with the rule, as a *SpecError.
func (s Spec) Check() error {
	bad := func(field, format string, args ...any) error {
		return &SpecError{field, fmt.Sprintf(format, args...)}
	}
	if !idForm.MatchString(s.ID) {
		return bad("id", "%q: want 1 to 64 characters of a-z, 0-9, '.', '_', '/' and '-', starting with a letter or digit", s.ID)
	}
	if s.Consequence < Look || s.Consequence > Stop {
		return bad("consequence", "is not set; want LOOK, ACT or STOP")
	}
	if s.Sides > LowerOnly {
		return bad("sides", "unknown value %d", s.Sides)
	}
	if s.Sides != BothSides && (s.Kind == Alternating || s.Kind == Within || s.Kind == Outside) {
		return bad("sides", "a pattern of this kind belongs to no side; leave it unset")
	}
	return s.checkNumbers(bad)
}

func (s Spec) checkNumbers(bad func(string, string, ...any) error) error {
	window := func(field string, n, least int) error {
		if n < least || n > WindowPointsMax {
			return bad(field, "%d: want %d to %d points", n, least, WindowPointsMax)
		}
		return nil
	}
	sigmas := func(field string, z, least float64) error {
		if !(z >= least && z <= SigmasMax) {
			return bad(field, "%v: want %v to %v sigmas", z, least, SigmasMax)
		}
		return nil
	}
	first := func(errs ...error) error {
		for _, err := range errs {
			if err != nil {
				return err
			}
		}
		return nil
	}
	switch s.Kind {
	case Beyond:
		if err := first(window("beyond.m", s.M, 1), sigmas("beyond.z", s.Z, 0)); err != nil {
			return err
		}
		if s.K < 1 || s.K > s.M {
			return bad("beyond.k", "%d: want 1 to m, which is %d", s.K, s.M)
		}
	case BeyondLine:
		if s.Line != ActionLine && s.Line != WarningLine {
			return bad("beyond_line.line", "is not set; want ACTION or WARNING")
		}
	case SameSide:
		return window("same_side.n", s.N, 2)
	case Trend:
		return window("trend.n", s.N, 2)
	case Alternating:
		return window("alternating.n", s.N, 3)
	case Within:
		return first(window("within.n", s.N, 2), positive(bad, "within.z", s.Z))
	case Outside:
		return first(window("outside.n", s.N, 2), sigmas("outside.z", s.Z, 0))
	case Span:
		return positive(bad, "span.z", s.Z)
	case EWMA:
		if !(s.Lambda > 0 && s.Lambda <= 1) {
			return bad("ewma.lambda", "%v: want more than 0 and at most 1", s.Lambda)
		}
		return positive(bad, "ewma.limit", s.Limit)
	case CUSUM:
		if err := first(sigmas("cusum.k", s.Reference, 0), positive(bad, "cusum.h", s.Interval)); err != nil {
			return err
		}
		if !(s.HeadStart >= 0 && s.HeadStart <= s.Interval) {
			return bad("cusum.head_start", "%v: want 0 to h, which is %v", s.HeadStart, s.Interval)
		}
	default:
		return bad("rule", "is not set; want one of beyond, beyond_line, same_side, trend, alternating, within, outside, span, ewma, cusum")
	}
	return nil
}

func positive(bad func(string, string, ...any) error, field string, z float64) error {
	if !(z > 0 && z <= SigmasMax) || math.IsNaN(z) {
		return bad(field, "%v: want more than 0 and at most %v sigmas", z, SigmasMax)
	}
	return nil
}

// Window is the number of points the rule looks at, the newest included.
func (s Spec) Window() int {
	switch s.Kind {
	case Beyond:
		return s.M
	case SameSide, Trend, Alternating, Within, Outside:
		return s.N
	case Span:
		return 2
	}
	return 1
}

// NeedsSigma reports whether the rule measures in sigmas; NeedsCentre whether it needs a centre line.
func (s Spec) NeedsSigma() bool {
	return s.Kind == Within || s.Kind == Span || s.Kind == EWMA || s.Kind == CUSUM ||
		(s.Kind == Beyond || s.Kind == Outside) && s.Z > 0
}

// NeedsCentre reports whether the rule refers to the centre line.
func (s Spec) NeedsCentre() bool {
	return s.Kind != BeyondLine && s.Kind != Trend && s.Kind != Alternating
}

// SuitsDispersion reports whether the rule may watch moving ranges, ranges or standard deviations. Zone rules of several
// points take a symmetric statistic for granted, which these are not (common practice, no source).
func (s Spec) SuitsDispersion() bool {
	return s.Kind == BeyondLine || s.Kind == Beyond && s.M == 1 || s.IsRunPattern()
}

// IsRunPattern reports whether the rule follows neighbours: a run on one side, a trend or an alternation. On moving
// ranges such a pattern is weak evidence, because neighbouring moving ranges share a value.
func (s Spec) IsRunPattern() bool {
	return s.Kind == SameSide || s.Kind == Trend || s.Kind == Alternating
}

// OneSide gives the rules with those that have sides watching one side only. Rules without a side stay as they are.
func OneSide(specs []Spec, side Sides) []Spec {
	out := slices.Clone(specs)
	for i := range out {
		switch out[i].Kind {
		case Alternating, Within, Outside:
		default:
			out[i].Sides = side
		}
	}
	return out
}
