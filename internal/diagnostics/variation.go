package diagnostics

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"

	"limitary/internal/chart"
)

const (
	// CodeBetweenTooLarge is the code of subgroups that differ by more than the readings within them explain.
	CodeBetweenTooLarge = "BETWEEN_TOO_LARGE"
	// CodeBetweenTooSmall is the code of subgroups that are more alike than their readings.
	CodeBetweenTooSmall = "BETWEEN_TOO_SMALL"
	// betweenMin is the least number of subgroups, and of degrees of freedom within them, that are compared.
	betweenMin = 5
)

// variation compares the scatter of subgroup means with what the scatter within subgroups leads to expect: the F test of
// one-way analysis of variance, each tail at half the level.
func (m *material) variation() Test {
	t := Test{
		Code: CodeBetweenTooLarge, Name: "F between over within subgroups", Subject: Subgroups, N: len(m.groups), Level: Level,
		CouldMiss: "A variation between subgroups less than half of that within, and one that only some subgroups have.",
	}
	k, readings := len(m.groups), len(m.judged)
	if k < betweenMin || readings-k < betweenMin {
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs at least %d subgroups and as many degrees of freedom within them.", betweenMin))
	}
	between, within := m.meanSquares()
	if within == 0 || !finite(between/within) {
		return t.notMade(Void, "The readings of each subgroup are equal.")
	}
	f := between / within
	upper, lower := fTails(f, float64(k-1), float64(readings-k))
	if m.kind == chart.RunMeans {
		// The kind expects F above 1, and its limits allow for it.
		t.Code, t.Reason = CodeBetweenTooSmall, "Only too little variation between runs is a fault here."
		return tooAlike(t.withP(f, lower))
	}
	if f < 1 {
		t.Code = CodeBetweenTooSmall
		return tooAlike(t.withP(f, min(1, 2*lower)))
	}
	t = t.withP(f, min(1, 2*upper))
	t.text = fmt.Sprintf("Subgroup means vary more than their readings explain: F is %.2f, p = %.2g.", f, *t.PValue)
	t.advice = "If every run has its own small bias (calibration, reagents, a day's conditions), limits from the scatter within subgroups are too narrow; take the kind run_means. If a few subgroups make the difference, look for their causes."
	return t
}

func tooAlike(t Test) Test {
	t.text = fmt.Sprintf("Subgroup means vary less than their readings lead to expect: F is %.2f, p = %.2g.", *t.Statistic, *t.PValue)
	t.advice = "Look for unlike things inside each subgroup (two instruments, positions, levels or analysts, one reading of each), which widen the limits; chart them apart. Readings adjusted to their mean look the same."
	return t
}

// meanSquares between and within subgroups, in a common unit that cancels in their ratio.
func (m *material) meanSquares() (between, within float64) {
	grand := sum(m.deviations) / float64(len(m.deviations))
	for own := range m.subgroups() {
		mean := sum(own) / float64(len(own))
		between += float64(len(own)) * (mean - grand) * (mean - grand)
		for _, x := range own {
			within += (x - mean) * (x - mean)
		}
	}
	k := float64(len(m.groups))
	within /= float64(len(m.deviations)) - k
	if within < roundingNoise*roundingNoise {
		within = 0
	}
	return between / (k - 1), within
}

// fTails gives the probabilities above and below f of an F distribution.
func fTails(f, between, within float64) (upper, lower float64) {
	x := within / (within + between*f)
	if math.IsInf(f, 0) {
		x = 0
	}
	return mathext.RegIncBeta(within/2, between/2, x), mathext.RegIncBeta(between/2, within/2, between*f/(within+between*f))
}
