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
	CodeTargetBetweenDiffers = "TARGET_BETWEEN_DIFFERS"
	CodeCriterionInsideLimit = "CRITERION_INSIDE_LIMIT"
	CodeBetweenTruncated     = "BETWEEN_TRUNCATED"
	CodeSubgroupLimitsNarrow = "SUBGROUP_LIMITS_TOO_NARROW"
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
	add(targetSigmaDiffers(res.Estimates, res.SigmaOrigin, res.SigmaUnrounded, ""))
	for i := range res.Parts[min(1, len(res.Parts)):] { // the first is that of the result
		p := &res.Parts[i+1]
		add(disagreementOf(p.Estimates, true))
		add(targetSigmaDiffers(p.Estimates, p.Origin, p.Sigma, " of the "+p.String()))
	}
	add(res.targetBetweenDiffers())
	add(res.betweenTruncated())
	add(res.subgroupLimitsNarrow())
	for role, trace := range [...]*chart.Trace{chart.Location: &res.Location, chart.Dispersion: &res.Dispersion} {
		add(res.criterionInside(chart.Role(role), "lower", trace, trace.LowerAction, -1))
		add(res.criterionInside(chart.Role(role), "upper", trace, trace.UpperAction, 1))
	}
	return found
}

func (res *Result) provisional() (Finding, bool) {
	noun := "subgroups"
	switch {
	case res.Kind == chart.Individuals:
		noun = "results"
	case res.Kind == chart.RunMeans:
		noun = "runs"
	case res.Kind.Duplicates():
		noun = "sets of duplicates"
	}
	n, part := res.fewest()
	return Finding{
		Code: CodeProvisional, Figure: float64(n), Threshold: float64(res.AdvisedMinimum),
		Text:      fmt.Sprintf("The limits rest on %d %s%s; at least %d are advised.", n, noun, part, res.AdvisedMinimum),
		Advice:    "Use them as provisional and compute them again when the advised number is reached.",
		CouldMiss: "Enough results taken in a few runs or days still say little about how runs and days differ.",
	}, res.Provisional
}

// fewest gives the groups behind the least supported figure, and which it is where there are several.
func (res *Result) fewest() (n int, part string) {
	n = res.N
	for i := range res.Parts {
		if p := &res.Parts[i]; p.Origin == Estimated && p.Groups < n {
			n, part = p.Groups, " ("+p.String()+")"
		}
	}
	return n, part
}

// estimatorsDisagree compares estimates of one sigma with the most precise one. If readings are independent and normal
// with one mean, the overall estimate is a function of a complete sufficient statistic, so its covariance with any other
// unbiased estimate equals its own variance (the argument of Hausman's test, 1978, from memory) and the difference of
// the two has variance V - V(overall) exactly. Likewise with the pooled one if only the means of subgroups differ.
//
// Between runs and between the samples of duplicates means are expected to differ, so there only the estimates within are
// compared; the components and SUBGROUP_LIMITS_TOO_NARROW tell of the rest.
func (res *Result) estimatorsDisagree() (Finding, bool) {
	return disagreementOf(res.Estimates, res.Kind != chart.RunMeans)
}

func disagreementOf(estimates []Estimate, oneMean bool) (Finding, bool) {
	var worst Finding
	for _, precise := range estimates {
		if precise.Name != Pooled && !(precise.Name == Overall && oneMean) || precise.Sigma == 0 {
			continue
		}
		for _, other := range estimates {
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
