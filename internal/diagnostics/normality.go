package diagnostics

import (
	"fmt"
	"math"
)

const (
	// CodeNotNormal is the code of values that are not normal.
	CodeNotNormal = "NOT_NORMAL"
	// CodeSkewed is the code of a skewed distribution.
	CodeSkewed = "SKEWED"
	// shapeMin is the least number of values for the normal approximations of both tests (from memory).
	shapeMin = 8
)

// normality is the Anderson-Darling test with mean and standard deviation estimated.
func (s *sample) normality() Test {
	t := Test{
		Code: CodeNotNormal, Name: "Anderson-Darling A*²", Subject: s.subject, N: s.n, Level: Level,
		CouldMiss: "With few values only gross departures show; with thousands, departures too small to matter. It does not look at order in time.",
	}
	t, ok := s.ready(t, shapeMin)
	if !ok {
		return t
	}
	z, reason := s.apart()
	t.Reason = reason
	adjusted, p := andersonDarling(z)
	t = t.withP(adjusted, p)
	t.text = fmt.Sprintf("The %s do not look normal: Anderson-Darling A*² is %.3f, p = %.2g.", s.subject, adjusted, p)
	t.advice = "Look at the normal plot: a few outliers, a mixture, a bend that a logarithm would straighten? False alarm rates of limits at three sigmas hold for normal values only."
	return t
}

// andersonDarling gives A*² = A²(1 + 0.75/n + 2.25/n²) of sorted values, standardised by their mean and standard
// deviation, and its p-value: D'Agostino and Stephens, Goodness-of-Fit Techniques (1986), table 4.9, from memory.
func andersonDarling(sorted []float64) (adjusted, p float64) {
	adjusted = float64(len(sorted)) * squareAPerValue(sorted) * adjustment(len(sorted))
	return adjusted, andersonDarlingP(adjusted)
}

// Normality gives the Anderson-Darling statistic A² of values, taken as they are, against a normal law with their own mean
// and standard deviation, and A*², the same adjusted for their number, which NormalityP judges. Fewer than 8 values,
// values that are not finite, and values that are all equal are an error.
func Normality(values []float64) (squareA, adjusted float64, err error) {
	if len(values) < shapeMin {
		return 0, 0, fmt.Errorf("%d values: the test needs at least %d", len(values), shapeMin)
	}
	for i, x := range values {
		if math.IsNaN(x) || math.IsInf(x, 0) {
			return 0, 0, fmt.Errorf("value %d is %v: want a finite number", i+1, x)
		}
	}
	deviations, mean, scale := deviationsOf(values)
	s := newSample("values", deviations, mean, scale, 0)
	if s.constant() {
		return 0, 0, fmt.Errorf("all %d values are %v: they have no spread to test", len(values), values[0])
	}
	squareA = float64(s.n) * squareAPerValue(s.sorted)
	return squareA, squareA * adjustment(s.n), nil
}

// adjustment is the factor from A² to A*² for n values.
func adjustment(n int) float64 {
	size := float64(n)
	return 1 + 0.75/size + 2.25/(size*size)
}

// NormalityP gives the p-value of A*², by the formulas named at andersonDarling.
func NormalityP(adjusted float64) float64 { return andersonDarlingP(adjusted) }

// squareAPerValue gives A²/n = -1 - Σ(2i-1)(ln Φ(z_i) + ln(1-Φ(z_{n+1-i})))/n².
func squareAPerValue(sorted []float64) float64 {
	n := len(sorted)
	total := 0.0
	for i := range sorted {
		total += float64(2*i+1) / float64(n) * (logNormalBelow(sorted[i]) + logNormalBelow(-sorted[n-1-i]))
	}
	return max(0, -1-total/float64(n))
}

func andersonDarlingP(a float64) float64 {
	switch {
	case a < 0.2:
		return 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
	case a < 0.34:
		return 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	case a < 0.6:
		return math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	}
	a = min(a, 150) // beyond it the parabola would turn upwards
	return math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
}

// skewness is D'Agostino's test: R. B. D'Agostino, Biometrika 57 (1970) 679-681, from memory.
func (s *sample) skewness() Test {
	t := Test{
		Code: CodeSkewed, Name: "skewness √b1", Subject: s.subject, N: s.n, Level: Level,
		CouldMiss: "A distribution can be far from normal and symmetric; one outlier on each side hides both.",
	}
	t, ok := s.ready(t, shapeMin)
	if !ok {
		return t
	}
	b, p := skewnessP(s.z)
	t = t.withP(b, p)
	side := "high"
	if b < 0 {
		side = "low"
	}
	t.text = fmt.Sprintf("The %s are skewed towards %s values: √b1 is %.2f, p = %.2g.", s.subject, side, b, p)
	t.advice = "Look for outliers first. If results near zero or over a wide range bend the distribution, a logarithmic or square-root scale makes limits on both sides mean the same."
	return t
}

// skewnessP gives the sample skewness m3/m2^(3/2) of at least eight values with mean 0, and its two-sided p-value.
func skewnessP(z []float64) (b, p float64) {
	n := float64(len(z))
	squares, cubes := 0.0, 0.0
	for _, x := range z {
		squares += x * x
		cubes += x * x * x
	}
	b = cubes / n / math.Pow(squares/n, 1.5)
	y := b * math.Sqrt((n+1)*(n+3)/(6*(n-2)))
	kurtosis := 3 * (n*n + 27*n - 70) * (n + 1) * (n + 3) / ((n - 2) * (n + 5) * (n + 7) * (n + 9))
	w := math.Sqrt(2*(kurtosis-1)) - 1 // W²
	delta, alpha := 1/math.Sqrt(math.Log(w)/2), math.Sqrt(2/(w-1))
	return b, math.Erfc(delta * math.Asinh(math.Abs(y)/alpha) / math.Sqrt2)
}
