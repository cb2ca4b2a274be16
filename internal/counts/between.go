package counts

import "math"

// Component is the variance of fractions or rates beyond what their law says.
type Component struct {
	DispersionTest
	// Variance is s_b², the component between samples in squared units of the fraction or rate: the variance of y_i is
	// v_i + s_b². It is never negative; Untruncated may be, and is then evidence for no component.
	Variance, Untruncated float64

	unitVariance float64
}

// Between estimates the component between samples by moments, for sizes equal or not (DerSimonian and Laird 1986, from
// memory): s_b² = (Q - (k-1))/(Σw - Σw²/Σw), weights w_i = 1/v_i, v_i = ȳ(1-ȳ)/n_i or ȳ/n_i with the pooled ȳ. The
// untruncated estimate is unbiased for Nonconformities. For Nonconforming it is so up to a relative 1/n: what lies
// beyond the binomial variance in a sample of n items is 1-1/n times the variance of the underlying fraction.
func Between(family Family, samples []Sample) (Component, error) {
	p, err := poolSamples(family, samples)
	if err != nil {
		return Component{}, err
	}
	test := p.dispersion(samples)
	effective := 0.0 // Σw - Σw²/Σw without the common factor, so summed that sizes far apart do not cancel.
	for _, s := range samples {
		effective += s.Inspected * ((p.inspected - s.Inspected) / p.inspected)
	}
	untruncated := (test.Q - float64(test.DegreesOfFreedom)) * p.unitVariance / effective
	return Component{test, max(untruncated, 0), untruncated, p.unitVariance}, nil
}

// Factor is √(1 + s_b²/v) for a sample in which so much was inspected: by how much its true standard deviation is
// greater than the law's.
func (c Component) Factor(inspected float64) float64 {
	return math.Sqrt(1 + c.Variance*inspected/c.unitVariance)
}

// FactorRatioMax is the greatest ratio of the implied factors for which one factor for all sizes is good enough. A
// factor in the middle is then wrong by up to √1.25 at both ends, so that lines asked for at 3 sigma stand at 2.68 for
// one of them, with 2.7 times the false alarms, and at 3.35 for the other. A proposal, no source.
const FactorRatioMax = 1.25

// SizeEffect says how much the factor of Laney would have to differ between the smallest and the largest sample.
type SizeEffect struct {
	Smallest, Largest     float64 // inspected
	AtSmallest, AtLargest float64 // factors √(1 + s_b²/v)
	Ratio                 float64 // AtLargest over AtSmallest, at least 1
	TooUnequal            bool    // Ratio > FactorRatioMax
}

// SizesTooUnequal sets the factors that a component implies for the smallest and the largest of samples against each
// other. Where sizes are equal, or the component is zero, the ratio is 1.
func SizesTooUnequal(c Component, samples []Sample) (effect SizeEffect, err error) {
	if len(samples) == 0 || !(c.unitVariance > 0) {
		return effect, refuse("samples", float64(len(samples)), "there must be one at least, and a component from Between")
	}
	effect.Smallest = math.Inf(1)
	for i, s := range samples {
		if err := checkSample(Nonconformities, s, i); err != nil {
			return SizeEffect{}, err
		}
		effect.Smallest = min(effect.Smallest, s.Inspected)
		effect.Largest = max(effect.Largest, s.Inspected)
	}
	effect.AtSmallest, effect.AtLargest = c.Factor(effect.Smallest), c.Factor(effect.Largest)
	effect.Ratio = effect.AtLargest / effect.AtSmallest
	effect.TooUnequal = effect.Ratio > FactorRatioMax
	return effect, nil
}
