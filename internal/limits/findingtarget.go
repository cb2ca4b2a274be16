package limits

import (
	"fmt"
	"math"

	"limitary/internal/chart"
)

func (res *Result) targetCentreDiffers() (Finding, bool) {
	if res.CentreOrigin != Target || res.Readings == 0 {
		return Finding{}, false
	}
	apart := math.Abs(res.dataMean-res.CentreUnrounded) / res.centreError()
	return Finding{
		Code: CodeTargetCentreDiffers, Figure: apart, Threshold: standardErrorsMax,
		Text:      fmt.Sprintf("The mean of the results, %.6g, lies %.1f standard errors from the target centre, %.6g.", res.dataMean, apart, res.CentreUnrounded),
		Advice:    "Rules that count points on one side of the centre will signal the bias again and again; settle it, or take the centre from the results.",
		CouldMiss: "A bias smaller than the results can show, and one that comes and goes.",
	}, apart > standardErrorsMax
}

// targetSigmaDiffers sets the usual estimate against a given sigma, of the part named if there are several.
func targetSigmaDiffers(estimates []Estimate, origin Origin, sigma float64, part string) (Finding, bool) {
	if origin != Target || len(estimates) == 0 {
		return Finding{}, false
	}
	e := estimates[0]
	apart := math.Abs(e.Sigma/sigma-1) / math.Sqrt(e.variance)
	return Finding{
		Code: CodeTargetSigmaDiffers, Figure: apart, Threshold: standardErrorsMax,
		Text:      fmt.Sprintf("%s gives sigma %.4g, %.1f standard errors from the target sigma%s, %.4g.", e.Name, e.Sigma, apart, part, sigma),
		Advice:    "Too large a target hides faults, too small a one makes false alarms; check where it comes from and whether it still holds.",
		CouldMiss: "With few results only gross differences show.",
	}, apart > standardErrorsMax
}

// targetBetweenDiffers sets s_b² as the runs show it against the given one, with the standard error it would then have.
func (res *Result) targetBetweenDiffers() (Finding, bool) {
	a := res.runs
	if res.BetweenOrigin != Target || a == nil || a.runs < 2 {
		return Finding{}, false
	}
	error := math.Sqrt2 * math.Hypot(1/math.Sqrt(a.meansFreedom), a.inverse*a.within/a.fitted()/math.Sqrt(a.withinFreedom))
	apart := math.Abs(a.raw-a.between) / a.fitted() / error
	return Finding{
		Code: CodeTargetBetweenDiffers, Figure: apart, Threshold: standardErrorsMax,
		Text:      fmt.Sprintf("The run means give a sigma between runs of %.4g, %.1f standard errors (of its square) from the target, %.4g.", math.Sqrt(max(0, a.raw)), apart, res.BetweenUnrounded),
		Advice:    "Too large a target hides runs that are off, too small a one makes false alarms of ordinary runs; check where it comes from and whether it still holds.",
		CouldMiss: "With few runs only gross differences show.",
	}, apart > standardErrorsMax
}

// criterionInside tells of a fixed action line nearer to the centre than the sigma multiple would be.
func (res *Result) criterionInside(role chart.Role, side string, t *chart.Trace, line chart.Line, sign float64) (Finding, bool) {
	if line.Basis != chart.MethodCriterion && line.Basis != chart.Target {
		return Finding{}, false
	}
	distance := sign * (line.Value - *t.Centre) / *t.Sigma
	fail := normalAbove(distance)
	if role == chart.Dispersion {
		fail = spreadBeyond(res.Kind, line.Value/res.ProcessSigma, res.SubgroupSize, sign > 0)
	}
	return Finding{
		Code: CodeCriterionInsideLimit, Figure: distance, Threshold: chart.ActionMultiple,
		Text: fmt.Sprintf("The fixed %s action line of the %s trace, %.6g, lies %.2f sigmas from the centre, nearer than %g; %.3g %% of sound values fail it.",
			side, role, line.Value, distance, chart.ActionMultiple, 100*fail),
		Advice:    "The process as it is will often fail the criterion without any change in it; improve the process or expect it.",
		CouldMiss: "A criterion further out can still be failed by a bias or a growing sigma; the percentage holds for normal readings.",
	}, distance < chart.ActionMultiple
}
