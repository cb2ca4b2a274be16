package changetest

import "limitary/internal/limits"

// What tests look at from outside.
var (
	TQuantile     = tQuantile
	TTwoSided     = tTwoSided
	FQuantile     = fQuantile
	FTwoSided     = fTwoSided
	ChiMean       = chiMean
	KurtosisTails = kurtosisTails
	Search        = search
)

// TailsOf gives φ of groups already in sigmas, all joined, of size readings each.
func TailsOf(name limits.Estimator, readings []float64, size int, sigma float64) float64 {
	d := &fresh{size: size}
	for i := 0; i < len(readings); i += size {
		d.add(readings[i:i+size], i > 0)
	}
	return d.tails(name, sigma)
}

// WelchFreedom gives Satterthwaite's degrees of freedom.
func WelchFreedom(now, nowFreedom, old, oldFreedom float64) float64 {
	freedom, _ := meanTest{now: variance{now, nowFreedom}, old: variance{old, oldFreedom}}.freedom(1)
	return freedom
}

// VarianceOfMeans gives the variance that each side is taken to have in its mean: the new one of groups of one reading in
// sigmas, the old one as in force, both in squared sigmas in force.
func VarianceOfMeans(f InForce, readings []float64, r float64) (now, old float64) {
	d := &fresh{size: 1}
	for i, x := range readings {
		d.add([]float64{x}, i > 0)
	}
	c := Correlation{Used: r}
	a, _ := d.newVariance(c)
	b, _ := f.oldVariance(d, c)
	return a.of, b.of
}

// CountsWithin gives the differences of two means of counts within q standard errors; old of none inspected is a target.
func CountsWithin(items bool, nowMean, nowInspected, oldMean, oldInspected, q float64) limits.Interval {
	return countTest{items: items, now: countSide{nowMean, nowInspected, 1}, old: countSide{oldMean, oldInspected, 1}, unit: 1}.within(q, 1)
}
