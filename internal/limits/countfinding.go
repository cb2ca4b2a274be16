package limits

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"

	"limitary/internal/chart"
	"limitary/internal/counts"
)

// Codes of findings about counts.
const (
	CodeCountsOverdispersed      = "COUNTS_OVERDISPERSED"
	CodeCountsUnderdispersed     = "COUNTS_UNDERDISPERSED"
	CodeInflationBelowOne        = "INFLATION_BELOW_ONE"
	CodeSizesTooUnequalForFactor = "SIZES_TOO_UNEQUAL_FOR_FACTOR"
	CodeCountsTooLowForNormal    = "COUNTS_TOO_LOW_FOR_NORMAL"
	CodeUpperBoundOfMean         = "UPPER_BOUND_OF_MEAN"
	CodeNoActionLine             = "NO_ACTION_LINE"
)

const (
	// dispersionLevel is the size of each of the two tests of variation.
	dispersionLevel = 0.01
	// dispersionExpectedMin is the least count to be expected in every sample for the χ² of these tests to hold (common
	// practice, no source; its size is simulated, see the tests).
	dispersionExpectedMin = 1
)

func (w *countWork) findings() []Finding {
	var found []Finding
	for _, look := range []func() (Finding, bool){
		w.provisional, w.upperBoundOfMean, w.targetCentreDiffers, w.tooLowForNormal,
		w.noActionLine, w.overdispersed, w.underdispersed, w.inflationBelowOne, w.sizesTooUnequal,
		func() (Finding, bool) { return w.criterionInside("lower", w.res.Location.LowerAction, -1) },
		func() (Finding, bool) { return w.criterionInside("upper", w.res.Location.UpperAction, 1) },
	} {
		if f, ok := look(); ok {
			found = append(found, f)
		}
	}
	return found
}

func (w *countWork) provisional() (Finding, bool) {
	return Finding{
		Code: CodeProvisional, Figure: float64(w.res.N), Threshold: float64(w.res.AdvisedMinimum),
		Text:      fmt.Sprintf("The limits rest on %d samples; at least %d are advised.", w.res.N, w.res.AdvisedMinimum),
		Advice:    "Use them as provisional and compute them again when the advised number is reached.",
		CouldMiss: "Enough samples with few counts in all still know their mean poorly; look at the interval of the centre.",
	}, w.res.Provisional
}

// noActionLine tells of a chart on which no count can lie beyond an action line, whatever happens.
func (w *countWork) noActionLine() (Finding, bool) {
	t := &w.res.Location
	return Finding{
		Code:      CodeNoActionLine,
		Text:      "There is no action line: no count of samples so small can be that unlikely, or the side that has a line is not watched.",
		Advice:    "Inspect more in each sample, or count over longer times: such a chart can never signal.",
		CouldMiss: "A chart that has a line may still need a very large change to pass it; run lengths tell how large.",
	}, t.LowerAction.Basis == chart.Absent && t.UpperAction.Basis == chart.Absent
}

// upperBoundOfMean sets the bound against the one that the samples give: with a mean that large, zero counts throughout
// would have a probability of 5 %.
func (w *countWork) upperBoundOfMean() (Finding, bool) {
	if w.req.Counts.MeanUpperBound == nil {
		return Finding{}, false
	}
	supported := -math.Log(1-Confidence) / w.b.inspected
	if w.req.Kind.Items() {
		supported = -math.Expm1(math.Log(1-Confidence) / w.b.inspected)
	}
	if w.req.Kind == chart.NP {
		supported *= float64(w.req.SubgroupSize)
	}
	stated := w.res.CentreUnrounded
	advice := "The lines are wider than the process may deserve; compute them again as soon as anything has been counted."
	if stated < supported {
		advice = "The samples alone do not support so low a bound; make sure that what it rests on is recorded. " + advice
	}
	return Finding{
		Code: CodeUpperBoundOfMean, Figure: stated, Threshold: supported,
		Text:      fmt.Sprintf("All %d counts are zero, and the stated upper bound of the mean, %.4g, stands in for their mean; the samples alone give %.4g as an upper bound at %g %%.", w.res.N, stated, supported, 100*Confidence),
		Advice:    advice,
		CouldMiss: "A counting method that finds nothing because it does not work gives zeros as well.",
	}, true
}

// targetCentreDiffers takes the exact probability of a total count as far off as the one found, on its side, and tells it
// as the number of standard errors that a normal mean would be off with that probability.
func (w *countWork) targetCentreDiffers() (Finding, bool) {
	if w.req.Centre == nil || w.res.N == 0 {
		return Finding{}, false
	}
	apart := w.apart() / w.widening()
	return Finding{
		Code: CodeTargetCentreDiffers, Figure: apart, Threshold: standardErrorsMax,
		Text:      fmt.Sprintf("The mean of the counts, %.6g, lies as far from the target centre, %.6g, as a normal mean would %.1f standard errors off.", w.mean(), w.res.CentreUnrounded, apart),
		Advice:    "With a target too low the chart alarms again and again, with one too high it stays silent; settle it, or take the centre from the counts.",
		CouldMiss: "A difference smaller than the counts can show, and one that comes and goes.",
	}, apart > standardErrorsMax
}

// provenMin is a probability below which the normal score is taken; both are then far beyond any threshold.
const provenMin = 1e-300

func (w *countWork) apart() float64 {
	target := w.res.CentreUnrounded
	if w.req.Kind == chart.NP {
		target /= float64(w.req.SubgroupSize)
	}
	normal := math.Abs(w.b.count-target*w.b.inspected) / math.Sqrt(w.unitVariance(w.res.CentreUnrounded)*w.b.inspected)
	law, err := counts.Poisson(target * w.b.inspected)
	if w.req.Kind.Items() {
		law, err = counts.Binomial(w.b.inspected, target)
	}
	if err != nil { // so many that the normal score is as good
		return normal
	}
	p := min(counts.AtMost(law, w.b.count), counts.Above(law, w.b.count-1))
	if p < provenMin {
		return max(normal, -mathext.NormalQuantile(provenMin))
	}
	return max(0, -mathext.NormalQuantile(min(p, 0.5)))
}

func (w *countWork) tooLowForNormal() (Finding, bool) {
	smallest := w.b.smallest
	expected := w.scarce(*w.centre(), smallest)
	return Finding{
		Code: CodeCountsTooLowForNormal, Figure: expected, Threshold: ExactBelow,
		Text: fmt.Sprintf("The smallest sample, of %g, is expected to hold %.3g of what is counted, or of the items without. By counting alone, %s lies beyond its upper action line and %s below its lower one, where %.3g %% is asked for.",
			smallest, expected, w.share(smallest, chart.ActionMultiple), w.share(smallest, -chart.ActionMultiple), 100*chart.ActionTail),
		Advice:    "Take exact lines, or inspect more at a time.",
		CouldMiss: "Expected counts above the threshold still leave normal lines with unequal tails.",
	}, w.res.Model.CountMethod == chart.Normal && expected < ExactBelow
}

// share is the realised tail of a line in words.
func (w *countWork) share(size, z float64) string {
	at := w.line(size, z)
	if math.IsInf(at, 0) {
		return "nothing"
	}
	return fmt.Sprintf("%.3g %%", 100*w.beyond(size, at, z))
}

// dispersion is the test of variation, where there is one whose χ² holds.
func (w *countWork) dispersion() (test counts.DispersionTest, ok bool) {
	if w.component == nil || w.scarce(w.mean(), w.least()) < dispersionExpectedMin {
		return test, false
	}
	return w.component.DispersionTest, true
}

// least is the smallest size of the samples used; the published one may have been rounded below it.
func (w *countWork) least() float64 {
	least := math.Inf(1)
	for _, s := range w.b.samples {
		least = min(least, s.Inspected)
	}
	return least
}

const dispersionMisses = "With low counts or few samples only gross differences show, and where fewer than one is expected in a sample the test is not made."

func (w *countWork) overdispersed() (Finding, bool) {
	test, ok := w.dispersion()
	if !ok || w.req.Counts.Extra != NoExtra {
		return Finding{}, false
	}
	advice := "Look for batches, inspectors or places that differ. Where the difference is part of a sound process, ask for a factor on sigma (Laney), or for a variance between samples, which fits samples of unequal size."
	if w.req.Kind == chart.C || w.req.Kind == chart.NP {
		advice = "Look for batches, inspectors or places that differ. Where the difference is part of a sound process, ask for a factor on sigma (Laney); a variance between samples, for which sizes may differ, takes a chart of kind u or p."
	}
	return Finding{
		Code: CodeCountsOverdispersed, Figure: test.Over, Threshold: dispersionLevel,
		Text:      fmt.Sprintf("The samples vary more than counting explains: the index of dispersion is %.4g at %d degrees of freedom, and chance alone would give as much with probability %.2g.", test.Q, test.DegreesOfFreedom, test.Over),
		Advice:    advice,
		CouldMiss: dispersionMisses,
	}, test.Over < dispersionLevel
}

func (w *countWork) underdispersed() (Finding, bool) {
	test, ok := w.dispersion()
	return Finding{
		Code: CodeCountsUnderdispersed, Figure: test.Under, Threshold: dispersionLevel,
		Text:      fmt.Sprintf("The samples vary less than counting allows: the index of dispersion is %.4g at %d degrees of freedom, and chance alone would give as little with probability %.2g.", test.Q, test.DegreesOfFreedom, test.Under),
		Advice:    "Look for samples that mix several streams in fixed parts, for counts smoothed or copied, and for a size recorded too small, before the lines are made any narrower.",
		CouldMiss: dispersionMisses,
	}, ok && test.Under < dispersionLevel
}

func (w *countWork) inflationBelowOne() (Finding, bool) {
	factor := w.res.Model.Inflation
	return Finding{
		Code: CodeInflationBelowOne, Figure: factor, Threshold: 1,
		Text:      fmt.Sprintf("The factor on sigma is %.4g, so the lines are narrower than counting alone would have them.", factor),
		Advice:    "Leave the factor out unless the cause of so little variation is known and lasts: with few samples it is below one by chance as often as above.",
		CouldMiss: "A factor above one may as well be chance.",
	}, factor > 0 && factor < 1
}

func (w *countWork) sizesTooUnequal() (Finding, bool) {
	if w.req.Counts.Extra != LaneyFactor {
		return Finding{}, false
	}
	effect, err := counts.SizesTooUnequal(*w.component, w.b.samples)
	return Finding{
		Code: CodeSizesTooUnequalForFactor, Figure: effect.Ratio, Threshold: counts.FactorRatioMax,
		Text: fmt.Sprintf("One variance between samples would make the factor on sigma %.3g for the smallest sample, of %g, and %.3g for the largest, of %g; one factor of %.3g cannot serve both.",
			effect.AtSmallest, effect.Smallest, effect.AtLargest, effect.Largest, w.res.Model.Inflation),
		Advice:    "Ask for a variance between samples in place of the factor.",
		CouldMiss: "Whether the extra variation is one of the level at all, rather than one that grows with the sample.",
	}, err == nil && effect.TooUnequal
}

// criterionInside tells of a fixed action line nearer to the centre than the sigma multiple would be.
func (w *countWork) criterionInside(side string, line chart.Line, sign float64) (Finding, bool) {
	if line.Basis != chart.MethodCriterion && line.Basis != chart.Target {
		return Finding{}, false
	}
	t, size := &w.res.Location, w.res.Model.Inspected
	distance := sign * (line.Value - *t.Centre) / *t.Sigma
	f := Finding{
		Code: CodeCriterionInsideLimit, Figure: distance, Threshold: chart.ActionMultiple,
		Text:      fmt.Sprintf("The fixed %s action line, %.6g, lies %.2f sigmas from the centre, nearer than %g.", side, line.Value, distance, chart.ActionMultiple),
		Advice:    "The process as it is will often fail the criterion without any change in it; improve the process or expect it.",
		CouldMiss: "A criterion further out can still be failed by a bias, or by samples of another size.",
	}
	if !w.extra() {
		f.Text += fmt.Sprintf(" By counting alone, %.3g %% of sound samples of %g lie beyond it.", 100*w.beyond(size, line.Value, sign), size)
	}
	return f, distance < chart.ActionMultiple
}
