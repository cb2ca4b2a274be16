package diagnostics

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
)

const (
	// CodeRepeatedStretch is the code of a stretch of values that comes twice.
	CodeRepeatedStretch = "REPEATED_STRETCH"
	// CodeDoubledPosts is the code of results that follow their equals.
	CodeDoubledPosts = "DOUBLED_POSTS"
	// stretchMin is the shortest stretch that is ever called repeated.
	stretchMin = 3
	// repeatsMin is the least number of values looked at.
	repeatsMin = 10
)

// repeatedStretch asks whether some k values in a row come again, in the same order, later on. If values are independent
// and two are equal with probability q, two given stretches agree with probability q^k, so any two do with at most the
// number of pairs times that; k is the shortest for which this is below the level. Keys stand for values; floor is the
// least that q is taken for.
func repeatedStretch(subject string, keys []int, floor float64) Test {
	t := Test{
		Code: CodeRepeatedStretch, Name: "longest stretch of values that comes again", Subject: subject, N: len(keys), Level: Level,
		CouldMiss: "Copies of fewer values, in another order, with one digit changed, or of results outside the basis.",
	}
	n := len(keys)
	if n < repeatsMin {
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs at least %d values.", repeatsMin))
	}
	equal := max(floor, tieProbability(keys))
	critical := stretchCritical(n, equal)
	if critical > n/2 {
		return t.notMade(Void, "So many values are equal that any stretch may come again by chance.")
	}
	length, first, second := longestRepeat(keys)
	noun := "value"
	if subject == SetsOfDuplicates {
		noun = "set"
	}
	t = t.withCritical(float64(length), float64(critical), length >= critical)
	t.text = fmt.Sprintf("%d %ss in a row, from %s %d on, come again from %s %d on; by chance even %d would in fewer than one basis of a hundred.", length, noun, noun, first+1, noun, second+1, critical)
	t.advice = "Look for a block of results posted twice, or copied where they should have been measured. Void the copies; they make the basis look larger and steadier than it is."
	t.Reason = fmt.Sprintf("Two %ss are equal with probability %.2g.", noun, equal)
	return t
}

// tieProbability is the share of pairs that are equal.
func tieProbability(keys []int) float64 {
	n, s2, _ := tieSums(keys)
	return s2 / (n * (n - 1))
}

// tieSums gives the number of values, and of ordered pairs and triples of equal ones.
func tieSums(keys []int) (n, pairs, triples float64) {
	counts := map[int]float64{}
	for _, k := range keys {
		counts[k]++
	}
	for _, c := range counts { // whole numbers below 2^53 add up alike in any order
		pairs += c * (c - 1)
	}
	for _, c := range counts {
		if c > 2 {
			triples += c * (c - 1) * (c - 2)
		}
	}
	return float64(len(keys)), pairs, triples
}

// stretchCritical gives the shortest length of a repeated stretch that chance makes with less than the level; more than
// n/2 if there is none.
func stretchCritical(n int, equal float64) int {
	for k := stretchMin; 2*k <= n; k++ {
		starts := float64(n - 2*k + 1)
		if starts*(starts+1)/2*math.Pow(equal, float64(k)) < Level {
			return k
		}
	}
	return n
}

// longestRepeat gives the longest stretch that comes again without overlapping itself, and where its two copies begin.
func longestRepeat(keys []int) (length, first, second int) {
	hashes := newRolling(keys)
	low, high := 0, len(keys)/2 // a stretch of low comes again, none of more than high does
	for low < high {
		k := min(high, max(low+1, min(2*low, (low+high+1)/2)))
		if i, j, ok := hashes.repeat(k); ok {
			low, first, second = k, i, j
		} else {
			high = k - 1
		}
	}
	return low, first, second
}

// rolling holds polynomial hashes of all beginnings of a list, modulo 2^64 with an odd factor, which finds candidates.
// What they find is compared value by value.
type rolling struct {
	keys            []int
	prefix, factors []uint64
}

const hashFactor = 0x9E3779B97F4A7C15

func newRolling(keys []int) *rolling {
	r := &rolling{keys, make([]uint64, len(keys)+1), make([]uint64, len(keys)+1)}
	r.factors[0] = 1
	for i, k := range keys {
		mixed := (uint64(k) + 0x632BE59BD9B4E019) * 0xD6E8FEB86659FD93
		mixed ^= mixed >> 32
		r.prefix[i+1] = r.prefix[i]*hashFactor + mixed
		r.factors[i+1] = r.factors[i] * hashFactor
	}
	return r
}

// repeat finds two equal stretches of k values that do not overlap. Of several with one hash the earliest is kept, from
// which a later one is the more likely to be clear.
func (r *rolling) repeat(k int) (first, second int, ok bool) {
	seen := make(map[uint64]int, len(r.keys))
	for j := 0; j+k <= len(r.keys); j++ {
		h := r.prefix[j+k] - r.prefix[j]*r.factors[k]
		i, known := seen[h]
		if !known {
			seen[h] = j
			continue
		}
		if i+k <= j && r.same(i, j, k) {
			return i, j, true
		}
	}
	return 0, 0, false
}

func (r *rolling) same(i, j, k int) bool {
	for d := range k {
		if r.keys[i+d] != r.keys[j+d] {
			return false
		}
	}
	return true
}

// doubledPosts counts neighbours that are equal and compares with all orders of the same values: mean and variance of
// the number are exact for these, its tail is that of a gamma distribution with both.
func doubledPosts(subject string, keys []int, joined []bool) Test {
	t := Test{
		Code: CodeDoubledPosts, Name: "equal neighbours", Subject: subject, N: len(keys), Level: Level,
		CouldMiss: "Results posted twice with others between, under another time or rounded differently.",
	}
	degrees, pairs := neighbours(joined)
	if len(keys) < repeatsMin || pairs < repeatsMin-1 {
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs at least %d values with no break between.", repeatsMin))
	}
	equal := 0
	for i := 1; i < len(keys); i++ {
		if joined[i] && keys[i] == keys[i-1] {
			equal++
		}
	}
	mean, variance := equalNeighbours(keys, degrees, float64(pairs))
	if variance <= 1e-12*mean*mean && mean > 0 {
		return t.notMade(Void, "The values are equal.")
	}
	t = t.withP(float64(equal), gammaTail(float64(equal)-0.5, mean, variance))
	t.text = fmt.Sprintf("%d of %d pairs of neighbours are equal, where %.1f would be by chance, p = %.2g.", equal, pairs, mean, *t.PValue)
	t.advice = "Look for results posted twice, or averaged and entered for each replicate, and void the copies. Neighbours also agree often where results drift slowly and are rounded; see the correlation."
	return t
}

// equalNeighbours gives mean and variance of the number of equal neighbours over all orders of the values. Two different
// pairs of neighbours share a value in Σ d(d-1)/2 cases, with d neighbours of each place.
func equalNeighbours(keys []int, degrees []float64, pairs float64) (mean, variance float64) {
	n, s2, s3 := tieSums(keys)
	sharing := 0.0
	for _, d := range degrees {
		sharing += d * (d - 1) // ordered
	}
	one := s2 / (n * (n - 1))
	three := s3 / (n * (n - 1) * (n - 2))
	apart := (s2*s2 - 4*s3 - 2*s2) / (n * (n - 1) * (n - 2) * (n - 3))
	mean = pairs * one
	return mean, max(0, pairs*one+sharing*three+(pairs*(pairs-1)-sharing)*apart-mean*mean)
}

// gammaTail is the probability above x of a gamma distribution with the given moments; of one that is always 0, it is 1
// below and 0 above.
func gammaTail(x, mean, variance float64) float64 {
	switch {
	case x <= 0:
		return 1
	case mean <= 0 || variance <= 0:
		return 0
	}
	return mathext.GammaIncRegComp(mean*mean/variance, x*mean/variance)
}
