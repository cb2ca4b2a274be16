package diagnostics_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// Goal: each test reports clean duplicates in one case of a hundred, or less, within four standard errors, with limits
// estimated as the chart does; and where readings are fine, those that are exact are not asleep.
func TestSizeOnCleanDuplicates(t *testing.T) {
	duplicate, relative := chart.DuplicateRange, chart.RelativeRange
	for i, c := range []struct {
		name string
		b    duplicateBasis
		runs int
	}{
		{"one sigma", duplicateBasis{duplicate, 20, pairsOnly, 40, constantly(0.1), fineUnit, noOptions, nil}, 1200},
		{"one sigma", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), fineUnit, noOptions, nil}, 500},
		{"one sigma", duplicateBasis{duplicate, 200, pairsOnly, 40, constantly(0.1), fineUnit, noOptions, nil}, 150},
		{"one sigma, 2 to 5 readings", duplicateBasis{duplicate, 40, twoToFive, 40, constantly(0.1), fineUnit, noOptions, nil}, 400},
		{"bands", duplicateBasis{duplicate, 50, pairsOnly, 40, banded, fineUnit, bandsOfSix, nil}, 500},
		{"function", duplicateBasis{duplicate, 20, pairsOnly, 40, growing, fineUnit, fitted, nil}, 600},
		{"function", duplicateBasis{duplicate, 200, pairsOnly, 40, growing, fineUnit, fitted, nil}, 100},
		{"relative", duplicateBasis{relative, 50, pairsOnly, 40, proportional, fineUnit, noOptions, nil}, 500},
		{"relative, plain below 5", duplicateBasis{relative, 60, pairsOnly, 40, levelling, fineUnit, limits.DuplicateOptions{AbsoluteBelow: 5}, nil}, 300},
		{"rounded to 0.4 sigma", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), 0.04, noOptions, nil}, 500},
		{"rounded to 2 sigma", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), 0.2, noOptions, nil}, 500},
		{"relative, low means coarse", duplicateBasis{relative, 50, pairsOnly, 40, proportional, 0.02, noOptions, nil}, 500},
	} {
		t.Run(fmt.Sprintf("%s, %d sets", c.name, c.b.n), func(t *testing.T) {
			t.Parallel()
			y := simulateDuplicates(t, c.b, c.runs, uint64(200+i))
			for _, key := range y.order {
				if strings.HasPrefix(key, diagnostics.CodeRoundingCoarse) && c.b.step > fineUnit {
					continue // readings are coarse
				}
				rate := y.rate(key)
				t.Logf("%-48s made %5d of %d, found %.4f", key, y.made[key], y.runs, rate)
				if rate > diagnostics.Level+fourErrors(diagnostics.Level, y.runs) {
					t.Errorf("%s: size %.4f", key, rate)
				}
				if y.made[key]+y.voided[key] == 0 {
					t.Errorf("%s was never made", key)
				}
			}
			joint, stated := float64(y.any)/float64(y.runs), diagnostics.JointRateDuplicates
			t.Logf("at least one finding: %.4f", joint)
			if c.b.step == fineUnit && joint > stated+fourErrors(stated, y.runs) {
				t.Errorf("at least one finding in %.4f, stated %.3f", joint, stated)
			}
		})
	}
}

// trimmedPairs measures pairs again until they agree within two of their standard deviations, for a sigma of 0.1.
func trimmedPairs(r *rand.Rand, sets [][]float64) {
	for _, xs := range sets {
		for math.Abs(xs[0]-xs[1]) > 0.2*math.Sqrt2 {
			mean := (xs[0] + xs[1]) / 2
			xs[0], xs[1] = mean+0.1*r.NormFloat64(), mean+0.1*r.NormFloat64()
		}
	}
}

// tripled triples the largest range.
func tripled(_ *rand.Rand, sets [][]float64) {
	largest := sets[0]
	for _, xs := range sets {
		if math.Abs(xs[1]-xs[0]) > math.Abs(largest[1]-largest[0]) {
			largest = xs
		}
	}
	largest[1] += 2 * (largest[1] - largest[0])
}

// copiedReadings takes the second reading from the first in one pair of ten.
func copiedReadings(_ *rand.Rand, sets [][]float64) {
	for i := 0; i < len(sets); i += 10 {
		sets[i][1] = sets[i][0]
	}
}

// copiedSets repeats a block of five sets, doubledSets one set in five.
func copiedSets(_ *rand.Rand, sets [][]float64) {
	copy(sets[len(sets)-5:], sets[3:8])
}

func doubledSets(_ *rand.Rand, sets [][]float64) {
	for i := 1; i < len(sets); i += 5 {
		sets[i] = sets[i-1]
	}
}

// Goal: each test finds what it is for, at rates well below what was simulated when they were set down.
func TestPowerOnDuplicates(t *testing.T) {
	t.Parallel()
	const runs = 100
	duplicate, relative := chart.DuplicateRange, chart.RelativeRange
	for i, c := range []struct {
		name  string
		b     duplicateBasis
		code  string
		least float64
	}{
		{"one sigma where it is 0.05 + 2 %", duplicateBasis{duplicate, 20, pairsOnly, 40, linear, fineUnit, noOptions, nil}, diagnostics.CodeSpreadDependsOnMean, 0.4},
		{"one sigma where it is 0.05 + 2 %", duplicateBasis{duplicate, 50, pairsOnly, 40, linear, fineUnit, noOptions, nil}, diagnostics.CodeSpreadDependsOnMean, 0.9},
		{"the same, rounded", duplicateBasis{duplicate, 50, pairsOnly, 40, linear, 0.1, noOptions, nil}, diagnostics.CodeSpreadDependsOnMean, 0.8},
		{"relative where sigma is constant", duplicateBasis{relative, 50, pairsOnly, 40, constantly(0.02), fineUnit, noOptions, nil}, diagnostics.CodeSpreadDependsOnMean, 0.95},
		{"a tripled pair", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), fineUnit, noOptions, tripled}, diagnostics.CodeOutlyingSet, 0.95},
		{"a tripled pair, function", duplicateBasis{duplicate, 50, pairsOnly, 40, growing, fineUnit, fitted, tripled}, diagnostics.CodeOutlyingSet, 0.3},
		{"failed pairs not posted", duplicateBasis{duplicate, 100, pairsOnly, 40, constantly(0.1), fineUnit, noOptions, trimmedPairs}, diagnostics.CodeTooFewLargeRanges, 0.1},
		{"failed pairs not posted", duplicateBasis{duplicate, 200, pairsOnly, 40, constantly(0.1), fineUnit, noOptions, trimmedPairs}, diagnostics.CodeTooFewLargeRanges, 0.6},
		{"second readings copied", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), 0.01, noOptions, copiedReadings}, diagnostics.CodeTooManyZeroRanges, 0.6},
		{"five sets copied", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), 0.01, noOptions, copiedSets}, diagnostics.CodeRepeatedStretch, 0.95},
		{"one set in five posted twice", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), 0.01, noOptions, doubledSets}, diagnostics.CodeDoubledPosts, 0.95},
		{"rounded to one sigma", duplicateBasis{duplicate, 50, pairsOnly, 40, constantly(0.1), 0.1, noOptions, nil}, diagnostics.CodeRoundingCoarse, 0.95},
	} {
		y, found := simulateDuplicates(t, c.b, runs, uint64(300+i)), 0
		for _, key := range y.order {
			if strings.HasPrefix(key, c.code) {
				found = y.found[key]
			}
		}
		rate := float64(found) / runs
		t.Logf("%-34s %4d sets  %-26s found in %.2f (at least %.2f)", c.name, c.b.n, c.code, rate, c.least)
		if rate < c.least {
			t.Errorf("%s, %d sets: %s found in %.2f, want at least %.2f", c.name, c.b.n, c.code, rate, c.least)
		}
	}
}
