package runlength

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// Basis is what limits are estimated from: independent points in control.
type Basis struct {
	// Points is the number of single values, or of full subgroups.
	Points int
	// Estimator of sigma; the default of the kind if none.
	Estimator limits.Estimator
}

const (
	// BasisPointsMin and BasisPointsMax bound the points of a basis.
	BasisPointsMin, BasisPointsMax = 5, 100_000
)

// estimate is how the estimated limits vary: centre and sigma are independent of each other for normal points (Basu's
// theorem), the former normal, the latter a multiple of a root mean square.
type estimate struct {
	// centreSD is the standard deviation of the centre, in standard errors of the plotted statistic.
	centreSD float64
	freedom  float64
	chi      distuv.ChiSquared
	scale    float64
}

// sigma gives the quantile of estimated over true sigma.
func (e *estimate) sigma(p float64) float64 { return e.scale * math.Sqrt(e.chi.Quantile(p)) }

// centre gives the quantile of the estimated centre.
func (e *estimate) centre(p float64) float64 { return e.centreSD * distuv.UnitNormal.Quantile(p) }

// estimate gives the distribution of the limits of a basis. For statistics as given, which have no readings to
// estimate from, they are taken to be those of an individuals chart.
func (b *Basis) estimate(kind chart.Kind, size int) (*estimate, error) {
	if b.Points < BasisPointsMin || b.Points > BasisPointsMax {
		return nil, bad("basis.points", "%d: want %d to %d", b.Points, BasisPointsMin, BasisPointsMax)
	}
	if kind == chart.Given {
		kind, size = chart.Individuals, 1
	}
	freedom, err := freedomOf(kind, size, b.Points, b.Estimator)
	if err != nil {
		return nil, err
	}
	e := &estimate{centreSD: 1 / math.Sqrt(float64(b.Points)), freedom: freedom, chi: distuv.ChiSquared{K: freedom}}
	e.scale = 1 / chiRootMean(freedom)
	return e, nil
}

// chiRootMean gives E√χ², through which the estimate becomes unbiased; see limits.Estimate.
func chiRootMean(freedom float64) float64 {
	a, _ := math.Lgamma((freedom + 1) / 2)
	b, _ := math.Lgamma(freedom / 2)
	return math.Sqrt2 * math.Exp(a-b)
}

// freedomPointsMax is up to where degrees of freedom are asked of package limits; beyond, they grow by the same amount a
// point.
const freedomPointsMax = 800

// freedomOf gives the effective degrees of freedom of an estimator, from package limits: they depend on the layout of
// the basis only, so any readings will do.
func freedomOf(kind chart.Kind, size, points int, e limits.Estimator) (float64, error) {
	at := func(points int) (float64, error) {
		r := limits.Request{Kind: kind, SubgroupSize: size, Estimator: e}
		for i := range points {
			g := limits.Group{Decimals: limits.DecimalsUnknown, Readings: make([]float64, size)}
			for j := range g.Readings {
				g.Readings[j] = float64((i*7 + j*5) % 11)
			}
			r.Groups = append(r.Groups, g)
		}
		result, err := limits.Compute(r)
		if err != nil {
			return 0, bad("basis.estimator", "%v", err)
		}
		for _, one := range result.Estimates {
			if one.Chosen {
				return one.DegreesOfFreedom, nil
			}
		}
		return 0, bad("basis.estimator", "%v gives no estimate for this chart", e)
	}
	if points <= freedomPointsMax {
		return at(points)
	}
	half, err := at(freedomPointsMax / 2)
	if err != nil {
		return 0, err
	}
	full, err := at(freedomPointsMax)
	perPoint := (full - half) / (freedomPointsMax / 2)
	return full + perPoint*float64(points-freedomPointsMax), err
}
