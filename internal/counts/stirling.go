package counts

import "math"

// stirlingTabled is where the series of stirlingError begins to hold to the last digits.
const stirlingTabled = 16

// stirlingErrors holds stirlingError of 1 to 15, from factorials that float64 holds exactly.
var stirlingErrors = func() (errors [stirlingTabled]float64) {
	factorial := 1.0
	for i := 1; i < stirlingTabled; i++ {
		n := float64(i)
		factorial *= n
		errors[i] = math.Log(factorial*math.Exp(n)/math.Pow(n, n)) - math.Log(2*math.Pi*n)/2
	}
	return errors
}()

// stirlingError is log n! less Stirling's approximation n·log n - n + log(2πn)/2 for a whole n >= 1, by the series
// 1/12n - 1/360n³ + 1/1260n⁵ - 1/1680n⁷ + 1/1188n⁹ (from memory); the next term is below 2e-16.
func stirlingError(n float64) float64 {
	if n < stirlingTabled {
		return stirlingErrors[int(n)]
	}
	r := 1 / (n * n)
	return (1.0/12 - r*(1.0/360-r*(1.0/1260-r*(1.0/1680-r/1188)))) / n
}

// deviance is x·log(x/m) + m - x for positive x and m. Near x = m, where that cancels, it is summed as
// (x-m)·v + 2x·(v³/3 + v⁵/5 + ...) with v = (x-m)/(x+m), since log(x/m) = 2·artanh v.
func deviance(x, m float64) float64 {
	d := x - m
	v := d / (x + m)
	if math.Abs(v) > 0.1 {
		return x*math.Log(x/m) - d
	}
	sum, term := d*v, 2*x*v
	for i := 3.0; ; i += 2 {
		term *= v * v
		next := sum + term/i
		if next == sum {
			return sum
		}
		sum = next
	}
}
