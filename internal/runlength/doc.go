// Package runlength computes what run rules cost and what they catch: the distribution of the run length, the number of
// points to the first signal, in control and after a change.
//
// # What is computed
//
// Compute answers for a list of rules, or for a whole chart with its location and dispersion trace, at shifts of the mean
// and a ratio of sigmas: mean (ARL), standard deviation (SDRL), quantiles, and the probability of a signal within n
// points. Rules mean what they mean to the judge (package rules, judge number 1). Only rules of the consequence asked for,
// or worse, end a run. A run begins with a fresh chart, or from the steady state of one that has long run in control.
//
// LongRun gives the two rates of a chart that nobody resets: points flagged and signals opened per 1000 points. They are
// not 1000/ARL, and not each other. On these stand Marginals (what each rule adds), Choose (all subsets of the rules
// against a budget of false alarms, with an EWMA and a CUSUM beside them) and Realise (what limits estimated from few
// points will do).
//
// # How
//
//   - Windowed rules over zones: an exact Markov chain, the minimised automaton of package automaton, stepped by package
//     forward. Any distribution of independent points will do, rounded ones included.
//   - Trend and alternation, and moving ranges, which look at two points: the same chain, with the place of the latest
//     point in its zone carried as a Legendre series.
//   - One EWMA or CUSUM, alone or with limits on single points: the integral equation of package integral.
//   - Two traces of a chart of means are independent, so the probabilities that neither has signalled multiply; those of
//     individuals with moving ranges are computed jointly.
//   - Whatever else, such as a CUSUM with run rules or correlated points: a simulation through the judge, with its standard
//     error.
//
// Every row says which of these it is and bounds its error. Exact methods take the bound from their own convergence: what
// the tail can still change, what a cut series leaves out, what a finer equation changes. Where that is worse than a
// simulation, the simulation answers.
//
// # Units
//
// Run lengths are in points and count the signalling one. Shifts are in standard errors of the plotted statistic or in
// process sigmas, the ratio of sigmas is that of single readings. Lines are in sigmas of the plotted statistic from its
// centre.
//
// # Work
//
// Functions ending in With take a meter, which limits the work and ends it with its context; see package effort. All
// functions are pure and safe for concurrent use.
package runlength
