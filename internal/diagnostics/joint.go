package diagnostics

import (
	"math"

	"limitary/internal/chart"
)

// Joint rates: the share of clean bases with at least one finding of a test at Level, the largest of what was simulated
// (TestJointRate repeats it smaller): independent normal readings finer than a hundredth of sigma, limits estimated with
// the default estimator. Tests of one sample overlap, and those that count are cautious, so the rate is below the bound
// for independent tests.
const (
	// JointRateIndividuals: 0.045, 0.048 and 0.057 of 15,000 bases each of 20, 50 and 200 values; eight tests, whose bound
	// is 0.077.
	JointRateIndividuals = 0.057
	// JointRateSubgroups: 0.072 to 0.077 of 5,000 to 10,000 bases each of 20 subgroups of 3, 25 of 5, 50 of 4, and 25 runs
	// of 3; twelve tests, whose bound is 0.114.
	JointRateSubgroups = 0.077
	// JointRateCounts: 0.014 to 0.016 of 10,000 bases each of 25 to 200 samples with 5 to 15 expected nonconforming
	// items; three tests, whose bound is 0.030.
	JointRateCounts = 0.016
	// JointRateDuplicates: 0.029, 0.026 and 0.034 of 10,000 bases each of 20, 50 and 200 pairs with one sigma, 0.031 of 50
	// sets of three, 0.031 and 0.037 of 50 and 200 pairs with a relative sigma, 0.020 to 0.030 with a fitted function; six
	// tests, whose bound is 0.059. Zero ranges, stretches and equal neighbours hardly occur in data as fine.
	JointRateDuplicates = 0.037
)

// rates states what clean data would have given.
func (r *Report) rates(kind chart.Kind) {
	made := 0
	for _, t := range r.Tests {
		if t.Level > 0 && (t.Outcome == Found || t.Outcome == NothingFound) {
			made++
		}
	}
	if made == 0 {
		return
	}
	r.JointBound = 1 - math.Pow(1-Level, float64(made))
	switch {
	case kind.Counts():
		r.JointRate = JointRateCounts
	case kind.Duplicates():
		r.JointRate = JointRateDuplicates
	case kind == chart.Individuals:
		r.JointRate = JointRateIndividuals
	default:
		r.JointRate = JointRateSubgroups
	}
	r.JointRate = min(r.JointRate, r.JointBound) // fewer tests than all
}
