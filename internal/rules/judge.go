package rules

import (
	"math"
	"math/bits"

	"limitary/internal/decimal"
)

// Hit is one rule completing at one point. WindowBack and FirstBack count points (not results) back from it, 0 being
// the point itself: to the first point of the examined window and to the first one that counts.
type Hit struct {
	// Point is the index of the point in the call.
	Point int
	// Rule is the index of the rule in Plan.Specs.
	Rule                  int
	Side                  Side
	WindowBack, FirstBack int
}

// comparePlaces is the number of decimals at which standardised values and accumulated sums are compared.
const comparePlaces = 9

// Judge takes the points xs, in order, into the state and calls hit for every rule that completes, by point, then by
// rule, then upper before lower. The statistics are finite and rounded as published. At gives each point's scale; nil
// means the nominal one. Judge allocates nothing.
func (p *Plan) Judge(st *State, xs []float64, at []Scale, hit func(Hit)) {
	for start := 0; start < len(xs); start += 64 {
		chunk := xs[start:min(start+64, len(xs))]
		var scales []Scale
		if at != nil {
			scales = at[start : start+len(chunk)]
		}
		p.features(st, chunk, scales)
		p.search(st, chunk, scales, start, hit)
		p.advance(st, len(chunk))
	}
}

// features fills st.now with the bits of up to 64 points, the first in bit 0.
func (p *Plan) features(st *State, xs []float64, at []Scale) {
	if len(xs) < gatesPointsMin || !uniform(at, p.nominal) {
		p.oneByOne(st, xs, at)
		if p.differences {
			up, down := p.compare(st, xs, at)
			p.setDifferences(st, up, down)
		}
		return
	}
	up, down := p.atNominal(st, xs)
	if p.differences {
		firstUp, firstDown := p.compare(st, xs[:1], at)
		p.setDifferences(st, up|firstUp, down|firstDown)
		st.last, st.lastAt, st.hasLast = xs[len(xs)-1], Scale{Centre: p.nominal.Centre, Sigma: p.nominal.Sigma}, true
	}
}

func uniform(at []Scale, nominal Scale) bool {
	for _, s := range at {
		if s != nominal {
			return false
		}
	}
	return true
}

// oneByOne is features for few points, and for points with scales of their own, except differences.
func (p *Plan) oneByOne(st *State, xs []float64, at []Scale) {
	clear(st.now)
	lines := p.lines
	for j, x := range xs {
		if at != nil {
			lines = p.linesAt(st, at[j])
		}
		for i, f := range p.bits {
			if f.holds(x, lines[i]) {
				st.now[i] |= 1 << j
			}
		}
	}
}

func (f feature) holds(x float64, t threshold) bool {
	switch f.kind {
	case above, aboveAction, aboveWarning:
		return x > t.lo
	case below, belowAction, belowWarning:
		return x < t.hi
	case inside:
		return x > t.lo && x < t.hi
	}
	return false
}

// setDifferences fills the rising and falling bits.
func (p *Plan) setDifferences(st *State, up, down uint64) {
	for i, f := range p.bits {
		switch f.kind {
		case rising:
			st.now[i] = up
		case falling:
			st.now[i] = down
		}
	}
}

// compare collects the points that rise above and fall below the one before them, and remembers the newest.
func (p *Plan) compare(st *State, xs []float64, at []Scale) (up, down uint64) {
	for j, x := range xs {
		scale := p.nominal
		if at != nil {
			scale = at[j]
		}
		scale.Inspected = 0 // neighbours are compared by centre and sigma
		if st.hasLast {
			before, here := st.last, x
			if scale != st.lastAt {
				before, here = standardised(st.last, st.lastAt), standardised(x, scale)
			}
			if here > before {
				up |= 1 << j
			} else if here < before {
				down |= 1 << j
			}
		}
		st.last, st.lastAt, st.hasLast = x, scale, true
	}
	return up, down
}

func standardised(x float64, at Scale) float64 {
	z := (x - at.Centre) / at.Sigma
	if !(math.Abs(z) < 1e6) {
		return z // nine decimals of it are noise
	}
	return decimal.Round(z, comparePlaces)
}

// advance moves the latest points into the past.
func (p *Plan) advance(st *State, n int) {
	for i, word := range st.now {
		if n == 64 {
			st.past[i] = word
		} else {
			st.past[i] = st.past[i]>>n | word<<(64-n)
		}
	}
	st.count = min(st.count+n, WindowPointsMax)
}

// search evaluates every rule for the points in st.now and reports what completes.
func (p *Plan) search(st *State, xs []float64, at []Scale, start int, hit func(Hit)) {
	any := uint64(0)
	for k := range p.steps {
		s := &p.steps[k]
		var f found
		if s.slot < 0 {
			f = p.complete(st, s)
		} else {
			f = p.accumulate(st, s, xs, at)
		}
		st.found[k] = f
		any |= f.upper | f.lower | f.none
	}
	for ; any != 0; any &= any - 1 {
		j := bits.TrailingZeros64(any)
		for k := range p.steps {
			if f := &st.found[k]; (f.upper|f.lower|f.none)>>j&1 == 1 {
				p.report(st, k, j, start+j, hit)
			}
		}
	}
}

// found holds, for one rule, a bit for each point it completes at.
type found struct{ upper, lower, none uint64 }

// complete evaluates one windowed rule.
func (p *Plan) complete(st *State, s *step) (f found) {
	spec := &p.specs[s.rule]
	up, down := st.words(s.upper), st.words(s.lower)
	switch spec.Kind {
	case Beyond:
		f.upper, f.lower = up.atLeast(spec.K, spec.M), down.atLeast(spec.K, spec.M)
	case BeyondLine:
		f.upper, f.lower = up.now, down.now
	case SameSide:
		f.upper, f.lower = up.run(spec.N), down.run(spec.N)
	case Trend:
		f.upper, f.lower = up.run(spec.N-1), down.run(spec.N-1)
	case Alternating:
		// A turn at a point is a rise after a fall or a fall after a rise; N points have N-2 of them.
		f.none = up.and(down.back(1)).or(down.and(up.back(1))).run(spec.N - 2)
	case Within:
		f.none = st.words(s.inside).run(spec.N)
	case Outside:
		out := up.or(down).run(spec.N)
		if out == 0 {
			break
		}
		allUp, allDown := up.run(spec.N), down.run(spec.N)
		f.none = out &^ (allUp | allDown)
		if spec.OneSideOK {
			f.upper, f.lower = allUp, allDown
		}
	case Span:
		f.upper, f.lower = up.and(down.back(1)).now, down.and(up.back(1)).now
		if spec.Sides == UpperOnly {
			f.lower = 0
		} else if spec.Sides == LowerOnly {
			f.upper = 0
		}
	}
	return f
}

// report calls hit for the sides on which step k completes at bit j.
func (p *Plan) report(st *State, k, j, point int, hit func(Hit)) {
	f, s := &st.found[k], &p.steps[k]
	if f.upper>>j&1 == 1 {
		p.emit(st, s, Upper, s.upper, j, point, hit)
	}
	if f.lower>>j&1 == 1 {
		p.emit(st, s, Lower, s.lower, j, point, hit)
	}
	if f.none>>j&1 == 1 {
		p.emit(st, s, NoSide, -1, j, point, hit)
	}
}

func (p *Plan) emit(st *State, s *step, side Side, feature, j, point int, hit func(Hit)) {
	spec := &p.specs[s.rule]
	h := Hit{Point: point, Rule: s.rule, Side: side}
	switch {
	case spec.Kind == Beyond:
		h.WindowBack = min(spec.M, st.count+j+1) - 1
		h.FirstBack = st.words(feature).earliest(j, spec.M)
	case spec.Kind == CUSUM:
		h.FirstBack = st.backs[s.arms][j][side-Upper]
		h.WindowBack = h.FirstBack
	default:
		h.WindowBack = spec.Window() - 1
		h.FirstBack = h.WindowBack
	}
	hit(h)
}
