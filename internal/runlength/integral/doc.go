// Package integral follows the statistic of an EWMA or a CUSUM through its integral equation.
//
// The probability L_n(y) that a chart whose statistic is y runs n more points without a signal satisfies
//
//	L_{n+1}(y) = ∫ L_n(y') K(y, y') dy',   L_0 = 1
//
// with K the density of the statistic after the next point, over the interval without a signal; a CUSUM has an atom at 0
// besides (Crowder 1987 for the EWMA, Goel and Wu 1971 for the CUSUM; from memory). L is held by its values at
// Gauss-Legendre nodes of a few panels no wider than two standard deviations of the kernel, and the integral is taken by
// Gauss-Legendre quadrature on each panel, cut where the kernel ends. That is a Nyström method with panels; it converges
// faster than any power of the number of nodes as long as panels end where L has a kink, which they do at the first few.
//
// Both arms of a CUSUM see the same points, but when one arm signals the other stands at 0, because while both are
// positive their sum falls by twice the reference value with each point. The two-sided chart therefore starts anew, seen
// from the other arm, and its distribution follows from those of the arms alone; see TwoArms.
package integral
