package counts

import (
	"fmt"
	"math"
)

// Laney gives the factor σ_z by which standardised counts vary more from one sample to the next than their law says
// (Laney 2002, Improved Control Charts for Attributes, Quality Engineering 14(4); from memory): the mean moving range of
// z over d2 = 2/√π, the mean range of two standard normal values. Lines are then mean ± k·σ_z·σ_i. It is about 1 where
// the law holds and may be below 1; whether to use such a factor is for the caller to say.
//
// z are in the order of the track, see Standardised. breakBefore[i] says that no moving range reaches from z[i-1] to
// z[i]; after an excluded sample, which is not in z, it must be set. nil says that there is no break. With no moving
// range at all, ranges is 0 and sigmaZ is 0, which is no estimate.
func Laney(z []float64, breakBefore []bool) (sigmaZ float64, ranges int, err error) {
	if breakBefore != nil && len(breakBefore) != len(z) {
		return 0, 0, refuse("breakBefore", float64(len(breakBefore)), "its length must be that of z, %d", len(z))
	}
	sum := 0.0
	for i, value := range z {
		if err := checkRange(fmt.Sprintf("z[%d]", i), value, -zMax, zMax); err != nil {
			return 0, 0, err
		}
		if i > 0 && (breakBefore == nil || !breakBefore[i]) {
			sum += math.Abs(value - z[i-1])
			ranges++
		}
	}
	if ranges == 0 {
		return 0, 0, nil
	}
	return sum / float64(ranges) * math.Sqrt(math.Pi) / 2, ranges, nil
}

// zMax is beyond what any samples lead to, and its sums are finite.
const zMax = 1e100
