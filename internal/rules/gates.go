package rules

import (
	"math"
	"math/bits"
	"slices"
)

// Lines are compared many points at a time. Every statistic becomes an integer that orders as it does, and every line
// a gate: the largest such integer that is not beyond it. A point passes a gate where its key is larger, which the
// carry of a subtraction says without a branch, and an add with carry collects the bits of up to 64 points in a word.
// Gates are kept in order: a point that passes one passes all before it, so far out, where few points lie, only those
// that passed the gate before are looked at.

// keyOf gives an integer that orders as x does; both zeros have the same.
func keyOf(x float64) uint64 {
	b := math.Float64bits(x + 0) // -0 + 0 is 0
	return b ^ (uint64(int64(b)>>63) | 1<<63)
}

// reads says which gates a feature reads: above is passing over, below is not passing under, inside is both. -1 is none.
type reads struct{ over, under int }

const (
	// groupSize is the number of gates looked at together.
	groupSize = 4
	// gateShut is passed by no point; it fills the only group of a plan with fewer lines.
	gateShut = ^uint64(0)
)

// setGates prepares the gates of the nominal lines.
func (p *Plan) setGates() {
	over := func(line float64) uint64 { return keyOf(line) }
	under := func(line float64) uint64 { return keyOf(line) - 1 } // x < line unless x passes this
	for i, f := range p.bits {
		if f.readsOver() {
			p.gates = append(p.gates, over(p.lines[i].lo))
		}
		if f.readsUnder() {
			p.gates = append(p.gates, under(p.lines[i].hi))
		}
	}
	slices.Sort(p.gates)
	p.gates = slices.Compact(p.gates)
	for len(p.gates) < groupSize {
		p.gates = append(p.gates, gateShut)
	}
	p.reads = make([]reads, len(p.bits))
	for i, f := range p.bits {
		p.reads[i] = reads{-1, -1}
		if f.readsOver() {
			p.reads[i].over, _ = slices.BinarySearch(p.gates, over(p.lines[i].lo))
		}
		if f.readsUnder() {
			p.reads[i].under, _ = slices.BinarySearch(p.gates, under(p.lines[i].hi))
		}
	}
}

func (f feature) readsOver() bool {
	return f.kind == above || f.kind == aboveAction || f.kind == aboveWarning || f.kind == inside
}

func (f feature) readsUnder() bool {
	return f.kind == below || f.kind == belowAction || f.kind == belowWarning || f.kind == inside
}

// gatesPointsMin is the number of points from which gates are quicker than comparing one by one.
const gatesPointsMin = 6

// atNominal is features for points at the nominal scale; see setKeys for up and down.
func (p *Plan) atNominal(st *State, xs []float64) (up, down uint64) {
	keys := st.keys[:len(xs)]
	up, down = setKeys(keys, xs)
	p.pass(st, keys)
	full := ^uint64(0) >> (64 - len(xs))
	for i, r := range p.reads {
		word := full
		if r.over >= 0 {
			word &= st.passed[r.over]
		}
		if r.under >= 0 {
			word &^= st.passed[r.under]
		}
		st.now[i] = word
	}
	return up, down
}

// fewPoints is the number of points up to which looking at each is quicker than looking at all 64.
const fewPoints = 4

// pass fills st.passed with a word for each gate, from the middle outwards.
func (p *Plan) pass(st *State, keys []uint64) {
	middle := len(p.gates) / 2
	low, high := max(0, middle-groupSize), min(middle+groupSize, len(p.gates))
	p.passGroup(st, keys, low)
	if high-low > groupSize {
		p.passGroup(st, keys, high-groupSize)
	}
	full := ^uint64(0) >> (64 - len(keys))
	for ; high < len(p.gates); high++ {
		if may := st.passed[high-1]; bits.OnesCount64(may) <= fewPoints {
			st.passed[high] = passing(&st.keys, may, p.gates[high])
		} else {
			p.passGroup(st, keys, high)
			high += groupSize - 1
		}
	}
	for low--; low >= 0; low-- {
		if may := full &^ st.passed[low+1]; bits.OnesCount64(may) <= fewPoints {
			st.passed[low] = full&^may | passing(&st.keys, may, p.gates[low])
		} else {
			p.passGroup(st, keys, low-groupSize+1)
			low -= groupSize - 1
		}
	}
}

// passGroup fills the words of a group of gates from first on, or of the nearest group there is.
func (p *Plan) passGroup(st *State, keys []uint64, first int) {
	first = max(0, min(first, len(p.gates)-groupSize))
	passingGroup(keys, (*[groupSize]uint64)(p.gates[first:]), (*[groupSize]uint64)(st.passed[first:]))
}

// passingGroup collects the points that pass each of a group of gates, the first point in the lowest bit.
func passingGroup(keys []uint64, gates, passed *[groupSize]uint64) {
	// A key is beyond a gate where the gate's complement added to it carries.
	a, b, c, d := ^gates[0], ^gates[1], ^gates[2], ^gates[3]
	var wa, wb, wc, wd, carry uint64
	for i := len(keys) - 1; i >= 0; i-- {
		k := keys[i]
		_, carry = bits.Add64(k, a, 0)
		wa, _ = bits.Add64(wa, wa, carry)
		_, carry = bits.Add64(k, b, 0)
		wb, _ = bits.Add64(wb, wb, carry)
		_, carry = bits.Add64(k, c, 0)
		wc, _ = bits.Add64(wc, wc, carry)
		_, carry = bits.Add64(k, d, 0)
		wd, _ = bits.Add64(wd, wd, carry)
	}
	*passed = [groupSize]uint64{wa, wb, wc, wd}
}

// passing collects those of the points in may that pass a gate.
func passing(keys *[64]uint64, may, gate uint64) (word uint64) {
	for may != 0 {
		point := may & -may
		_, carry := bits.Sub64(gate, keys[bits.TrailingZeros64(may)&63], 0)
		word |= point & -carry
		may ^= point
	}
	return word
}

// setKeys fills keys with those of xs and collects the points that lie above and below the one before them; of the first
// point nothing is known.
func setKeys(keys []uint64, xs []float64) (up, down uint64) {
	var carry uint64
	keys = keys[:len(xs)]
	before := keyOf(xs[0])
	for i, x := range xs {
		here := keyOf(x)
		keys[i] = here
		_, carry = bits.Sub64(before, here, 0)
		up, _ = bits.Add64(up, up, carry)
		_, carry = bits.Sub64(here, before, 0)
		down, _ = bits.Add64(down, down, carry)
		before = here
	}
	// The first point has come to lie in the highest of the bits used.
	return bits.Reverse64(up) >> (64 - len(xs)), bits.Reverse64(down) >> (64 - len(xs))
}
