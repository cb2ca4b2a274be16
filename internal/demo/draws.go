package demo

import (
	"math"
	"math/rand/v2"

	pb "limitary/api/limitary/v1"
)

// Counts are drawn as they fall: the cut of noise is for readings only.

// countOf draws what was counted in one sample, of a process whose fraction or mean count is at a level.
type countOf func(rng *rand.Rand, level float64) *pb.Count

// items draws samples of at least from and at most to items, of which each fails with a probability of its level.
func items(from, to int) countOf {
	return func(rng *rand.Rand, fraction float64) *pb.Count {
		inspected, failed := from+rng.IntN(to-from+1), 0
		for range inspected {
			if rng.Float64() < fraction {
				failed++
			}
		}
		return &pb.Count{Nonconforming: float64(failed), Inspected: float64(inspected)}
	}
}

// colonyCount draws a Poisson number with the level as its mean: the uniform numbers whose product stays above e^-mean.
func colonyCount(rng *rand.Rand, mean float64) *pb.Count {
	colonies := 0
	for product := rng.Float64(); product > math.Exp(-mean); product *= rng.Float64() {
		colonies++
	}
	return &pb.Count{Nonconforming: float64(colonies), Inspected: 1}
}

// oneOf draws the concentration of a routine sample: that of one of the waters, which varies by a relative spread.
func oneOf(waters []float64, relative float64) func(*rand.Rand) float64 {
	return func(rng *rand.Rand) float64 {
		return waters[rng.IntN(len(waters))] * (1 + float64(relative*noise(rng)))
	}
}

// growing is a standard deviation that has a constant part and one in proportion to the level.
func growing(constant, relative float64) func(level float64) float64 {
	return func(level float64) float64 {
		part := relative * level
		return math.Sqrt(float64(constant*constant) + float64(part*part))
	}
}

// fromLog writes a reading that is generated as its natural logarithm.
func fromLog(decimals int) func(int, float64) string {
	return func(_ int, x float64) string { return fixed(math.Exp(x), decimals) }
}
