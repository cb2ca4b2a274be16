package limits

import (
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// duplicates is the checked material of a chart of duplicates.
type duplicates struct {
	req  *Request
	sets []replicates
	// readings counts those of the sets used; decimals is the largest number of them as written.
	readings, decimals int
	excluded           []Exclusion
}

// replicates are the readings of one sample: what the size of their mean is, and their scatter as it is plotted, in
// percent of the mean where relative.
type replicates struct {
	size     float64
	absolute bool
	within
}

// computeDuplicates gives limits of a chart of duplicates. It has a dispersion trace only: the location trace of the
// result is empty, its lines absent. The lines are published at the process sigma, which is that of the first band, or
// where sigma is a function of the mean, the one at the median of the means of the basis (at zero, without a basis).
func computeDuplicates(req *Request) (Result, error) {
	if err := req.checkGroups(); err != nil {
		return Result{}, err
	}
	if err := req.checkDuplicates(); err != nil {
		return Result{}, err
	}
	d, err := req.gatherDuplicates()
	if err != nil {
		return Result{}, err
	}
	res := Result{
		Kind: req.Kind, SubgroupSize: req.SubgroupSize,
		N: len(d.sets), Readings: d.readings, Dispersions: len(d.sets), Excluded: d.excluded, AdvisedMinimum: advisedMinimum(req.Kind),
	}
	if req.Duplicates.function() {
		err = res.settleFunction(d)
	} else {
		err = res.settleParts(d)
	}
	if err != nil {
		return Result{}, err
	}
	res.settleOrigins()
	if err := res.publishDuplicates(d); err != nil {
		return Result{}, err
	}
	res.Tails = res.duplicateTails(d)
	res.Findings = res.findings()
	return res, nil
}

// gatherDuplicates takes up the sets that are used, each with its scatter as plotted.
func (r *Request) gatherDuplicates() (*duplicates, error) {
	d := &duplicates{req: r}
	for i := range r.Groups {
		g := &r.Groups[i]
		if g.Excluded {
			d.excluded = append(d.excluded, Exclusion{i, g.ExclusionReason})
			continue
		}
		if len(g.Readings) < 2 {
			return nil, refuse(fmt.Sprintf("groups[%d].readings", i), fmt.Sprintf("%d reading", len(g.Readings)), "duplicates need at least 2, or an exclusion with its reason")
		}
		set, err := r.replicatesOf(i)
		if err != nil {
			return nil, err
		}
		d.sets = append(d.sets, set)
		d.readings += len(g.Readings)
		d.decimals = max(d.decimals, decimalsOf(g))
	}
	return d, nil
}

func (r *Request) replicatesOf(i int) (replicates, error) {
	readings := r.Groups[i].Readings
	places := exactPlaces(readings)
	_, squares := deviations(readings, places)
	set := replicates{
		size:   math.Abs(decimal.Mean(readings, decimal.Unrounded)),
		within: within{len(readings), rangeOf(readings, places), squares},
	}
	if r.Kind != chart.RelativeRange {
		return set, nil
	}
	if set.size < r.Duplicates.AbsoluteBelow {
		set.absolute = true
		return set, nil
	}
	if set.size == 0 {
		return set, refuse(fmt.Sprintf("groups[%d].readings", i), "mean 0", "a range has no percentage of a mean of zero; give the mean below which the plain range is plotted, or exclude the group")
	}
	// The squares are scaled by their root, which float64 holds wherever it holds the range.
	root := 100 * math.Sqrt(set.squares) / set.size
	set.spread, set.squares = 100*set.spread/set.size, root*root
	if !finiteAndBounded(set.spread) {
		return set, refuse(fmt.Sprintf("groups[%d].readings", i), fmt.Sprintf("mean %g", set.size), "the range is %g %% of it, more than the limit of %g", set.spread, MagnitudeMax)
	}
	return set, nil
}

// any reports whether something is asked for.
func (o *DuplicateOptions) any() bool {
	return len(o.Bands) > 0 || len(o.Sigmas) > 0 || o.Function || o.S0 != nil || o.B != nil || o.AbsoluteBelow != 0 || o.AbsoluteSigma != nil
}

// first names the first option that is given.
func (o *DuplicateOptions) first() string {
	switch {
	case len(o.Bands) > 0:
		return "duplicates.bands"
	case len(o.Sigmas) > 0:
		return "duplicates.sigmas"
	case o.Function:
		return "duplicates.function"
	case o.S0 != nil:
		return "duplicates.s0"
	case o.B != nil:
		return "duplicates.b"
	case o.AbsoluteBelow != 0:
		return "duplicates.absoluteBelow"
	}
	return "duplicates.absoluteSigma"
}

// first names the first option that is given.
func (o *CountOptions) first() string {
	switch {
	case o.Method != chart.CountMethodDefault:
		return "counts.method"
	case o.Extra != NoExtra:
		return "counts.extra"
	}
	return "counts.meanUpperBound"
}

// function reports whether sigma is a function of the mean, estimated or given.
func (o *DuplicateOptions) function() bool { return o.Function || o.S0 != nil }

// checkDuplicates refuses options that do not go together or cannot be.
func (r *Request) checkDuplicates() error {
	o := &r.Duplicates
	given := len(o.Sigmas) > 0 || o.S0 != nil
	switch {
	case len(o.Sigmas) > 0 && len(o.Sigmas) != len(o.Bands):
		return refuse("duplicates.sigmas", fmt.Sprintf("%d sigmas", len(o.Sigmas)), "want one for each of the %d bands", len(o.Bands))
	case (o.S0 == nil) != (o.B == nil):
		return refuse("duplicates.b", fmt.Sprintf("s0 given: %t, b given: %t", o.S0 != nil, o.B != nil), "give both or neither")
	case r.Sigma != nil && (len(o.Bands) > 0 || o.function()):
		return refuse("sigma", *r.Sigma, "sigma goes by the mean; give it by band, or as s0 and b")
	case r.Estimator != DefaultEstimator && (given || o.function()):
		return refuse("estimator", r.Estimator, "nothing is estimated by it where sigma is given or fitted as a function of the mean; leave it out")
	case o.AbsoluteSigma != nil && o.AbsoluteBelow == 0:
		return refuse("duplicates.absoluteSigma", *o.AbsoluteSigma, "needs the mean below which it holds")
	}
	// What is left is what a model with such figures would be refused for; figures still to be estimated stand as 1.
	s := &chart.Spread{AbsoluteBelow: o.AbsoluteBelow}
	for i, from := range o.Bands {
		band := chart.Band{From: from, Sigma: 1}
		if len(o.Sigmas) > 0 {
			band.Sigma = o.Sigmas[i]
		}
		s.Bands = append(s.Bands, band)
	}
	if o.AbsoluteBelow != 0 {
		s.AbsoluteSigma = valueOr(o.AbsoluteSigma, 1)
	}
	if o.function() {
		s.S0, s.B = valueOr(o.S0, 1), valueOr(o.B, 1)
		if s.S0 == 0 {
			return refuse("duplicates.s0", s.S0, "want more than 0: duplicates with a mean of zero would have no scatter at all")
		}
	}
	if err := checkSpread(r.Kind, s); err != nil {
		e := *err.(*Error)
		e.Field = "duplicates" + e.Field[len("spread"):]
		return &e
	}
	return nil
}

func valueOr(given *float64, otherwise float64) float64 {
	if given != nil {
		return *given
	}
	return otherwise
}

// settleOrigins tells what the limits rest on as a whole, and the fewest sets behind anything estimated.
func (res *Result) settleOrigins() {
	res.Origin = res.SigmaOrigin
	for _, p := range res.Parts {
		if p.Origin != res.SigmaOrigin {
			res.Origin = Mixed
		}
		if p.Origin == Estimated {
			res.Provisional = res.Provisional || p.Groups < res.AdvisedMinimum
		}
	}
	res.CentreOrigin = res.SigmaOrigin
}

// sizes gives the sizes of subgroups whose tails are told: the nominal one, then the others of the basis.
func (d *duplicates) sizes() []int {
	sizes := []int{d.req.SubgroupSize}
	for _, s := range d.sets {
		if !slices.Contains(sizes, s.n) {
			sizes = append(sizes, s.n)
		}
	}
	slices.Sort(sizes[1:])
	return sizes
}

// duplicateTails gives what a process with the published sigma leaves beyond the upper lines, as they are rounded. In
// other bands the lines are the same multiples of sigma.
func (res *Result) duplicateTails(d *duplicates) []Tail {
	var tails []Tail
	for _, n := range d.sizes() {
		scale, _ := At(res.Kind, res.ProcessSigma, n)
		own := traceAt(scale.DispersionCentre, scale.DispersionSigma, res.PublishedDecimals)
		for _, l := range []struct {
			name           string
			published, own chart.Line
			z              float64
		}{
			{"upperAction", res.Dispersion.UpperAction, own.UpperAction, chart.ActionMultiple},
			{"upperWarning", res.Dispersion.UpperWarning, own.UpperWarning, chart.WarningMultiple},
		} {
			if l.published.Basis == chart.Absent {
				continue
			}
			t := Tail{Role: chart.Dispersion, Line: l.name, Size: float64(n), Nominal: chart.TailOf(l.z)}
			if l.published.Fixed() {
				l.own, t.Nominal = l.published, 0
			}
			t.Probability = spreadBeyond(res.Kind, l.own.Value/res.ProcessSigma, n, true)
			tails = append(tails, t)
		}
	}
	return tails
}
