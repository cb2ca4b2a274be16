package limits

import (
	"fmt"
	"math"
	"sync"

	"limitary/internal/chart"
)

// ChartFactors holds the chart factors for subgroups of N readings from a normal distribution. The trade writes three of
// them in small letters and four range limits in capitals that differ from them only so; the three therefore have names
// here.
type ChartFactors struct {
	N int
	// RangeMean is d2, the mean of the range in sigmas.
	RangeMean float64
	// RangeSigma is d3, the standard deviation of the range in sigmas.
	RangeSigma float64
	// SMean is c4, the mean of the sample standard deviation in sigmas.
	SMean float64
	// A = 3/√n, A2 = 3/(d2·√n) and A3 = 3/(c4·√n) give the limits of means from sigma, R-bar and s-bar.
	A, A2, A3 float64
	// B3, B4 = 1 ∓ 3·√(1-c4²)/c4 give the limits of s from s-bar; B5, B6 = c4 ∓ 3·√(1-c4²) from sigma.
	B3, B4, B5, B6 float64
	// D1, D2 = d2 ∓ 3·d3 give the limits of the range from sigma; D3, D4 = 1 ∓ 3·d3/d2 from R-bar. Like B3 and B5, the
	// lower ones are zero where the formula is negative, as the tables print them; a chart has no line there.
	D1, D2, D3, D4 float64
}

// Factors gives the chart factors for subgroups of n readings, 2 to chart.SubgroupSizeMax. They are computed, not read
// from a table, and agree with multiple-precision values to 1e-12.
//
// Sources: the formulas are those of ASTM Manual 7 and ISO 8258 (from memory); the integrals are Tippett's (1925) for d2
// and the distribution function of the range for d3.
func Factors(n int) (ChartFactors, error) {
	if n < 2 || n > chart.SubgroupSizeMax {
		return ChartFactors{}, &Error{"n", fmt.Sprint(n), fmt.Sprintf("chart factors are defined here for 2 to %d readings", chart.SubgroupSizeMax)}
	}
	return *factorsOf(n), nil
}

// D2 gives the factor d2, the mean of the range of n standard normal values; n as in Factors.
func D2(n int) (float64, error) {
	f, err := Factors(n)
	return f.RangeMean, err
}

// D3 gives the factor d3, the standard deviation of the range of n standard normal values; n as in Factors.
func D3(n int) (float64, error) {
	f, err := Factors(n)
	return f.RangeSigma, err
}

// C4 gives the factor c4, the mean of the standard deviation of n standard normal values; n as in Factors.
func C4(n int) (float64, error) {
	f, err := Factors(n)
	return f.SMean, err
}

// cache holds each size once computed; a size costs about a millisecond the first time.
var cache [chart.SubgroupSizeMax + 1]struct {
	once    sync.Once
	factors ChartFactors
}

// factorsOf is Factors for an n known to be in range.
func factorsOf(n int) *ChartFactors {
	entry := &cache[n]
	entry.once.Do(func() { entry.factors = deriveFactors(n) })
	return &entry.factors
}

func deriveFactors(n int) ChartFactors {
	d2 := rangeMean(n)
	d3 := rangeSigma(n, d2)
	c4 := chiMean(float64(n - 1))
	root := math.Sqrt(float64(n))
	s3 := 3 * math.Sqrt(1-c4*c4)
	return ChartFactors{
		N: n, RangeMean: d2, RangeSigma: d3, SMean: c4,
		A: 3 / root, A2: 3 / (d2 * root), A3: 3 / (c4 * root),
		B3: max(0, 1-s3/c4), B4: 1 + s3/c4, B5: max(0, c4-s3), B6: c4 + s3,
		D1: max(0, d2-3*d3), D2: d2 + 3*d3, D3: max(0, 1-3*d3/d2), D4: 1 + 3*d3/d2,
	}
}

// gammaRatioFreedomMax is where chiMean changes from the gamma function, which overflows later, to its series.
const gammaRatioFreedomMax = 200

// chiMean gives the mean of √(χ²/ν) for ν > 0 degrees of freedom, √(2/ν)·Γ((ν+1)/2)/Γ(ν/2): it is c4 of ν+1 readings.
//
// The gamma functions themselves are divided rather than their logarithms subtracted, because 1-c4² stands in the
// factors and would carry the error of the subtraction fivefold. Above gammaRatioFreedomMax the asymptotic series of the
// ratio is used (Abramowitz and Stegun 6.1.47 at a = 1/2, b = 0, from memory); its first term left out is below 1e-16.
func chiMean(freedom float64) float64 {
	if freedom <= gammaRatioFreedomMax {
		return math.Sqrt(2/freedom) * (math.Gamma((freedom+1)/2) / math.Gamma(freedom/2))
	}
	v := 1 / freedom
	return 1 + v*(-1./4+v*(1./32+v*(5./128+v*(-21./2048+v*(-399./8192+v*(869./65536))))))
}
