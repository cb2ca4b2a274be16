package changetest

import (
	"fmt"
	"math"

	"limitary/internal/limits"
)

// Part is one sigma of the duplicates in force: that of a band of means, or that of the plain range of low means.
type Part struct {
	// Target marks a sigma that was given; the degrees of freedom of one that was estimated are effective.
	Target           bool
	DegreesOfFreedom float64
}

// checkDuplicates looks at what is said of the sigmas in force.
func (f *InForce) checkDuplicates() error {
	if err := limits.CheckModel(f.Kind, &f.Model); err != nil {
		e := *err.(*Error)
		e.Field = "inForce.model." + e.Field
		return &e
	}
	s := f.Model.Spread
	switch want := f.partsWanted(); {
	case f.SigmaTarget && len(f.Parts) == 0:
		return nil
	case s != nil && s.S0 > 0:
		return f.checkFitted()
	case len(f.Parts) == 0 && want == 1:
		return f.checkFreedom("inForce.degreesOfFreedom", f.DegreesOfFreedom)
	case len(f.Parts) != want:
		return refuse("inForce.parts", fmt.Sprintf("%d parts", len(f.Parts)), "want one for each of the %d sigmas of the model, those of bands first", want)
	}
	for i, p := range f.Parts {
		if p.Target {
			continue
		}
		if err := f.checkFreedom(fmt.Sprintf("inForce.parts[%d].degreesOfFreedom", i), p.DegreesOfFreedom); err != nil {
			return err
		}
	}
	return nil
}

// checkFitted looks at the sets that a function of the mean was fitted to, which are all that is known of its error.
func (f *InForce) checkFitted() error {
	switch {
	case len(f.Parts) > 0:
		return refuse("inForce.parts", fmt.Sprintf("%d parts", len(f.Parts)), "a function of the mean has none; leave them out")
	case f.Groups < 1 || f.Groups > BasisMax:
		return refuse("inForce.groups", f.Groups, "a function that is no target rests on 1 to %g sets of duplicates", BasisMax)
	case f.Readings < 2*f.Groups || float64(f.Readings) > float64(f.Groups)*float64(f.SubgroupSize):
		return refuse("inForce.readings", f.Readings, "%d sets have 2 to %d readings each", f.Groups, f.SubgroupSize)
	}
	return nil
}

func (f *InForce) checkFreedom(field string, freedom float64) error {
	if !(freedom >= 0.5 && freedom <= BasisMax) {
		return refuse(field, freedom, "a sigma that is no target has effective degrees of freedom, 0.5 to %g", BasisMax)
	}
	return nil
}

// partsWanted counts the sigmas of the model.
func (f *InForce) partsWanted() int {
	s := f.Model.Spread
	if s == nil {
		return 1
	}
	want := max(1, len(s.Bands))
	if s.AbsoluteBelow > 0 {
		want++
	}
	return want
}

// duplicatesFreedom is that of the old side of the ratio. The ratio is a mean over the new sets, so the error of each part
// counts with the share w of their degrees of freedom that lies there: 1/ν = Σw²/ν_part. A function fitted by likelihood
// has, over sets whose means lie like those of its basis, the error of the pooled variance of that basis (the score
// equation of a common factor; derived), and all its degrees of freedom.
func (f *InForce) duplicatesFreedom(shares []float64) float64 {
	s := f.Model.Spread
	switch {
	case f.SigmaTarget && len(f.Parts) == 0:
		return math.Inf(1)
	case s != nil && s.S0 > 0:
		return float64(f.Readings - f.Groups)
	case len(f.Parts) == 0:
		return f.DegreesOfFreedom
	}
	total, relative := 0.0, 0.0
	for _, share := range shares {
		total += share
	}
	for i, p := range f.Parts {
		if !p.Target && total > 0 {
			w := shares[i] / total
			relative += w * w / p.DegreesOfFreedom
		}
	}
	return 1 / relative
}

// partsAlike are shares like those of the basis, for a plan: there are no new sets to take them from.
func (f *InForce) partsAlike() []float64 {
	shares := make([]float64, len(f.Parts))
	for i, p := range f.Parts {
		if shares[i] = p.DegreesOfFreedom; p.Target {
			shares[i] = 0
		}
	}
	return shares
}
