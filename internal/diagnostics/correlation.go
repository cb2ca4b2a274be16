package diagnostics

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
)

const (
	// CodeCorrelated is the code of neighbours that are alike or opposed.
	CodeCorrelated = "CORRELATED"
	// pairsMin is the least number of neighbours that are compared.
	pairsMin = 10
)

// correlation is a test of the lag-1 autocorrelation r = Σ e_i e_j/Σ e_i², the first sum over neighbours only, none
// across a break or an exclusion. For independent normal values r is independent of Σ e_i², so its moments are those of
// the sums divided: the mean -m/(n(n-1)), with m pairs, and a variance in closed form (the argument of Pitman and of
// Moran, from memory). Its distribution is taken as the beta distribution on (-1, 1) with these moments.
func correlation(subject string, e []float64, joined []bool) Test {
	t := Test{
		Code: CodeCorrelated, Name: "lag-1 autocorrelation", Subject: subject, N: len(e), Level: Level,
		CouldMiss: "Cycles and slow drifts that neighbours hardly show, and with few points all but strong correlation.",
	}
	degrees, pairs := neighbours(joined)
	if pairs < pairsMin {
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs at least %d pairs of neighbours with no break between.", pairsMin))
	}
	r, ok := lagOne(e, joined)
	if !ok {
		return t.notMade(Void, "The values are equal.")
	}
	mean, variance := lagMoments(degrees, pairs)
	t = t.withP(r, betaP(r, mean, variance))
	kind, advice := "alike", "Look for drift, slow reactions to temperature or reagents, and several results from one calibration. Limits from moving ranges are then too narrow, and same-side rules give false alarms."
	if r < mean {
		kind, advice = "opposed", "Look for over-adjustment, each result corrected for the one before, and for two streams posted by turns. Limits from moving ranges are then too wide."
	}
	t.text = fmt.Sprintf("Neighbouring %s are %s: their correlation is %.2f, p = %.2g.", subject, kind, r, *t.PValue)
	t.advice = advice
	return t
}

// neighbours gives the number of neighbours of each value and of pairs.
func neighbours(joined []bool) (degrees []float64, pairs int) {
	degrees = make([]float64, len(joined))
	for i := 1; i < len(joined); i++ {
		if joined[i] {
			degrees[i-1]++
			degrees[i]++
			pairs++
		}
	}
	return degrees, pairs
}

// lagOne gives the correlation; ok is false where the values are equal. Values are of the order of one.
func lagOne(values []float64, joined []bool) (r float64, ok bool) {
	mean := sum(values) / float64(len(values))
	products, squares := 0.0, 0.0
	for i, x := range values {
		squares += (x - mean) * (x - mean)
		if i > 0 && joined[i] {
			products += (x - mean) * (values[i-1] - mean)
		}
	}
	return products / squares, squares > 1e-24*float64(len(values))
}

// lagMoments gives mean and variance of r. With A the matrix that has 1/2 where i and j are neighbours, M = I - 11'/n and
// B = MAM: E r = tr B/(n-1) and E r² = (tr²B + 2 tr B²)/((n-1)(n+1)).
func lagMoments(degrees []float64, pairs int) (mean, variance float64) {
	n, m := float64(len(degrees)), float64(pairs)
	squares := 0.0
	for _, d := range degrees {
		squares += d * d
	}
	trace := -m / n
	traceSquare := m/2 - squares/(2*n) + m*m/(n*n)
	mean = trace / (n - 1)
	return mean, (trace*trace+2*traceSquare)/((n-1)*(n+1)) - mean*mean
}

// betaP gives the two-sided p-value of r under a beta distribution on (-1, 1) with the given moments.
func betaP(r, mean, variance float64) float64 {
	centre, spread := (1+mean)/2, variance/4
	total := centre*(1-centre)/spread - 1
	x := min(1, max(0, (1+r)/2))
	lower := mathext.RegIncBeta(centre*total, (1-centre)*total, x)
	upper := mathext.RegIncBeta((1-centre)*total, centre*total, 1-x)
	return math.Min(1, 2*math.Min(lower, upper))
}
