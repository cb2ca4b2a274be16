// Package counts holds the statistics of charts of counts: nonconforming items of a sample (p, np) and
// nonconformities found in what was inspected (u, c).
//
// # Lines
//
// A Law is the distribution of the count of one sample: Binomial for p and np, Poisson for c and u. Upper and Lower
// give the lines at a tail probability: the least whole number U with P(X > U) <= tail and the greatest whole number L
// with P(X < L) <= tail. A count on a line is not beyond it. Counts move in whole steps, so the realised tail is mostly
// smaller than what was asked, and both are part of the answer. Lines depend on nothing but the law and the tail, take
// about a microsecond for a mean of 500, and are right where a tail is met exactly: a comparison that float64 cannot
// decide is decided in extended precision.
//
// Where no count can lie beyond, there is no line: below L = 0, and above U = size of a binomial law.
//
// # More variation than the law allows
//
// Real counts often vary more than a binomial or Poisson law says, the more visibly the larger the samples. Dispersion
// tests for that and for the opposite; Laney gives the factor by which the standardised statistic varies more from sample
// to sample; Between splits the variance into that of the law and a component between samples; SizesTooUnequal tells
// where sizes differ so much that no one factor can serve them all.
//
// # Intervals
//
// ProportionInterval and RateInterval are exact intervals for a mean of counts, right for few counts and for none.
//
// Every function is pure and safe for concurrent use. No finite input leads to a result that is not finite: what cannot
// be computed is refused with an *Error.
package counts
