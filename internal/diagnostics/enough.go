package diagnostics

import (
	"fmt"

	"limitary/internal/limits"
)

const (
	// CodeTooFewRuns and CodeTooFewDays are the codes of a basis from too few analytical runs or days.
	CodeTooFewRuns, CodeTooFewDays = "TOO_FEW_RUNS", "TOO_FEW_DAYS"
	// AdvisedRuns and AdvisedDays are the numbers that a basis should hold (common practice, no source).
	AdvisedRuns, AdvisedDays = 20, 20
)

// extent tells how much there is.
func (m *material) extent(about Times) Extent {
	return Extent{
		Groups: len(m.groups), Readings: len(m.readings),
		Days: m.different(about.Days), Runs: m.different(about.Runs),
	}
}

// different counts the keys of the groups used; nil where one is not known.
func (m *material) different(keys []string) *int {
	seen := map[string]bool{}
	for _, g := range m.groups {
		if g.index >= len(keys) || keys[g.index] == "" {
			return nil
		}
		seen[keys[g.index]] = true
	}
	n := len(seen)
	return &n
}

// enough compares a number of runs or days with the advised one; a nil number is not known.
func enough(req *limits.Request, code, noun string, n *int, advised float64) Test {
	t := Test{
		Code: code, Name: "different " + noun, Subject: "basis", N: len(req.Groups),
		CouldMiss: "Enough " + noun + " close together still say nothing of other seasons, lots and analysts.",
	}
	if n == nil {
		return t.notMade(NotEnoughData, "The "+noun+" of the results are not all known.")
	}
	figure := float64(*n)
	t = t.withCritical(figure, advised, figure < advised)
	t.text = fmt.Sprintf("The results come from %d %s; at least %.0f are advised.", *n, noun, advised)
	t.advice = "Take the limits as provisional: how " + noun + " differ from each other is hardly known yet. Compute them again when there are more."
	return t
}
