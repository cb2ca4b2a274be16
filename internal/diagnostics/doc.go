// Package diagnostics says what the data of a basis say against the limits computed from them.
//
// Examine takes the request and the result of package limits and asks, each question once and at one level:
//
//	rounding    Is the rounding step fine enough beside sigma? Judged first.
//	shape       Are values normal (Anderson-Darling), skewed (D'Agostino), two groups (best split in two)?
//	variation   Do subgroup means vary more, or less, than the readings within them explain (F)?
//	tails       Are results far from the mean missing, as where failed controls were not posted (range over sd)?
//	order       Do neighbours resemble each other (lag-1 autocorrelation)?
//	copies      Does a stretch of values come twice, do results follow their equals?
//	enough      Are there enough analytical runs and days, where these are known?
//	set-up      Do more points signal against these very limits than in clean data?
//
// Estimators that disagree, and too few results, are findings of package limits.
//
// # What is tested
//
// On a chart of individuals shape, tails and order are those of the values. On charts of subgroups they are asked of the
// means, and shape of the individual values too, free of the means of their subgroups: from four readings on residuals
// times √(n/(n-1)), from two or three independent contrasts. Means of unequal subgroups are weighted to one sigma. Charts
// of counts are asked for order and copies only. Values are those on the judged scale,
// after a transformation or standardising; the rounding step and copies are those of readings as written. No neighbours
// reach across a break or an exclusion.
//
// Charts of duplicates are asked, of the range of each set beside what the limits expect at its mean:
//
//	rounding    Is the step fine enough beside sigma, at the means where sigma is smallest? Judged first.
//	zeros       Are more ranges zero than the step makes (Poisson)?
//	dependence  Does the scatter still go by the mean (Spearman's rank correlation)? One sigma for all concentrations is
//	            the commonest mistake with duplicates. Beside a fitted function only a bend is left to look for.
//	outlying    Is the largest range too large (Cochran's test), or too small, as where failed pairs were not posted?
//	copies      Does a stretch of sets come twice, do sets follow their equals?
//	enough      Are there enough analytical runs and days, where these are known?
//
// Where bands of the mean have sigmas of their own estimated, sets are compared within these. What the tests see does not
// depend on the size of sigma: limits at a wrong target are a finding of package limits. Sets of three and more are
// taken by their standard deviation, which for a pair is the range but for a factor; its laws are exact for every size.
//
// # Level
//
// Each test reports clean data (independent normal readings, one mean, one sigma) in one case of a hundred, or less where
// it counts whole numbers. Ties that rounding made are spread over the step before shape is tested; where the step is
// more than half a standard deviation nothing can be said of the shape, and those tests are void, with the reason; so are
// those of duplicates, but for the dependence on the mean where one sigma holds for all, whose level ties leave alone. The
// rate of at least one finding in clean data, about 6 % for individuals, 8 % for subgroups and 4 % for duplicates, is in
// Report.JointRate: with so many questions a single finding is a reason to look, not a verdict.
//
// A finding is evidence about the data, and its absence is none for them: every test says what it could have missed.
//
// # Numbers
//
// P-values come from published approximations or exact moments, critical values from simulations that the tests of this
// package repeat; nothing is drawn at run time. Values are centred in decimals and scaled before they are squared, so
// that no finite input leads to a figure that is not finite. All functions are pure and safe for concurrent use.
package diagnostics
