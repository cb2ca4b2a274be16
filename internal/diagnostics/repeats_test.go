package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/diagnostics"
)

// Every pair of stretches by hand.
func longestByHand(keys []int) int {
	longest := 0
	for i := range keys {
		for j := i + 1; j < len(keys); j++ {
			k := 0
			for j+k < len(keys) && i+k < j && keys[i+k] == keys[j+k] {
				k++
			}
			longest = max(longest, k)
		}
	}
	return longest
}

func TestLongestRepeatAgainstEveryPair(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 8))
	for trial := range 2000 {
		keys := make([]int, 1+r.IntN(40))
		for i := range keys {
			keys[i] = r.IntN(1 + trial%7)
		}
		length, first, second := diagnostics.LongestRepeat(keys)
		if want := longestByHand(keys); length != want {
			t.Fatalf("%v: longest %d, want %d", keys, length, want)
		}
		if length > 0 && first+length > second {
			t.Fatalf("%v: %d from %d and %d overlap", keys, length, first, second)
		}
		for d := range length {
			if keys[first+d] != keys[second+d] {
				t.Fatalf("%v: %d from %d and %d differ", keys, length, first, second)
			}
		}
	}
}

// The shortest stretch called repeated: one shorter, and the bound of the probability is above one in a hundred.
func TestStretchCritical(t *testing.T) {
	for _, tc := range []struct {
		n     int
		equal float64
		want  int
	}{
		{50, 0.05, 4},   // 45·44/2·0.05³ = 0.124 > 0.01; 43·44/2·0.05⁴ = 0.0059
		{50, 0.001, 3},  // 3 is the least
		{20, 0.3, 7},    // k = 6: 9·10/2·0.3⁶ = 0.033; k = 7: 7·8/2·0.3⁷ = 0.0061
		{12, 0.9, 12},   // none up to 6
		{1000, 0.14, 9}, // k = 8: 985·986/2·0.14⁸ = 0.072; k = 9: 983·984/2·0.14⁹ = 0.0100 (0.00999)
	} {
		if got := diagnostics.StretchCritical(tc.n, tc.equal); got != tc.want {
			t.Errorf("n = %d, q = %v: %d, want %d", tc.n, tc.equal, got, tc.want)
		}
	}
}

// permutations calls visit with every order of the keys.
func permutations(keys []int, visit func([]int)) {
	var at func(int)
	at = func(i int) {
		if i == len(keys) {
			visit(keys)
			return
		}
		for j := i; j < len(keys); j++ {
			keys[i], keys[j] = keys[j], keys[i]
			at(i + 1)
			keys[i], keys[j] = keys[j], keys[i]
		}
	}
	at(0)
}

// Mean and variance of the number of equal neighbours from all 40,320 orders, with a break.
func TestEqualNeighboursAgainstAllOrders(t *testing.T) {
	joined := []bool{false, true, true, false, true, true, true, true}
	for _, keys := range [][]int{{1, 1, 2, 2, 2, 3, 4, 5}, {1, 1, 1, 1, 2, 2, 3, 3}, {1, 2, 3, 4, 5, 6, 7, 7}} {
		sum, squares, orders := 0.0, 0.0, 0.0
		permutations(keys, func(order []int) {
			equal := 0.0
			for i := 1; i < len(order); i++ {
				if joined[i] && order[i] == order[i-1] {
					equal++
				}
			}
			sum, squares, orders = sum+equal, squares+equal*equal, orders+1
		})
		degrees, pairs := diagnostics.Neighbours(joined)
		mean, variance := diagnostics.EqualNeighbours(keys, degrees, float64(pairs))
		wantMean := sum / orders
		wantVariance := squares/orders - wantMean*wantMean
		if math.Abs(mean-wantMean) > 1e-12 || math.Abs(variance-wantVariance) > 1e-12 {
			t.Errorf("%v: mean %v, variance %v, want %v, %v", keys, mean, variance, wantMean, wantVariance)
		}
	}
}
