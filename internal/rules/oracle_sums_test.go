package rules_test

import (
	"math"
	"math/big"
	"strconv"

	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// running is an EWMA or CUSUM by its recurrence, with 256 bits: E = λz + (1-λ)E, and S = max(0, S ± z - k).
type running struct {
	average *big.Float
	points  int
	arm     [2]*big.Float
	// since counts the points since the arm was last 0.
	since [2]int
	// size is the largest magnitude met, which bounds the error of the same recurrence in float64.
	size float64
}

const bitsOfOracle = 256

func wide(x float64) *big.Float {
	f, _, err := big.ParseFloat(strconv.FormatFloat(x, 'g', -1, 64), 10, bitsOfOracle, big.ToNearestEven)
	if err != nil {
		panic(err)
	}
	return f
}

func newWide() *big.Float { return new(big.Float).SetPrec(bitsOfOracle) }

func newRunning(s rules.Spec, headStart bool) running {
	start := 0.0
	if headStart && s.Kind == rules.CUSUM {
		start = s.HeadStart
	}
	return running{average: newWide(), arm: [2]*big.Float{wide(start), wide(start)}, size: start}
}

// accumulates judges an EWMA or CUSUM at the newest point.
func (b *bruteJudge) accumulates(point, rule int, s rules.Spec) (hits []bruteHit) {
	newest, r := b.segment[len(b.segment)-1], &b.sums[rule]
	z := newWide().Sub(wide(newest.x), wide(newest.at.Centre))
	z.Quo(z, wide(newest.at.Sigma))
	sides := [2]rules.Side{rules.Upper, rules.Lower}
	report := func(arm, back int) {
		if side := sides[arm]; s.Sides == rules.BothSides || (s.Sides == rules.UpperOnly) == (side == rules.Upper) {
			hits = append(hits, bruteHit{point, rule, side, back, back})
		}
	}
	if s.Kind == rules.EWMA {
		limit := r.step(s, z)
		for arm, v := range [2]*big.Float{r.average, newWide().Neg(r.average)} {
			if b.passes(v, limit, r.size) {
				report(arm, 0)
			}
		}
		return hits
	}
	for arm, signed := range [2]*big.Float{z, newWide().Neg(z)} {
		r.addTo(arm, signed, s.Reference)
		if b.isZero(r.arm[arm], r.size) {
			r.since[arm] = 0
		} else {
			r.since[arm]++
		}
		if b.passes(r.arm[arm], wide(s.Interval), r.size) {
			report(arm, r.since[arm]-1)
		}
	}
	return hits
}

// step advances the average by one point and gives its limit there.
func (r *running) step(s rules.Spec, z *big.Float) (limit *big.Float) {
	lambda, one := wide(s.Lambda), wide(1)
	keep := newWide().Sub(one, lambda)
	r.average = newWide().Add(newWide().Mul(lambda, z), newWide().Mul(keep, r.average))
	r.points++
	r.note(z, r.average)
	width := newWide().Quo(lambda, newWide().Sub(wide(2), lambda))
	if !s.Asymptotic {
		gone := wide(1)
		for range 2 * r.points {
			gone.Mul(gone, keep)
		}
		width.Mul(width, newWide().Sub(one, gone))
	}
	return newWide().Mul(wide(s.Limit), newWide().Sqrt(width))
}

func (r *running) addTo(arm int, z *big.Float, k float64) {
	sum := newWide().Add(r.arm[arm], newWide().Sub(z, wide(k)))
	if sum.Sign() < 0 {
		sum = newWide()
	}
	r.arm[arm] = sum
	r.note(z, sum)
}

func (r *running) note(values ...*big.Float) {
	for _, v := range values {
		f, _ := v.Float64()
		r.size = max(r.size, math.Abs(f))
	}
}

// passes reports whether v exceeds limit, both to nine decimals.
func (b *bruteJudge) passes(v, limit *big.Float, size float64) bool {
	d, _ := newWide().Sub(v, limit).Float64()
	if math.Abs(d) > max(1e-6, 1e-12*size) {
		return d > 0
	}
	fv, _ := v.Float64()
	fl, _ := limit.Float64()
	b.doubtNearHalf(fv, size)
	b.doubtNearHalf(fl, 1)
	return rat9(v).Cmp(rat9(limit)) > 0
}

// isZero reports whether an arm is 0 to nine decimals.
func (b *bruteJudge) isZero(v *big.Float, size float64) bool {
	f, _ := v.Float64()
	if f > max(1e-6, 1e-12*size) {
		return false
	}
	b.doubtNearHalf(f, size)
	return rat9(v).Sign() == 0
}

func rat9(v *big.Float) *big.Rat {
	exact, _ := v.Rat(nil)
	r, _ := new(big.Rat).SetString(exact.FloatString(9))
	return r
}

// judgeBound judges an observation of which only a bound is known, by trying values the bound allows: on, and one side
// of, every line. A rule about the point's own place (beyond, beyond a line, span) is proven where it completes for
// every one of them, and open where only for some. A run has a side if every value has it. Trends, alternations,
// averages and sums do not see the point.
func (b *bruteJudge) judgeBound(point int, o observation) (hits []bruteHit, proven bool) {
	allowed := b.allowed(o)
	earlier := b.segment
	newest := member{at: o.at, places: make([]place, len(b.specs))}
	for i := range b.specs {
		p := place{true, true, true}
		for _, m := range allowed {
			p.up, p.down, p.inside = p.up && m.places[i].up, p.down && m.places[i].down, p.inside && m.places[i].inside
		}
		newest.places[i] = p
	}
	worst, open := rules.Consequence(0), rules.Consequence(0)
	for i, s := range b.specs {
		b.segment = append(earlier[:len(earlier):len(earlier)], newest)
		var certain []bruteHit
		possible := false
		switch s.Kind {
		case rules.Beyond, rules.BeyondLine, rules.Span:
			certain, possible = b.forAll(point, i, s, earlier, allowed)
		case rules.SameSide, rules.Within, rules.Outside:
			certain = b.completes(point, i, s)
		}
		hits = append(hits, certain...)
		if len(certain) > 0 {
			worst = max(worst, s.Consequence)
		} else if possible {
			open = max(open, s.Consequence)
		}
	}
	if open > worst {
		b.segment = earlier
		return nil, false
	}
	b.segment = append(earlier, newest)
	for i := range b.sums {
		b.sums[i].pass()
	}
	return hits, true
}

// pass lets a point go by that does not enter the sums; it still lies between the first counting point and the next.
func (r *running) pass() {
	for arm := range r.since {
		if r.since[arm] > 0 {
			r.since[arm]++
		}
	}
}

func (b *bruteJudge) forAll(point, rule int, s rules.Spec, earlier, allowed []member) (certain []bruteHit, possible bool) {
	for i, m := range allowed {
		b.segment = append(earlier[:len(earlier):len(earlier)], m)
		found := b.completes(point, rule, s)
		possible = possible || len(found) > 0
		if i == 0 {
			certain = found
			continue
		}
		kept := certain[:0]
		for _, h := range certain {
			for _, f := range found {
				if h == f {
					kept = append(kept, h)
				}
			}
		}
		certain = kept
	}
	return certain, possible
}

// allowed gives the bound itself (a value near it may be published as the same figure), values as far out as can be,
// and those on, just below and just above every line.
func (b *bruteJudge) allowed(o observation) (out []member) {
	candidates := []float64{o.x, math.Inf(1), math.Inf(-1)}
	for _, s := range b.specs {
		lower, upper := b.linesOf(s, o.at)
		for _, l := range []float64{lower, upper} {
			candidates = append(candidates, l, math.Nextafter(l, math.Inf(1)), math.Nextafter(l, math.Inf(-1)))
		}
	}
	for _, v := range candidates {
		if o.bound == decimal.Below && v <= o.x || o.bound == decimal.Above && v >= o.x {
			out = append(out, b.member(v, o.at))
		}
	}
	return out
}
