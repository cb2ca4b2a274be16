// Package forward steps the distribution of an automaton's state from point to point.
//
// A machine over zones needs only the probability of each zone: ZoneChain. Where a rule looks at the order or the
// distance of neighbours, the place of the latest point inside its panel, a part of the line, is carried as a density:
// PanelChain.
//
// A panel is mapped to -1 <= t <= 1. The density of the latest point within a state is Σ c_n·P_n(t) with respect to the
// distribution of a point, so a point of which nothing is known but its panel has the density c_0 alone. What a rule
// asks of a point and its neighbour becomes a linear map of the coefficients. Where only order matters the panels are
// linear in u = F(x): the points are uniform there whatever F is, rising and falling are integrals of the series,
// and the maps are
//
//	∫ P_0 = P_0 + P_1,   ∫ P_n = (P_{n+1} - P_{n-1})/(2n+1)
//
// from -1 on, exact but for the last term. A series of n terms and Gauss-Legendre quadrature with n nodes carry the same.
// A state that at most n points in one panel can lead to has a density of degree n; where no such n exists the series
// is cut, and what the cut leaves out is added up and given as a bound.
package forward
