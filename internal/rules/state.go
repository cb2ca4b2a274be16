package rules

import (
	"encoding/binary"
	"errors"
	"math"
)

// State is what a plan remembers of the points of the current segment. It belongs to the plan that started it and is
// changed by judging; it is not safe for concurrent use.
type State struct {
	// count is the number of points in the segment, no more than WindowPointsMax.
	count int
	// past holds for each feature the latest 64 points, the newest in the top bit; none is 0.
	past []uint64
	// slots are the accumulators of EWMA and CUSUM rules.
	slots []float64
	// last is the newest point, where it can be compared with the next one.
	last    float64
	lastAt  Scale
	hasLast bool
	// lines are the thresholds at the scale linesAt, kept because points of a size other than nominal share a few
	// scales; they are computed where sized is set.
	lines   []threshold
	linesAt Scale
	sized   bool
	// The rest is scratch of one call.
	now    []uint64
	keys   [64]uint64
	passed []uint64
	found  []found
	backs  []arms
}

// Start gives the state of a segment with no points yet. A CUSUM begins at its head start where headStart is set, which
// is for the start of a version and for a mark that asks for it, and at 0 elsewhere.
func (p *Plan) Start(headStart bool) *State {
	st := &State{
		past: make([]uint64, len(p.bits)), now: make([]uint64, len(p.bits)),
		slots: make([]float64, p.slots), lines: make([]threshold, len(p.bits)),
		passed: make([]uint64, len(p.gates)),
		found:  make([]found, len(p.steps)), backs: make([]arms, p.arms),
	}
	p.Reset(st, headStart)
	return st
}

// Reset makes st the state of a new segment.
func (p *Plan) Reset(st *State, headStart bool) {
	st.count, st.hasLast = 0, false
	clear(st.past)
	clear(st.slots)
	for _, s := range p.steps {
		if s.slot >= 0 {
			p.specs[s.rule].restart(st.slots[s.slot:], headStart)
		}
	}
}

// CopyFrom makes st equal to other, a state of the same plan.
func (st *State) CopyFrom(other *State) {
	copy(st.past, other.past)
	copy(st.slots, other.slots)
	st.count, st.last, st.lastAt, st.hasLast = other.count, other.last, other.lastAt, other.hasLast
}

// Count is the number of points of the segment so far, as far as the plan's windows care.
func (st *State) Count() int { return st.count }

// stateFormat numbers the layout AppendState writes.
const stateFormat = 1

// AppendState appends the state's stored form to b. Equal forms judge every continuation alike: only what the plan's
// windows can still see is written.
func (p *Plan) AppendState(b []byte, st *State) []byte {
	flags := byte(0)
	if st.hasLast && p.differences {
		flags = 1
	}
	b = append(b, stateFormat, byte(min(st.count, p.window)), flags)
	width, shift := p.stateWidth()
	for _, word := range st.past {
		b = append(b, binary.LittleEndian.AppendUint64(nil, word>>shift)[:width]...)
	}
	if flags == 1 {
		for _, v := range [...]float64{st.last, st.lastAt.Centre, st.lastAt.Sigma} {
			b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
		}
	}
	for _, v := range st.slots {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
	}
	return b
}

// stateWidth gives the bytes one feature takes in the stored form, and how far its word is shifted down to them.
func (p *Plan) stateWidth() (bytes, shift int) {
	points := p.window - 1
	return (points + 7) / 8, 64 - points
}

// LoadState reads a form that AppendState of the same plan wrote and gives what follows it. After an error st is fit for
// Reset only.
func (p *Plan) LoadState(b []byte, st *State) (rest []byte, err error) {
	width, shift := p.stateWidth()
	if len(b) < 3 || b[0] != stateFormat {
		return nil, errors.New("rules: stored state has an unknown format")
	}
	hasLast := b[2] == 1
	need := 3 + width*len(st.past) + 8*len(st.slots)
	if hasLast {
		need += 24
	}
	if len(b) < need || hasLast && !p.differences || b[2] > 1 || int(b[1]) > p.window {
		return nil, errors.New("rules: stored state does not belong to these rules")
	}
	st.count, st.hasLast = int(b[1]), hasLast
	b = b[3:]
	for i := range st.past {
		var word [8]byte
		copy(word[:], b[:width])
		st.past[i] = binary.LittleEndian.Uint64(word[:]) << shift
		b = b[width:]
	}
	take := func() float64 {
		v := math.Float64frombits(binary.LittleEndian.Uint64(b))
		b = b[8:]
		return v
	}
	if hasLast {
		st.last = take()
		st.lastAt.Centre = take()
		st.lastAt.Sigma = take()
	}
	for i := range st.slots {
		st.slots[i] = take()
	}
	for _, s := range p.steps {
		if s.slot >= 0 && !p.specs[s.rule].reached(st.slots[s.slot:]) {
			return nil, errors.New("rules: stored state holds a sum that no points lead to")
		}
	}
	return b, nil
}

// Reach is how many points back a coming hit may refer: the longest window, or the length of a CUSUM's present sum.
func (p *Plan) Reach(st *State) int {
	reach := p.window
	for _, s := range p.steps {
		if p.specs[s.rule].Kind == CUSUM {
			reach = max(reach, int(st.slots[s.slot+2])+1, int(st.slots[s.slot+3])+1)
		}
	}
	return reach
}
