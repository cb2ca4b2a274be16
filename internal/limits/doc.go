// Package limits computes control limits for charts of variables data: individuals with moving ranges, means with ranges,
// means with standard deviations.
//
// # From readings to lines
//
// Compute takes the basis (groups in the order of the track, some excluded with a reason, some after a break), estimates
// centre and process sigma or takes them as given, rounds both once to the published decimals, and derives everything
// else from the rounded figures:
//
//	location    centre = mean of all readings used        sigma = σ/√n
//	MR, R       centre = d2·σ                             sigma = d3·σ
//	s           centre = c4·σ                             sigma = √(1-c4²)·σ
//	lines       centre ± 3 sigma (action), centre ± 2 sigma (warning), each rounded once
//
// with n the nominal subgroup size, and n = 2 in d2 and d3 for moving ranges. At gives the same for any other n, so a
// judge that rounds centres and lines as Compute does judges what was published. σ is always the standard deviation of
// single readings, never that of a mean.
//
// # Estimating sigma
//
// All estimators of the kind are computed side by side, see Estimator; taking the wrong one is the commonest mistake in
// the field. For individuals the default is the mean moving range, since the overall standard deviation also holds every
// drift and shift that the chart is there to find; for means the default is what the dispersion chart plots. Unequal
// subgroups are weighted for least variance. A moving range never bridges an exclusion or a break. Subgroups of one
// reading count for the centre, not for sigma.
//
// # What is assumed
//
// Factors, degrees of freedom and intervals hold for independent, normally distributed readings. Findings tell where the
// basis contradicts that as far as this package looks.
//
// Every function is pure and safe for concurrent use. No finite input leads to a result that is not finite: what cannot
// be computed is refused with an *Error.
package limits
