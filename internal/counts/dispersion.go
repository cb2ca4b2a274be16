package counts

import "gonum.org/v1/gonum/mathext"

// DispersionTest says whether counts vary as their law says.
type DispersionTest struct {
	// Mean is the pooled fraction or rate.
	Mean float64
	// Q is Σ(count_i - n_i·ȳ)²/(n_i·v), v = ȳ(1-ȳ) for Nonconforming and ȳ for Nonconformities: the index of dispersion
	// (Fisher 1925, from memory), which is also Cochran's Q of the fractions or rates.
	Q                float64
	DegreesOfFreedom int
	// Over is P(χ² >= Q): small where counts vary more than the law says. Under is P(χ² <= Q): small where they vary
	// less. Both are approximate, and good where n_i·ȳ (and n_i·(1-ȳ)) is a few or more.
	Over, Under float64
}

// Dispersion tests two or more samples against one common mean.
func Dispersion(family Family, samples []Sample) (DispersionTest, error) {
	p, err := poolSamples(family, samples)
	if err != nil {
		return DispersionTest{}, err
	}
	return p.dispersion(samples), nil
}

func (p pool) dispersion(samples []Sample) DispersionTest {
	test := DispersionTest{Mean: p.mean, DegreesOfFreedom: len(samples) - 1}
	for _, s := range samples {
		z := p.standardised(s)
		test.Q += z * z
	}
	half := float64(test.DegreesOfFreedom) / 2
	test.Over = mathext.GammaIncRegComp(half, test.Q/2)
	test.Under = mathext.GammaIncReg(half, test.Q/2)
	return test
}
