package limits

import (
	"fmt"
	"math"

	"limitary/internal/chart"
)

// Finding is something to know about limits before they are used.
type Finding struct {
	// Code is stable, for programs.
	Code string
	// Figure was set against Threshold.
	Figure, Threshold float64
	// Text states the fact, Advice what to do about it, CouldMiss what may be wrong though there is no such finding.
	Text, Advice, CouldMiss string
}

// Codes of findings.
const (
	CodeProvisional          = "PROVISIONAL"
	CodeEstimatorsDisagree   = "ESTIMATORS_DISAGREE"
	CodeTargetCentreDiffers  = "TARGET_CENTRE_DIFFERS"
	CodeTargetSigmaDiffers   = "TARGET_SIGMA_DIFFERS"
	CodeCriterionInsideLimit = "CRITERION_INSIDE_LIMIT"
)

const (
	// standardErrorsMax is how far a target may lie from the results before it is reported: with the target right, chance
	// alone does that about three times in a thousand.
	standardErrorsMax = 3
	// disagreementMax is the like for estimators. Several pairs are compared and their differences are skewed, so it is
	// wider: in clean data fewer than one basis in a hundred is reported (simulated, see the tests).
	disagreementMax = 4
)

func (res *Result) findings() []Finding {
	var found []Finding
	add := func(f Finding, ok bool) {
		if ok {
			found = append(found, f)
		}
	}
	add(res.provisional())
	add(res.estimatorsDisagree())
	add(res.targetCentreDiffers())
	add(res.targetSigmaDiffers())
	for role, trace := range [...]*chart.Trace{chart.Location: &res.Location, chart.Dispersion: &res.Dispersion} {
		add(criterionInside(chart.Role(role), "lower", trace, trace.LowerAction, -1))
		add(criterionInside(chart.Role(role), "upper", trace, trace.UpperAction, 1))
	}
	return found
}

func (res *Result) provisional() (Finding, bool) {
	noun := "results"
	if res.Kind != chart.Individuals {
		noun = "subgroups"
	}
	return Finding{
		Code: CodeProvisional, Figure: float64(res.N), Threshold: float64(res.AdvisedMinimum),
		Text:      fmt.Sprintf("The limits rest on %d %s; at least %d are advised.", res.N, noun, res.AdvisedMinimum),
		Advice:    "Use them as provisional and compute them again when the advised number is reached.",
		CouldMiss: "Enough results taken in a few runs or days still say little about how runs and days differ.",
	}, res.Provisional
}

// estimatorsDisagree compares estimates of one sigma with the most precise one. If readings are independent and normal
// with one mean, the overall estimate is a function of a complete sufficient statistic, so its covariance with any other
// unbiased estimate equals its own variance (the argument of Hausman's test, 1978, from memory) and the difference of
// the two has variance V - V(overall) exactly. Likewise with the pooled one if only the means of subgroups differ.
func (res *Result) estimatorsDisagree() (Finding, bool) {
	var worst Finding
	for _, precise := range res.Estimates {
		if precise.Name != Overall && precise.Name != Pooled || precise.Sigma == 0 {
			continue
		}
		for _, other := range res.Estimates {
			if other.Name == Overall || other.variance <= precise.variance {
				continue
			}
			apart := (other.Sigma/precise.Sigma - 1) / math.Sqrt(other.variance-precise.variance)
			if math.Abs(apart) > max(disagreementMax, worst.Figure) {
				worst = disagreement(other, precise, apart)
			}
		}
	}
	return worst, worst.Code != ""
}

func disagreement(other, precise Estimate, apart float64) Finding {
	f := Finding{
		Code: CodeEstimatorsDisagree, Figure: math.Abs(apart), Threshold: disagreementMax,
		Text: fmt.Sprintf("%s gives sigma %.4g and %s %.4g; they lie %.1f standard errors apart, more than the %d that independent normal results would allow.",
			other.Name, other.Sigma, precise.Name, precise.Sigma, math.Abs(apart), disagreementMax),
		CouldMiss: "Estimates can agree by accident where two faults offset each other, and with few results only gross differences show.",
	}
	switch {
	case precise.Name == Pooled:
		f.Advice = "A few subgroups scatter unlike the rest, or the readings are far from normal; look at the dispersion chart before choosing."
	case apart < 0:
		f.Advice = "The level moves more than neighbouring readings do: look for drift, shifts or differences between runs, and do not widen the limits to cover a fault that can be removed."
	default:
		f.Advice = "Neighbouring readings differ more than the whole does: look for alternation between two instruments or materials, or for subgroups that mix unlike things."
	}
	return f
}

func (res *Result) targetCentreDiffers() (Finding, bool) {
	if res.CentreOrigin != Target || res.Readings == 0 {
		return Finding{}, false
	}
	apart := math.Abs(res.dataMean-res.CentreUnrounded) / (res.SigmaUnrounded * res.standardError())
	return Finding{
		Code: CodeTargetCentreDiffers, Figure: apart, Threshold: standardErrorsMax,
		Text:      fmt.Sprintf("The mean of the results, %.6g, lies %.1f standard errors from the target centre, %.6g.", res.dataMean, apart, res.CentreUnrounded),
		Advice:    "Rules that count points on one side of the centre will signal the bias again and again; settle it, or take the centre from the results.",
		CouldMiss: "A bias smaller than the results can show, and one that comes and goes.",
	}, apart > standardErrorsMax
}

func (res *Result) targetSigmaDiffers() (Finding, bool) {
	if res.SigmaOrigin != Target || len(res.Estimates) == 0 {
		return Finding{}, false
	}
	e := res.Estimates[0]
	apart := math.Abs(e.Sigma/res.SigmaUnrounded-1) / math.Sqrt(e.variance)
	return Finding{
		Code: CodeTargetSigmaDiffers, Figure: apart, Threshold: standardErrorsMax,
		Text:      fmt.Sprintf("%s gives sigma %.4g, %.1f standard errors from the target sigma, %.4g.", e.Name, e.Sigma, apart, res.SigmaUnrounded),
		Advice:    "Too large a target hides faults, too small a one makes false alarms; check where it comes from and whether it still holds.",
		CouldMiss: "With few results only gross differences show.",
	}, apart > standardErrorsMax
}

// criterionInside tells of a fixed action line nearer to the centre than the sigma multiple would be.
func criterionInside(role chart.Role, side string, t *chart.Trace, line chart.Line, sign float64) (Finding, bool) {
	if line.Basis != chart.MethodCriterion && line.Basis != chart.Target {
		return Finding{}, false
	}
	distance := sign * (line.Value - *t.Centre) / *t.Sigma
	return Finding{
		Code: CodeCriterionInsideLimit, Figure: distance, Threshold: chart.ActionMultiple,
		Text:      fmt.Sprintf("The fixed %s action line of the %s trace, %.6g, lies %.2f sigmas from the centre, nearer than %g.", side, role, line.Value, distance, chart.ActionMultiple),
		Advice:    "The process as it is will often fail the criterion without any change in it; improve the process or expect it.",
		CouldMiss: "A criterion further out can still be failed by a bias or a growing sigma.",
	}, distance < chart.ActionMultiple
}
