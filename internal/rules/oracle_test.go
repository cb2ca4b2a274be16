package rules_test

import (
	"fmt"
	"math"
	"math/big"
	"slices"
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// The brute-force judge. It is written from the sentences that define the rules, not from the package: every point
// of the segment is kept in a list, every rule looks at its latest points one by one, lines are rational numbers
// rounded by big.Rat, averages and sums run with 256 bits, and a bound is judged by trying values it allows.

// observation is one thing shown to the judge: a measured statistic, or one of which only a bound is known.
type observation struct {
	x     float64
	bound decimal.Bound
	at    rules.Scale
	// restart begins a new segment here, headStart with the head starts of the CUSUMs.
	restart, headStart bool
}

// bruteHit is a rules.Hit whose Point counts observations from the start of the case.
type bruteHit struct {
	Point, Rule           int
	Side                  rules.Side
	WindowBack, FirstBack int
}

func (h bruteHit) String() string {
	return fmt.Sprintf("{at %d rule %d %s window %d back, first %d back}", h.Point, h.Rule, h.Side, h.WindowBack, h.FirstBack)
}

// place says where a point lies for one rule: beyond its upper or lower line, or inside both.
type place struct{ up, down, inside bool }

// member is one point of the segment.
type member struct {
	x        float64
	at       rules.Scale
	measured bool
	places   []place // one a rule
	// step is the sign of the difference from the point before: 0 where they are equal, there is none, or one of them
	// is only a bound.
	step int
}

type bruteJudge struct {
	trace  chart.Trace
	places int
	specs  []rules.Spec
	lines  map[lineKey]float64

	segment []member
	sums    []running // one a rule; used by EWMA and CUSUM rules
	// doubt is set where a comparison hangs on less than the error that float64 may make.
	doubt bool
}

type lineKey struct {
	at rules.Scale
	z  float64
}

func newBrute(trace chart.Trace, places int, specs []rules.Spec, headStart bool) *bruteJudge {
	b := &bruteJudge{trace: trace, places: places, specs: specs, lines: map[lineKey]float64{}}
	b.restart(headStart)
	return b
}

func (b *bruteJudge) restart(headStart bool) {
	b.segment = nil
	b.sums = make([]running, len(b.specs))
	for i, s := range b.specs {
		b.sums[i] = newRunning(s, headStart)
	}
}

// judge takes one observation and gives what completes there; proven is false for a bound that is no point.
func (b *bruteJudge) judge(point int, o observation) (hits []bruteHit, proven bool) {
	if o.restart {
		b.restart(o.headStart)
	}
	if o.bound != decimal.Measured {
		return b.judgeBound(point, o)
	}
	newest := b.member(o.x, o.at)
	if n := len(b.segment); n > 0 {
		newest.step = b.step(b.segment[n-1], newest)
	}
	b.segment = append(b.segment, newest)
	for i, s := range b.specs {
		hits = append(hits, b.completes(point, i, s)...)
		if s.Kind == rules.EWMA || s.Kind == rules.CUSUM {
			hits = append(hits, b.accumulates(point, i, s)...)
		}
	}
	return hits, true
}

// member works out the place of a measured value for every rule.
func (b *bruteJudge) member(x float64, at rules.Scale) member {
	m := member{x: x, at: at, measured: true, places: make([]place, len(b.specs))}
	for i, s := range b.specs {
		lower, upper := b.linesOf(s, at)
		m.places[i] = place{up: x > upper, down: x < lower, inside: x > lower && x < upper}
	}
	return m
}

// linesOf gives the two lines a rule compares with; infinite where there is none.
func (b *bruteJudge) linesOf(s rules.Spec, at rules.Scale) (lower, upper float64) {
	z := s.Z
	switch s.Kind {
	case rules.Span:
		z = s.Z / 2
	case rules.SameSide:
		z = 0
	case rules.BeyondLine:
		if s.Line == rules.WarningLine {
			return b.drawn(b.trace.LowerWarning, at, -2, math.Inf(-1)), b.drawn(b.trace.UpperWarning, at, 2, math.Inf(1))
		}
		return b.drawn(b.trace.LowerAction, at, -3, math.Inf(-1)), b.drawn(b.trace.UpperAction, at, 3, math.Inf(1))
	case rules.Trend, rules.Alternating, rules.EWMA, rules.CUSUM:
		return 0, 0
	}
	return b.line(at, -z), b.line(at, z)
}

func (b *bruteJudge) drawn(l chart.Line, at rules.Scale, multiple, none float64) float64 {
	switch l.Basis {
	case chart.MethodCriterion, chart.Target, chart.TailProbability:
		return publish(onPaper(l.Value), b.places)
	case chart.SigmaMultiple:
		if b.trace.Centre != nil && b.trace.Sigma != nil {
			return b.line(at, multiple)
		}
	}
	return none
}

func (b *bruteJudge) line(at rules.Scale, z float64) float64 {
	key := lineKey{at, z}
	v, known := b.lines[key]
	if !known {
		r := new(big.Rat).Mul(onPaper(z), onPaper(at.Sigma))
		v = publish(r.Add(r, onPaper(at.Centre)), b.places)
		b.lines[key] = v
	}
	return v
}

// latest gives the n newest points; ok is false where fewer exist.
func (b *bruteJudge) latest(n int) ([]member, bool) {
	if len(b.segment) < n {
		return nil, false
	}
	return b.segment[len(b.segment)-n:], true
}

func all(points []member, holds func(member) bool) bool {
	return !slices.ContainsFunc(points, func(m member) bool { return !holds(m) })
}

// completes judges a windowed rule at the newest point of the segment, by its sentence.
func (b *bruteJudge) completes(point, rule int, s rules.Spec) (hits []bruteHit) {
	hit := func(side rules.Side, window, first int) {
		if side == rules.Upper && s.Sides == rules.LowerOnly || side == rules.Lower && s.Sides == rules.UpperOnly {
			return
		}
		hits = append(hits, bruteHit{point, rule, side, window - 1, first - 1})
	}
	up := func(m member) bool { return m.places[rule].up }
	down := func(m member) bool { return m.places[rule].down }
	newest := b.segment[len(b.segment)-1]
	switch s.Kind {
	case rules.Beyond:
		window := b.segment[max(0, len(b.segment)-s.M):]
		if first, ok := atLeast(window, up, s.K); ok {
			hit(rules.Upper, len(window), first)
		}
		if first, ok := atLeast(window, down, s.K); ok {
			hit(rules.Lower, len(window), first)
		}
	case rules.BeyondLine:
		if up(newest) {
			hit(rules.Upper, 1, 1)
		}
		if down(newest) {
			hit(rules.Lower, 1, 1)
		}
	case rules.SameSide, rules.Trend, rules.Alternating, rules.Within, rules.Outside:
		if window, ok := b.latest(s.N); ok {
			if side, ok := patternOf(window, rule, s); ok {
				hit(side, s.N, s.N)
			}
		}
	case rules.Span:
		if window, ok := b.latest(2); ok && down(window[0]) && up(window[1]) {
			hit(rules.Upper, 2, 2)
		} else if ok && up(window[0]) && down(window[1]) {
			hit(rules.Lower, 2, 2)
		}
	}
	return hits
}

// atLeast reports whether the newest point of a window is beyond and k of it are, and how many points back, the newest
// being 1, the earliest of those lies.
func atLeast(window []member, beyond func(member) bool, k int) (first int, ok bool) {
	count := 0
	for i, m := range window {
		if beyond(m) {
			count++
			if count == 1 {
				first = len(window) - i
			}
		}
	}
	return first, beyond(window[len(window)-1]) && count >= k
}

// patternOf judges the rules about all of the latest n points.
func patternOf(window []member, rule int, s rules.Spec) (side rules.Side, ok bool) {
	up := func(m member) bool { return m.places[rule].up }
	down := func(m member) bool { return m.places[rule].down }
	rises := func(m member) bool { return m.step > 0 }
	falls := func(m member) bool { return m.step < 0 }
	switch s.Kind {
	case rules.SameSide:
		return oneOf(all(window, up), all(window, down))
	case rules.Trend:
		return oneOf(all(window[1:], rises), all(window[1:], falls))
	case rules.Alternating:
		for i, m := range window[1:] {
			if m.step == 0 || i > 0 && m.step != -window[i].step {
				return 0, false
			}
		}
		return rules.NoSide, true
	case rules.Within:
		return rules.NoSide, all(window, func(m member) bool { return m.places[rule].inside })
	}
	// Outside: all beyond, on both sides unless one will do.
	if side, ok := oneOf(all(window, up), all(window, down)); ok {
		return side, s.OneSideOK
	}
	return rules.NoSide, all(window, func(m member) bool { return up(m) || down(m) })
}

func oneOf(upper, lower bool) (rules.Side, bool) {
	switch {
	case upper:
		return rules.Upper, true
	case lower:
		return rules.Lower, true
	}
	return 0, false
}

// step gives the sign of the difference of neighbours: by statistic where their scales are equal, else by z.
func (b *bruteJudge) step(before, here member) int {
	switch {
	case !before.measured || !here.measured:
		return 0
	case before.at == here.at:
		return onPaper(here.x).Cmp(onPaper(before.x))
	}
	return b.nine(standardised(here)).Cmp(b.nine(standardised(before)))
}

func standardised(m member) *big.Rat {
	z := new(big.Rat).Sub(onPaper(m.x), onPaper(m.at.Centre))
	return z.Quo(z, onPaper(m.at.Sigma))
}

// nine rounds to nine decimals, and notes a doubt where float64 could not know which way.
func (b *bruteJudge) nine(r *big.Rat) *big.Rat {
	f, _ := r.Float64()
	b.doubtNearHalf(f, math.Abs(f))
	rounded, _ := new(big.Rat).SetString(r.FloatString(9))
	return rounded
}

// doubtNearHalf notes a doubt where v, whose computation in float64 met values as large as size, lies as near to a half
// of the ninth decimal as the error that may have been made.
func (b *bruteJudge) doubtNearHalf(v, size float64) {
	scaled := math.Abs(v) * 1e9
	off := math.Abs(scaled - math.Floor(scaled) - 0.5)
	if math.Abs(v) > 1e6 || off < 1e9*1e-13*max(1, size) {
		b.doubt = true
	}
}

func onPaper(x float64) *big.Rat {
	r, ok := new(big.Rat).SetString(strconv.FormatFloat(x, 'g', -1, 64))
	if !ok {
		panic(x)
	}
	return r
}

func publish(r *big.Rat, places int) float64 {
	if places < 0 {
		f, _ := r.Float64()
		return f
	}
	f, _ := strconv.ParseFloat(r.FloatString(places), 64) // out of range is infinite, as it is in the package
	return f
}
