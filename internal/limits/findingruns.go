package limits

import (
	"fmt"

	"limitary/internal/chart"
)

// betweenTruncated tells that nothing is seen between runs.
func (res *Result) betweenTruncated() (Finding, bool) {
	a := res.runs
	if a == nil || a.given || a.raw >= 0 {
		return Finding{}, false
	}
	upper := a.betweenInterval().Upper
	return Finding{
		Code: CodeBetweenTruncated, Figure: a.raw, Threshold: 0,
		Text: fmt.Sprintf("The estimate of the variance between runs is negative, %.4g, and is taken as 0: run means differ less than the scatter within runs explains. The interval for the sigma between runs reaches up to %.4g.",
			a.raw, upper),
		Advice:    "Where that sigma is really zero this happens to about half of all bases. Compute again with more runs; a variance far below zero speaks of runs that mix unlike things, or of means that were adjusted.",
		CouldMiss: "With few runs a true sigma between them, up to the end of its interval, may not show.",
	}, true
}

// subgroupLimitsNarrow tells what limits of a plain chart of means, from the scatter within runs alone, would do.
func (res *Result) subgroupLimitsNarrow() (Finding, bool) {
	if res.Kind != chart.RunMeans || res.BetweenUnrounded == 0 {
		return Finding{}, false
	}
	if a := res.runs; a != nil && !a.given && a.betweenInterval().Lower == 0 {
		return Finding{}, false
	}
	plain, _ := At(chart.XbarS, res.SigmaUnrounded, res.SubgroupSize)
	share := plain.LocationSigma / res.locationSigma()
	rate, nominal := 2*normalAbove(chart.ActionMultiple*share), 2*normalAbove(chart.ActionMultiple)
	return Finding{
		Code: CodeSubgroupLimitsNarrow, Figure: rate, Threshold: nominal,
		Text: fmt.Sprintf("Runs differ by a sigma of %.4g beside %.4g within: plain subgroup limits of runs of %d readings would be %.0f %% as wide as these and signal %.2g %% of sound runs in place of %.2g %%.",
			res.BetweenUnrounded, res.SigmaUnrounded, res.SubgroupSize, 100*share, 100*rate, 100*nominal),
		Advice:    "Keep limits with the part between runs, and look for what makes runs differ: calibration, reagents, temperature, people. More readings in a run do not lessen it.",
		CouldMiss: "Days, lots or instruments may differ more than runs of this basis do.",
	}, rate > nominal
}
