package diagnostics

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
)

const (
	// CodeOutlyingSet is the code of a set of duplicates that scatters far more than the others.
	CodeOutlyingSet = "OUTLYING_SET"
	// CodeTooFewLargeRanges is the code of duplicates among which large ranges are missing. It is not that of tails of
	// values, for nothing is counted beyond two sigmas.
	CodeTooFewLargeRanges = "TOO_FEW_LARGE_RANGES"
)

// fittedShare over the number of sets is what the largest variance is taken larger by where s0 and b were fitted to the
// same sets: the fit bends towards it. Simulated, see the tests.
const fittedShare = 1

// coarseReason says why tests of the largest range are void.
const coarseReason = "The rounding step is so coarse that the largest range shows the rounding."

// outlying is Cochran's test of the largest variance (W. G. Cochran, Annals of Eugenics 11 (1941) 47-52, from memory),
// each set taken relative to the sigma of the limits at its mean: the variance of one set over the pooled one of the
// others, those with the same estimated sigma, has an F distribution, and the smallest tail is multiplied by the number of
// sets, which is at most p²/2 too cautious. For pairs it judges the largest range. The size of sigma does not enter: that
// all ranges are larger than a target says is a finding of package limits.
func (d *duplicates) outlying(coarse bool) Test {
	t := Test{
		Code: CodeOutlyingSet, Name: "Cochran's test: largest over pooled variance", Subject: StandardisedRanges, N: len(d.sets), Level: Level,
		CouldMiss: "Two or more outlying sets hide each other; a set that is wrong in both readings alike has a small range.",
	}
	t, ok := d.ready(t, setsMin)
	switch {
	case !ok:
		return t
	case coarse:
		return t.notMade(Void, coarseReason)
	}
	worst, tail := d.mostOutlying()
	if worst.freedom == 0 {
		return t.notMade(NotEnoughData, "No set has another one to be compared with.")
	}
	t = t.withP(worst.squares/float64(worst.freedom), min(1, tail*float64(len(d.sets))))
	t.text = fmt.Sprintf("Set %d of the basis (mean %.4g) scatters far more than the others: %.2f times what the limits say at its mean, p = %.2g.",
		worst.index+1, worst.mean, worst.ratio, *t.PValue)
	t.advice = "If the scatter depends on the mean, mend that first. Else look into the set: mixed-up samples, a wrong dilution, carry-over, another unit" + d.edgeAdvice() + ". Exclude it, with the reason, only where a cause is found; it widens the limits."
	return t
}

// edgeAdvice names what only bands do: by chance a mean falls into the neighbouring band, where sigma is another.
func (d *duplicates) edgeAdvice() string {
	if d.spread == nil || len(d.spread.Bands) < 2 {
		return ""
	}
	return ", or a mean at the edge of a band, where sigma jumps"
}

// mostOutlying finds the set with the smallest tail of its F distribution.
func (d *duplicates) mostOutlying() (worst set, tail float64) {
	tail = math.Inf(1)
	for _, sets := range d.strata() {
		squares, freedom := sums(sets)
		for _, s := range sets {
			others, own := freedom-float64(s.freedom), float64(s.freedom)
			if others < 1 {
				continue
			}
			// P(F > f) is the incomplete beta function at the share of the others in the sum.
			share := math.Max(0, squares-s.squares) / squares
			p := mathext.RegIncBeta(others/2, own/2, share)
			if p < tail || p == tail && s.squares > worst.squares {
				worst, tail = s, p
			}
		}
	}
	return worst, min(1, tail)
}

func sums(sets []set) (squares, freedom float64) {
	for _, s := range sets {
		squares += s.squares
		freedom += float64(s.freedom)
	}
	return squares, freedom
}

// tooFewLarge asks whether the largest range is too small beside the others, as where pairs that failed were measured
// again and only the passing ones posted: the other tail of the statistic of outlying.
func (d *duplicates) tooFewLarge(coarse bool) Test {
	t := Test{
		Code: CodeTooFewLargeRanges, Name: "largest over pooled variance, lower tail", Subject: StandardisedRanges, N: len(d.sets), Level: Level,
		CouldMiss: "With fewer than about 100 sets missing ranges look like chance. One large range left in hides that others were left out, and ranges cut beyond the action line leave no trace.",
	}
	t, ok := d.ready(t, tailsMin)
	switch {
	case !ok:
		return t
	case coarse:
		return t.notMade(Void, coarseReason)
	}
	largest, p := d.largest()
	t = t.withP(largest, p)
	t.text = fmt.Sprintf("Large ranges are missing: the largest variance of %d sets of duplicates is only %.2f times the pooled one, p = %.2g.", len(d.sets), largest, p)
	t.advice = "Ask whether duplicates that disagreed were measured again and only the agreeing ones kept, and post every pair. Limits from cut data are too narrow."
	return t
}

// largest gives the largest variance over the pooled one, sets of other sizes counting by what is as likely to be
// exceeded once, and the probability of one as small. Half a step more for the range, and rounding taken out of the
// pooled variance (Sheppard's correction, from memory), keep the level.
func (d *duplicates) largest() (variance, p float64) {
	strata := d.strata()
	bound, n, once := 0.0, float64(len(d.sets)), map[int]float64{}
	for _, s := range d.sets {
		if once[s.freedom] == 0 {
			once[s.freedom] = onceIn(n, s.freedom)
		}
	}
	for _, sets := range strata {
		added, freedom, widening := 0.0, 0.0, 1.0
		for _, s := range sets {
			freedom += float64(s.freedom)
			added += float64(s.freedom) * s.step * s.step / 12
		}
		if d.fitted {
			widening = 1 + fittedShare/n
		}
		clean := max(0.25, 1-added/freedom/max(d.pooled[sets[0].stratum], math.SmallestNonzeroFloat64))
		for _, s := range sets {
			if s.ratio == 0 {
				continue
			}
			widened := 1 + s.step/(2*math.Sqrt2*s.ratio)
			variance = max(variance, s.squares/float64(s.freedom))
			bound = max(bound, s.squares*widening*widened*widened/clean/once[s.freedom])
		}
	}
	p = 1
	for _, sets := range strata {
		if len(sets) >= setsMin && d.pooled[sets[0].stratum] > 0 {
			p *= largestBelow(bound, n, sets)
		}
	}
	return variance, p
}

// onceIn is the value that χ² exceeds once in n.
func onceIn(n float64, freedom int) float64 {
	return 2 * mathext.GammaIncRegCompInv(float64(freedom)/2, 1/n)
}
