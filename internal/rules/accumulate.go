package rules

import (
	"math"

	"limitary/internal/decimal"
)

const (
	// ewmaSlots: the average in sigmas, and the part (1-lambda)^(2t) of its variance still missing after t points.
	ewmaSlots = 2
	// cusumSlots: the upper and lower arm in sigmas, and the points since each was last 0.
	cusumSlots = 4
)

// standardisedMax bounds a value in sigmas as it enters a sum, so that no sum of them is infinite and none, of two
// infinities, not a number. It is beyond every limit by far.
const standardisedMax = 1e300

// arms holds, for the points of one word, how far back each arm's sum began.
type arms [64][2]int

// restart sets a rule's accumulators to the start of a segment.
func (s *Spec) restart(slots []float64, headStart bool) {
	switch {
	case s.Kind == EWMA:
		slots[0], slots[1] = 0, 1
	case s.Kind == CUSUM && headStart:
		slots[0], slots[1] = s.HeadStart, s.HeadStart
	}
}

// reached reports whether points can have led to these accumulators.
func (s *Spec) reached(slots []float64) bool {
	if s.Kind == EWMA {
		return math.Abs(slots[0]) <= standardisedMax && slots[1] >= 0 && slots[1] <= 1
	}
	for _, v := range slots[:cusumSlots] {
		if !(v >= 0 && v <= math.MaxFloat64) {
			return false
		}
	}
	return true
}

// accumulate evaluates an EWMA or CUSUM rule. Both run in sigmas, unrounded, over the points of a segment, and are not
// reset by a signal; they are rounded only to be compared.
func (p *Plan) accumulate(st *State, s *step, xs []float64, at []Scale) (f found) {
	spec := &p.specs[s.rule]
	slots := st.slots[s.slot:]
	for j, x := range xs {
		scale := p.nominal
		if at != nil {
			scale = at[j]
		}
		z := max(-standardisedMax, min(standardisedMax, (x-scale.Centre)/scale.Sigma))
		var up, down bool
		if spec.Kind == EWMA {
			up, down = spec.average(slots, z)
		} else {
			up, down = spec.sum(slots, z)
			st.backs[s.arms][j] = [2]int{int(slots[2]) - 1, int(slots[3]) - 1}
		}
		if up && spec.Sides != LowerOnly {
			f.upper |= 1 << j
		}
		if down && spec.Sides != UpperOnly {
			f.lower |= 1 << j
		}
	}
	return f
}

// average advances an EWMA by one point.
func (s *Spec) average(slots []float64, z float64) (up, down bool) {
	keep := 1 - s.Lambda
	// The conversions keep the product and the sum apart, so that every machine stores the same bits.
	slots[0] = float64(s.Lambda*z) + float64(keep*slots[0])
	slots[1] *= keep * keep
	limit := s.averageLimit(slots[1])
	return exceeds(slots[0], limit), exceeds(-slots[0], limit)
}

// averageLimit gives the limit of an EWMA, missing being the part of the variance still to come. The variance of the
// average after t points is lambda/(2-lambda)·(1-(1-lambda)^(2t)) times that of a point (Lucas and Saccucci,
// Technometrics 32(1), 1990; from memory, and an identity of the geometric series).
func (s *Spec) averageLimit(missing float64) float64 {
	if s.Asymptotic {
		missing = 0
	}
	return s.Limit * math.Sqrt(s.Lambda/(2-s.Lambda)*(1-missing))
}

// sumsToZero is what rounds to 0 at comparePlaces decimals: an arm that is 0 on paper may keep a trace of float64's
// error, and its first counting point must not depend on that.
const sumsToZero = 0.5e-9

// sum advances both arms of a tabular CUSUM by one point.
func (s *Spec) sum(slots []float64, z float64) (up, down bool) {
	for arm, step := range [2]float64{z - s.Reference, -z - s.Reference} {
		slots[arm] = max(0, slots[arm]+step)
		if slots[arm] < sumsToZero {
			slots[2+arm] = 0
		} else {
			slots[2+arm]++
		}
	}
	return exceeds(slots[0], s.Interval), exceeds(slots[1], s.Interval)
}

// exceeds compares at comparePlaces decimals. Values far beyond any limit are not worth rounding.
func exceeds(v, limit float64) bool {
	if v > limit+1 || v < limit-1 {
		return v > limit
	}
	return decimal.Round(v, comparePlaces) > decimal.Round(limit, comparePlaces)
}
