package counts

import (
	"fmt"
	"math"
)

// SamplesMax bounds the samples of one call.
const SamplesMax = 100_000

// Family says which law the counts of samples follow.
type Family uint8

const (
	// Nonconforming items among those inspected: binomial, for p and np charts.
	Nonconforming Family = iota
	// Nonconformities in what was inspected: Poisson, for c and u charts.
	Nonconformities
)

// Sample is the count of one sample. Inspected is a whole number of items, at least the count, for Nonconforming; the
// inspection units, whole or not, for Nonconformities (1 on a c chart). It is positive and at most SizeMax.
type Sample struct{ Count, Inspected float64 }

// pool is what samples have in common.
type pool struct {
	count, inspected   float64 // sums
	mean, unitVariance float64 // of the fraction or rate; variance for one item or unit inspected
}

// poolSamples checks two or more samples and pools them.
func poolSamples(family Family, samples []Sample) (p pool, err error) {
	if len(samples) < 2 || len(samples) > SamplesMax {
		return p, refuse("samples", float64(len(samples)), "their number must be from 2 to %d", SamplesMax)
	}
	conforming := 0.0
	for i, s := range samples {
		if err := checkSample(family, s, i); err != nil {
			return p, err
		}
		p.count += s.Count
		conforming += s.Inspected - s.Count
		p.inspected += s.Inspected
	}
	p.mean = p.count / p.inspected
	p.unitVariance = p.mean
	if family == Nonconforming {
		p.unitVariance *= conforming / p.inspected
	}
	if !(p.unitVariance > 0) {
		return p, refuse("samples", p.mean, "is the mean of all counts; counts that are all zero, or all that was inspected, say nothing about variation")
	}
	return p, nil
}

func checkSample(family Family, s Sample, i int) error {
	field := fmt.Sprintf("samples[%d].", i)
	if family > Nonconformities {
		return refuse("family", float64(family), "must be 0 (nonconforming) or 1 (nonconformities)")
	}
	if family == Nonconformities {
		if err := checkRange(field+"inspected", s.Inspected, InspectedMin, SizeMax); err != nil {
			return err
		}
		return checkWhole(field+"count", s.Count, 0, MeanMax)
	}
	if err := checkWhole(field+"inspected", s.Inspected, 1, SizeMax); err != nil {
		return err
	}
	return checkWhole(field+"count", s.Count, 0, s.Inspected)
}

// InspectedMin bounds the inspection units of one sample.
const InspectedMin = 1e-9

// standardised is (y - mean)/σ of one sample's fraction or rate.
func (p pool) standardised(s Sample) float64 {
	return (s.Count - s.Inspected*p.mean) / math.Sqrt(s.Inspected*p.unitVariance)
}

// Standardised gives z_i = (y_i - ȳ)/σ_i for samples' fractions or rates y_i = count/inspected, with ȳ their pooled mean
// and σ_i² = ȳ(1-ȳ)/n_i, or ȳ/n_i for Nonconformities: what Laney works on.
func Standardised(family Family, samples []Sample) (z []float64, mean float64, err error) {
	p, err := poolSamples(family, samples)
	if err != nil {
		return nil, 0, err
	}
	z = make([]float64, len(samples))
	for i, s := range samples {
		z[i] = p.standardised(s)
	}
	return z, p.mean, nil
}
