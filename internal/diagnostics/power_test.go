package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
)

// streamsMixed gives every subgroup one reading from each of size streams, three sigmas from end to end.
func streamsMixed(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	for i := range xs {
		xs[i] += 3 * float64(i%d.size) / float64(d.size-1)
	}
	return xs
}

// runsDiffer adds to every subgroup its own bias of one sigma.
func runsDiffer(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	for i := 0; i < len(xs); i += d.size {
		bias := r.NormFloat64()
		for j := range d.size {
			xs[i+j] += bias
		}
	}
	return xs
}

// twoGroups puts half of the groups, by chance, apart sigmas of a mean higher.
func twoGroups(apart float64) maker {
	return func(r *rand.Rand, d design) []float64 {
		xs := clean(r, d)
		for i := 0; i < len(xs); i += d.size {
			if r.IntN(2) == 0 {
				continue
			}
			for j := range d.size {
				xs[i+j] += apart / math.Sqrt(float64(d.size))
			}
		}
		return xs
	}
}

// autoregressive has the correlation 0.5 between neighbouring groups.
func autoregressive(r *rand.Rand, d design) []float64 {
	xs := make([]float64, d.groups)
	for i := range xs {
		xs[i] = r.NormFloat64()
		if i > 0 {
			xs[i] = 0.5*xs[i-1] + math.Sqrt(0.75)*xs[i]
		}
	}
	return xs
}

// doubled posts every fifth result twice.
func doubled(r *rand.Rand, d design) []float64 {
	var xs []float64
	for len(xs) < d.groups {
		x := r.NormFloat64()
		xs = append(xs, x)
		if r.IntN(5) == 0 {
			xs = append(xs, x)
		}
	}
	return xs[:d.groups]
}

// doubledAll posts every result twice.
func doubledAll(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	for i := 1; i < len(xs); i += 2 {
		xs[i] = xs[i-1]
	}
	return xs
}

// copied repeats a block of ten results.
func copied(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	copy(xs[len(xs)-10:], xs[5:15])
	return xs
}

// trimmed measures again until a result is within two sigmas.
func trimmed(r *rand.Rand, d design) []float64 {
	xs := make([]float64, d.groups)
	for i := range xs {
		for xs[i] = r.NormFloat64(); math.Abs(xs[i]) > 2; {
			xs[i] = r.NormFloat64()
		}
	}
	return xs
}

// skewed is lognormal with a coefficient of variation near 0.5.
func skewed(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	for i := range xs {
		xs[i] = 2 * math.Exp(0.5*xs[i])
	}
	return xs
}

// heavy has the t distribution with three degrees of freedom.
func heavy(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	for i := range xs {
		a, b, c := r.NormFloat64(), r.NormFloat64(), r.NormFloat64()
		xs[i] /= math.Sqrt((a*a + b*b + c*c) / 3)
	}
	return xs
}

// shifted moves the last third by two sigmas.
func shifted(r *rand.Rand, d design) []float64 {
	xs := clean(r, d)
	for i := 2 * len(xs) / 3; i < len(xs); i++ {
		xs[i] += 2
	}
	return xs
}

// Goal: each test finds what it is for. The least rates asked for are what a basis of the size is worth, well below what
// was simulated when they were set down and far above one in a hundred.
func TestPower(t *testing.T) {
	t.Parallel()
	const runs = 300
	individuals := func(n int) design { return design{chart.Individuals, n, 1} }
	values, means, subgroups := ", "+diagnostics.IndividualValues, ", "+diagnostics.SubgroupMeans, ", "+diagnostics.Subgroups
	for i, tc := range []struct {
		name  string
		d     design
		make  maker
		step  float64
		key   string
		least float64
	}{
		{"streams mixed inside subgroups", design{chart.XbarR, 25, 3}, streamsMixed, fineStep, diagnostics.CodeBetweenTooLarge + subgroups, 0.5},
		{"streams mixed inside subgroups", design{chart.XbarR, 50, 5}, streamsMixed, fineStep, diagnostics.CodeBetweenTooLarge + subgroups, 0.8},
		{"runs differ by one sigma", design{chart.XbarR, 25, 3}, runsDiffer, fineStep, diagnostics.CodeBetweenTooLarge + subgroups, 0.85},
		{"two groups, 4 sigmas apart", individuals(50), twoGroups(4), fineStep, diagnostics.CodeTwoGroups + values, 0.88},
		{"two groups, 4 sigmas apart", individuals(200), twoGroups(4), fineStep, diagnostics.CodeTwoGroups + values, 0.99},
		{"two groups of subgroups", design{chart.XbarR, 50, 4}, twoGroups(4), fineStep, diagnostics.CodeTwoGroups + means, 0.88},
		{"AR(1) 0.5", individuals(50), autoregressive, fineStep, diagnostics.CodeCorrelated + values, 0.6},
		{"AR(1) 0.5", individuals(200), autoregressive, fineStep, diagnostics.CodeCorrelated + values, 0.99},
		{"rounding to one sigma", individuals(20), clean, 1, diagnostics.CodeRoundingCoarse + values, 0.99},
		{"rounding to one sigma", individuals(200), clean, 1, diagnostics.CodeRoundingCoarse + values, 0.99},
		{"doubled posts, one in five", individuals(50), doubled, 0.125, diagnostics.CodeDoubledPosts + values, 0.75},
		{"doubled posts, every one", individuals(50), doubledAll, 0.25, diagnostics.CodeDoubledPosts + values, 0.99},
		{"ten results copied", individuals(50), copied, 0.125, diagnostics.CodeRepeatedStretch + ", " + diagnostics.ReadingsInOrder, 0.99},
		{"beyond 2 sigma not posted", individuals(50), trimmed, fineStep, diagnostics.CodeTooFewBeyondTwoSigma + values, 0.02},
		{"beyond 2 sigma not posted", individuals(100), trimmed, fineStep, diagnostics.CodeTooFewBeyondTwoSigma + values, 0.15},
		{"beyond 2 sigma not posted", individuals(200), trimmed, fineStep, diagnostics.CodeTooFewBeyondTwoSigma + values, 0.7},
		{"beyond 2 sigma not posted", individuals(400), trimmed, fineStep, diagnostics.CodeTooFewBeyondTwoSigma + values, 0.99},
		{"lognormal, CV 0.5", individuals(50), skewed, fineStep, diagnostics.CodeSkewed + values, 0.7},
		{"lognormal, CV 0.5", individuals(50), skewed, fineStep, diagnostics.CodeNotNormal + values, 0.55},
		{"lognormal, CV 0.5, rounded", individuals(100), skewed, 0.375, diagnostics.CodeNotNormal + values, 0.7},
		{"t with 3 degrees of freedom", individuals(100), heavy, fineStep, diagnostics.CodeNotNormal + values, 0.6},
		{"t with 3 in subgroups", design{chart.XbarS, 25, 4}, heavy, fineStep, diagnostics.CodeNotNormal + values, 0.3},
		{"last third moved by 2 sigmas", individuals(50), shifted, fineStep, diagnostics.CodeSetupSignals + ", " + diagnostics.PlottedPoints, 0.65},
	} {
		y := simulate(t, tc.d, tc.make, tc.step, runs, uint64(1000+i))
		rate := y.rate(tc.key)
		t.Logf("%-32s %-28s %-44s found in %.2f (at least %.2f)", tc.name, tc.d, tc.key, rate, tc.least)
		if rate < tc.least {
			t.Errorf("%s, %s: %s found in %.3f, want at least %.2f", tc.name, tc.d, tc.key, rate, tc.least)
		}
		if tc.step == 1 && y.voided[diagnostics.CodeNotNormal+values] < runs*99/100 {
			t.Errorf("%s: normality was made void in %d of %d", tc.name, y.voided[diagnostics.CodeNotNormal+values], runs)
		}
	}
}
