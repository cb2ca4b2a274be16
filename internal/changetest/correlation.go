package changetest

import "math"

const (
	// pairsMin is the number of joined neighbours from which on a correlation is estimated. With fewer its standard error
	// exceeds 0.35, and the results count as independent. Our choice, no source.
	pairsMin = 8
	// correlationMax bounds the corrected estimate, which may pass 1.
	correlationMax = 0.95
)

// Correlation says how far the new results repeat each other.
type Correlation struct {
	// Pairs counts the neighbours without a break between. Lag1 is their plain correlation, zero where there are too few.
	Pairs int
	Lag1  float64
	// Used is Lag1 corrected for its bias, at least zero: the r below. Negative correlation is not made use of.
	Used float64
	// EffectiveForCentre is n(1-r)/(1+r), EffectiveForSpread n(1-r²)/(1+r²), n being the number of new groups: so many
	// independent results would fix the mean, or the standard deviation about it, as well (first-order autoregression;
	// from memory). Scatter within subgroups and moving ranges rest on all results.
	EffectiveForCentre, EffectiveForSpread float64
}

// correlation is estimated about the one mean, from neighbours that are joined. The estimate r per pair has expectation
// ρ - (1+3ρ)/n to the first order (Marriott and Pope 1954, Biometrika 41, from memory); that is solved for ρ.
func (d *fresh) correlation() Correlation {
	c := Correlation{}
	products, squares, level := 0.0, 0.0, d.level()
	for i, m := range d.means {
		squares += (m - level) * (m - level)
		if i > 0 && d.joined[i] {
			products += (m - level) * (d.means[i-1] - level)
			c.Pairs++
		}
	}
	n := float64(d.groups())
	if c.Pairs >= pairsMin && squares > 0 {
		c.Lag1 = products / float64(c.Pairs) / (squares / n)
		c.Used = math.Min(math.Max(0, (c.Lag1+1/n)/(1-3/n)), correlationMax)
	}
	c.EffectiveForCentre = n / c.inflation()
	c.EffectiveForSpread = n * c.squaresFactor()
	return c
}

// inflation τ = (1+r)/(1-r): the variance of a mean of many results is σ²τ/n.
func (c Correlation) inflation() float64 { return (1 + c.Used) / (1 - c.Used) }

// squaresFactor (1-r²)/(1+r²) does for the mean square what 1/τ does for the mean.
func (c Correlation) squaresFactor() float64 {
	r := c.Used * c.Used
	return (1 - r) / (1 + r)
}

// meanFactor turns a mean square about the mean of k results into k times the variance of that mean, τ(k-1)/(k-τ): the
// mean square itself falls short of σ² by (k-τ)/(k-1). False where too little is left.
func (c Correlation) meanFactor(k float64) (float64, bool) {
	tau := c.inflation()
	if k < effectiveMin*tau {
		return 0, false
	}
	return tau * (k - 1) / (k - tau), true
}

// inflationVariance is the relative variance that the estimate of r brings into τ: (dτ/dr / τ)² times the variance
// (1-r²)/pairs of r (Bartlett 1946, from memory). Zero where r is not used.
func (c Correlation) inflationVariance(pairs float64) float64 {
	if c.Used == 0 {
		return 0
	}
	return 4 / ((1 - c.Used*c.Used) * pairs)
}
