// Package changetest helps to decide whether limits in force should be kept or changed, given results that came after
// their basis.
//
// A laboratory that changes its limits too often hides drift: each change takes the last drift into the new limits. So
// the question is not whether a difference is significant, which with enough results any difference is, but whether centre
// or spread differ by more than what matters to the laboratory.
//
// # Decision
//
// Compare gives, for each figure, an estimate of the difference, its 95 % interval, and a decision against the limits of
// relevance. By default a centre that lies up to 0.5 sigmas of the plotted statistic away does not matter, nor a ratio of
// sigmas within 1/1.25 to 1.25. Our choice, no source.
//
//	KEEP             the whole interval lies within the limits of relevance
//	CHANGE           the whole interval lies beyond one of them
//	NOT_ENOUGH_DATA  it holds a limit of relevance, or there is no interval
//
// This is the logic of equivalence tests by interval inclusion (Schuirmann 1987, from memory), with a second side for
// CHANGE. With a difference that does not matter, CHANGE is said in at most 2.5 % of cases for each limit of relevance, and
// only if the difference is as large as the limit; where nothing has changed it is said far more rarely. With one that
// matters, KEEP is said in at most 2.5 %. Both rates are those of one figure and one look, as
// far as the intervals hold the truth in 95 % of cases. The price is that
// NOT_ENOUGH_DATA is a frequent answer; Needed tells about how many results would end it, and Differs whether the interval
// leaves out no difference at all. A p-value comes second and is never part of the decision.
//
// An old basis of 25 to 50 individuals fixes its sigma only within a quarter or so by moving ranges, and then no number of
// new results shows that the spread has changed by less than that; it takes about 80 old results. Published answers the other question, whether the figure in force
// as it stands fits the process as it is now; new results can always settle that.
//
// # Centre
//
// The difference of means in units of the published sigma of the plotted statistic at the nominal subgroup size n: σ/√n, or
// √(s_b² + σ²/n) for run means with a sigma s_b between runs. Where subgroups have unequal sizes, all readings count alike.
// That sigma is the unit, as it is that of the lines, so its own error does not enter the interval. The interval and test
// are those of Welch (1947) with Satterthwaite's (1946) degrees of freedom (both from memory): the new mean's variance
// from the scatter of the new values or means, the old one's from what is given. A target has no sampling error.
//
// # Spread
//
// The ratio of the process sigmas (within subgroups), new to old, both by the estimator in force: like with like, so that
// a drift, which an overall standard deviation sees and a moving range does not, is not taken for spread. For charts of
// means the spread of the subgroup means is a third figure, set against that of the old basis where it is known (run means
// have it in their sigma between runs) and else against σ/√n; then a CHANGE may also mean that the lines never fitted.
//
// The F test takes readings for normal. Here its degrees of freedom are divided, on both sides, by the factor by which the
// new estimate of sigma varies more than that of normal readings, for the overall sigma from the kurtosis (Shoemaker 2003,
// Bonett 2006, both from memory), for the others from the moving ranges or subgroups themselves.
//
// # Counts
//
// Charts of counts have one figure, the centre: where nothing but counting scatters, the scatter follows from it, and what
// goes beyond counting is a matter of the model of the limits, not of this comparison. The unit is the sigma in force at
// Model.Inspected, with the extra variation of the model in it. Each side has a score interval (Wilson 1927), which holds
// for few counts and for none, and the two are joined by the square-and-add rule (Newcombe 1998; both from memory). The
// new side is freed of the factor φ >= 1 by which its mean varies more than counting explains: Pearson's from the new
// counts, or that of the model in force where it is more, as after counts of zero, which show none. The old side has that
// of its model, or, where the model has none, the new side's. Quantiles are those of Student's t at the degrees of freedom
// of the factors, so intervals are a little wide: they hold the truth in 96 to 98 % of cases where counts vary as counting
// has it, and in 95 to 98 % with two or three times its variance (simulated, see the tests). The p-value is that at
// which the interval reaches no difference; the plain test is χ² of the totals, which then finds a difference that is none in
// 15 to 45 % of cases.
//
// # Duplicates
//
// Charts of duplicates have one figure, the spread. Readings are divided by the sigma in force at the mean of their set, so
// that bands, a function of the mean and percentages all come to one ratio; a set without a sigma in force, a percentage
// of a mean of zero, is left out. The error of the old side is that of the parts that the new sets lie in, see Part. A
// function of the mean takes its error from all sets of its basis, which holds where the new means lie like the old ones.
// Ranges of different samples are taken for independent.
//
// # Correlation
//
// Results that follow each other closely are worth fewer. The lag-1 correlation r of the new series, within unbroken
// stretches and corrected for bias, leaves n(1-r)/(1+r) of n results for the centre and n(1-r²)/(1+r²) for a standard
// deviation about it (first-order autoregression, from memory). The old results are taken to be alike, since only summary
// figures of them are at hand. The uncertainty of r itself lowers the degrees of freedom. For counts r is that of the
// standardised counts, and no more than what goes beyond counting allows.
//
// # What is not covered
//
// A comparison made because of a signal rests on results that were chosen for looking bad: its p-values are marked not
// valid, and its intervals lean the same way. Repeated looks raise the chance that one is wrong, see Looks; figures are
// not adjusted for it. Tails heavier than the new results show make intervals of spread too short: with Student's t at 5
// degrees of freedom those of the overall and pooled sigma hold the truth in about 90 % of cases, those of R-bar in 92 %,
// of moving ranges in 94 %; the plain F test then holds it in 78 to 90 % (simulated, see the tests).
//
// Every function is pure and safe for concurrent use.
package changetest
