// Package limits computes control limits: for individuals with moving ranges, means with ranges or standard deviations,
// means of analytical runs, ranges of duplicates, and counts.
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
// # Runs
//
// Readings of one analytical run share what varies between runs. The process sigma of run_means is s_w, that within runs,
// and Model.BetweenSigma is s_b; a run mean of n readings has sigma √(s_b² + s_w²/n). Both come from the analysis of
// variance of runs of any sizes: s_b² is the variance of the run means less what s_w explains of it, and 0 where that is
// negative, which Component.Truncated and a finding tell. The published s_b is the root of an unbiased variance; as such
// it is a little small, by a relative 1/(4·degrees of freedom), while s_w is unbiased itself. The centre is the mean of
// the run means with weights 1/(s_b² + s_w²/n_i). Runs of one reading count for the centre and for s_b.
//
// # Duplicates
//
// Charts of duplicates have a dispersion trace and upper lines only. Sigma goes by the size of the mean of the readings:
// one for all, one in each band, or √(s0² + (b·mean)²); see Part. A relative_range chart plots the range in percent of
// that mean, with sigma in percent, and below a stated mean the plain range. Tails tell what the lines leave beyond them:
// the range is skewed, so it is more than a normal statistic would.
//
// # Other scales
//
// On a transformed scale, and on a standardised track of several levels, readings are put on that scale first, and every
// figure of the result is in its units; chart.Transform.Invert shows them in the chart's. A line below the lower end of
// the scale is absent. A reading outside the domain of the transform is refused unless its group is excluded.
//
// # Estimating sigma
//
// All estimators of the kind are computed side by side, see Estimator; taking the wrong one is the commonest mistake in
// the field. The defaults are
//
//	individuals                       mean moving range: the overall standard deviation also holds every drift and
//	                                  shift that the chart is there to find
//	xbar_r, xbar_s                    what the dispersion trace plots, R-bar or s-bar
//	run_means                         pooled, for s_w
//	duplicate_range, relative_range   R-bar; a function of the mean is fitted by likelihood
//	p, np, c, u                       none: sigma follows from the mean count
//
// Unequal subgroups are weighted for least variance. A moving range never bridges an exclusion or a break. Subgroups of
// one reading count for the centre, not for sigma. Figures that are given are held against the results all the same, see
// Comparison.
//
// # What is assumed
//
// Factors, degrees of freedom and intervals hold for independent, normally distributed readings, those of runs about a
// normally distributed level of their run. Findings tell where the basis contradicts that as far as this package looks.
//
// Every function is pure and safe for concurrent use. No finite input leads to a result that is not finite: what cannot
// be computed is refused with an *Error.
package limits
