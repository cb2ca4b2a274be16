package diagnostics

import (
	"fmt"
	"math"
	"slices"

	"limitary/internal/limits"
)

const (
	// CoarseStep is the rounding step, in sigmas, above which readings are too coarse. Below it tests of distribution
	// keep their level with ties spread over the step (simulated, see the tests); at it a normal sample of 50 has about
	// ten different values, and half of the neighbours on a chart of means or more are told apart. Above it the tests
	// see the steps and little else. That results be reported to half of sigma or finer is common practice, no source.
	CoarseStep = 0.5
	// roundingMin is the number of readings from which a greatest common step is more than chance: fewer may all be even
	// by accident, with probability 1/128 from eight on.
	roundingMin = 8
)

// CodeRoundingCoarse is the code of readings rounded too coarsely.
const CodeRoundingCoarse = "ROUNDING_COARSE"

// rounding judges the rounding step against the sigma of readings. Every other test is told whether to trust ties.
func (m *material) rounding(req *limits.Request) Test {
	t := Test{
		Code: CodeRoundingCoarse, Name: "rounding step in sigmas", Subject: IndividualValues, N: len(m.readings),
		CouldMiss: "Readings that were rounded before they were calculated with, such as by dilution factors, show no common step.",
	}
	switch {
	case len(m.readings) < roundingMin:
		return t.notMade(NotEnoughData, fmt.Sprintf("A common step of fewer than %d readings may be an accident.", roundingMin))
	case m.values.constant():
		return t.notMade(Void, "There is no spread to compare a step with: the readings do not differ, or not within subgroups.")
	case m.grid.step == 0:
		return t.withCritical(0, CoarseStep, false).because("The readings have so many digits that no step can be told.")
	}
	ratio := m.values.step / math.Sqrt(max(0.25, 1-m.values.step*m.values.step/12))
	t = t.withCritical(ratio, CoarseStep, ratio > CoarseStep)
	t.text = fmt.Sprintf("The readings lie on steps of %.4g%s, %.2f sigmas apart, more than %g; %.0f %% of them are equal to another one.",
		m.grid.step, m.written(req), ratio, CoarseStep, 100*m.tied())
	t.advice = "Report and keep at least one more digit; until then read runs, trends and ranges with care, and take nothing from the shape of the distribution."
	return t
}

func (t Test) because(reason string) Test { t.Reason = reason; return t }

// written says to how many decimals readings are written, where that hides the step.
func (m *material) written(req *limits.Request) string {
	decimals := -1
	for _, g := range m.groups {
		decimals = max(decimals, req.Groups[g.index].Decimals)
	}
	if decimals < 1 || m.grid.step < 1.5*math.Pow10(-decimals) {
		return ""
	}
	return fmt.Sprintf(", though written to %d decimals", decimals)
}

// coarse says whether ties make tests of the distribution of a sample void.
func (s *sample) coarse() bool { return s.step > CoarseStep*math.Sqrt(max(0.25, 1-s.step*s.step/12)) }

// tied is the share of readings that are equal to another one.
func (m *material) tied() float64 {
	if len(m.readings) == 0 {
		return 0
	}
	ordered := slices.Clone(m.readings)
	slices.Sort(ordered)
	tied := 0
	for i, x := range ordered {
		if i > 0 && ordered[i-1] == x || i+1 < len(ordered) && ordered[i+1] == x {
			tied++
		}
	}
	return float64(tied) / float64(len(ordered))
}

// ready closes a test of distribution that cannot be made; ok says that it can.
func (s *sample) ready(t Test, least int) (Test, bool) {
	switch {
	case s.n < least:
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs at least %d values.", least)), false
	case s.constant():
		return t.notMade(Void, "The values are equal."), false
	case s.coarse():
		return t.notMade(Void, fmt.Sprintf("The rounding step is %.2f of the standard deviation, more than %g: the test would judge the rounding.", s.step, CoarseStep)), false
	}
	return t, true
}
