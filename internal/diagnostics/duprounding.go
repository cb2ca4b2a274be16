package diagnostics

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
)

// CodeTooManyZeroRanges is the code of duplicates that are equal more often than rounding makes them.
const CodeTooManyZeroRanges = "TOO_MANY_ZERO_RANGES"

// coarseShare is the share of sets with too coarse a step that makes a chart of duplicates coarse: where sigma goes by
// the mean, it is the lowest means whose ranges are lost to rounding.
const coarseShare = 0.1

// rounding judges the rounding step against the sigma of the limits, at the means where it is coarsest.
func (d *duplicates) rounding(readings int) Test {
	t := Test{
		Code: CodeRoundingCoarse, Name: "rounding step in sigmas", Subject: StandardisedRanges, N: len(d.sets),
		CouldMiss: "Readings rounded to significant figures, or before they were calculated with, show too fine a common step.",
	}
	switch {
	case readings < roundingMin:
		return t.notMade(NotEnoughData, fmt.Sprintf("A common step of fewer than %d readings may be an accident.", roundingMin))
	case len(d.sets) == 0:
		return t.notMade(NotEnoughData, "There are no limits to compare a step with.")
	case d.step == 0:
		return t.withCritical(0, CoarseStep, false).because("The readings have so many digits that no step can be told.")
	}
	ratio, coarse := d.coarsest(), 0
	for _, s := range d.sets {
		if s.step > CoarseStep {
			coarse++
		}
	}
	t = t.withCritical(ratio, CoarseStep, ratio > CoarseStep)
	zeros, expected := d.zeroRanges()
	t.text = fmt.Sprintf("The readings lie on steps of %.4g, more than %g sigmas in %d of %d sets of duplicates (%.2f sigmas or more in a tenth of them); %d ranges are zero, where such steps make %.1f.",
		d.step, CoarseStep, coarse, len(d.sets), ratio, zeros, expected)
	t.advice = "Report and keep at least one more digit, at low means above all; until then take nothing from a few zero or equal ranges, and expect ranges to fall beyond the lines at another rate."
	return t
}

// coarsest gives the step in sigmas that a tenth of the sets have or exceed.
func (d *duplicates) coarsest() float64 {
	steps := d.steps()
	return steps[len(steps)-int(math.Ceil(coarseShare*float64(len(steps))))]
}

// middleStep gives the median step in sigmas.
func (d *duplicates) middleStep() float64 {
	if len(d.sets) == 0 {
		return 0
	}
	return d.steps()[len(d.sets)/2]
}

func (d *duplicates) steps() []float64 {
	steps := make([]float64, len(d.sets))
	for i, s := range d.sets {
		steps[i] = s.step
	}
	slices.Sort(steps)
	return steps
}

// zeros asks whether more ranges are zero than the rounding step and the sigma of the limits make. Each set is counted
// with its own probability; the tail of their number is that of a Poisson distribution with the same mean, which is never
// below it (Hoeffding 1956, from memory).
func (d *duplicates) zeros() Test {
	t := Test{
		Code: CodeTooManyZeroRanges, Name: "zero ranges", Subject: SetsOfDuplicates, N: len(d.sets), Level: Level,
		CouldMiss: "Second readings that were copied and then changed in the last digit, or measured again until they agreed.",
	}
	t, ok := d.ready(t, setsMin)
	switch {
	case !ok:
		return t
	case d.step == 0:
		return t.notMade(Void, "The readings have so many digits that no rounding step can be told.")
	}
	zeros, expected := d.zeroRanges()
	t = t.withP(float64(zeros), poissonTail(zeros, expected))
	t.text = fmt.Sprintf("%d of %d ranges are zero, where readings on steps of %.4g make %.1f, p = %.2g.", zeros, len(d.sets), d.step, expected, *t.PValue)
	t.advice = "Look for second readings that were copied from the first, and for one result entered for each replicate; void these. Readings rounded to significant figures, more coarsely at high means, look the same: keep more digits there."
	return t
}

// poissonTail is the probability of n or more with the given mean.
func poissonTail(n int, mean float64) float64 {
	switch {
	case n == 0:
		return 1
	case mean == 0:
		return 0
	}
	return mathext.GammaIncReg(float64(n), mean)
}

// zeroRanges counts them, and gives the mean of their number.
func (d *duplicates) zeroRanges() (zeros int, expected float64) {
	type key struct {
		step    float64
		freedom int
	}
	known := map[key]float64{}
	for _, s := range d.sets {
		if s.ratio == 0 {
			zeros++
		}
		k := key{s.step, s.freedom}
		p, ok := known[k]
		if !ok {
			p = zeroShare(s.step, s.freedom+1)
			known[k] = p
		}
		expected += p
	}
	return zeros, expected
}

// zeroShare is the probability that n independent normal readings with a mean anywhere on the step are rounded to the
// same value, for a step in sigmas:
//
//	1/step · ∫ [Φ(x+step) - Φ(x)]ⁿ dx,
//
// and for pairs, with s = √2/step, erf(1/(√2·s)) - s·√(2/π)·(1 - exp(-1/(2s²))).
func zeroShare(step float64, n int) float64 {
	switch {
	case step == 0:
		return 0
	case step > 1e6:
		return 1
	case n == 2:
		return math.Erf(step/2) + math.Expm1(-step*step/4)*2/(step*math.Sqrt(math.Pi))
	}
	return zeroIntegral(step, n)
}

// zeroIntegral is the share by the trapezoid rule.
func zeroIntegral(step float64, n int) float64 {
	// The integrand is smooth on the scale of one sigma, over which the trapezoid rule is exact to the last digits.
	const width, reach = 1. / 8, 9.5
	total := 0.0
	low, high := -reach-step, reach
	for x := low; x <= high; x += width {
		if x > reach-step && x < -reach { // wholly inside: the rest of a very coarse step
			total += (-reach - x) / width
			x = -reach - width
			continue
		}
		total += math.Pow(normalBelow(x+step)-normalBelow(x), float64(n))
	}
	return min(1, total*width/step)
}
