package limits

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Compute gives limits for the request, or an *Error naming the field that is wrong. It neither keeps nor changes what
// it is given.
func Compute(req Request) (Result, error) {
	if req.Kind.SizeImplied() && req.SubgroupSize == 0 {
		req.SubgroupSize = 1
	}
	if err := req.check(); err != nil {
		return Result{}, err
	}
	switch {
	case req.Kind.Counts():
		return computeCounts(&req)
	case req.Kind.Duplicates():
		return computeDuplicates(&req)
	}
	return computeReadings(&req)
}

// computeReadings gives limits of a chart with a location trace of readings. It may replace what req points to, and
// changes nothing behind it.
func computeReadings(req *Request) (Result, error) {
	if err := req.checkGroups(); err != nil {
		return Result{}, err
	}
	if err := req.toScale(); err != nil {
		return Result{}, err
	}
	b := req.gather()
	res := Result{
		Kind: req.Kind, SubgroupSize: req.SubgroupSize, Model: chart.Model{Transform: req.Transform, Levels: slices.Clone(req.Levels)},
		N: b.groups, Readings: len(b.readings), MovingRanges: len(b.movingRanges), Dispersions: len(b.within),
		Excluded: b.excluded, Estimates: b.estimates(), AdvisedMinimum: advisedMinimum(req.Kind),
	}
	if err := res.settle(req, b); err != nil {
		return Result{}, err
	}
	if err := res.publish(req, b); err != nil {
		return Result{}, err
	}
	res.Intervals = res.intervals()
	res.Components = res.components()
	res.compareTargets(b)
	res.FalseAlarm = res.falseAlarm()
	res.Provisional = res.Origin != Target && res.N < res.AdvisedMinimum
	res.Findings = res.findings()
	res.runs = nil // what it says is in the fields above
	return res, nil
}

// settle decides every figure before rounding. The centre comes last, since that of runs is weighted by their sigmas.
func (res *Result) settle(req *Request, b *basis) error {
	if req.Centre == nil && b.groups == 0 {
		if len(req.Groups) > 0 {
			return refuse("groups", fmt.Sprintf("%d groups", len(req.Groups)), "all are excluded, so there is nothing to take the centre from")
		}
		return refuse("groups", "none", "there is nothing to take the centre from; give results, or both centre and sigma")
	}
	if err := res.settleSigma(req, b); err != nil {
		return err
	}
	if err := res.settleBetween(req, b); err != nil {
		return err
	}
	res.settleCentre(req, b)
	res.Origin = res.CentreOrigin
	if res.CentreOrigin != res.SigmaOrigin || res.Kind == chart.RunMeans && res.BetweenOrigin != res.SigmaOrigin {
		res.Origin = Mixed
	}
	return nil
}

func (res *Result) settleCentre(req *Request, b *basis) {
	switch {
	case b.groups == 0:
	case res.runs != nil:
		res.dataMean = res.runs.centre
	default:
		res.dataMean = decimal.Mean(b.readings, decimal.Unrounded)
	}
	if req.Centre != nil {
		res.CentreOrigin, res.CentreUnrounded = Target, *req.Centre
		return
	}
	res.CentreUnrounded = res.dataMean
}

func (res *Result) settleSigma(req *Request, b *basis) error {
	if req.Sigma != nil {
		res.SigmaOrigin, res.SigmaUnrounded = Target, *req.Sigma
		return nil
	}
	if b.groups < 2 || b.kind != chart.Individuals && len(b.within) < 2 {
		problem := "sigma needs at least 2 results that are not excluded"
		if b.kind != chart.Individuals {
			problem = "sigma needs at least 2 subgroups of 2 or more readings that are not excluded"
		}
		return refuse("groups", fmt.Sprintf("%d usable", max(b.scatters(), min(b.groups, 1))), "%s", problem)
	}
	e, err := choose(res.Estimates, req.estimator())
	if err != nil {
		return err
	}
	res.SigmaUnrounded = e.Sigma
	return nil
}

// choose marks the estimate that limits are to rest on.
func choose(estimates []Estimate, name Estimator) (*Estimate, error) {
	for i := range estimates {
		if e := &estimates[i]; e.Name == name {
			if e.Sigma == 0 {
				return nil, refuse("groups", name, "the spread is zero, so the estimate of sigma is zero; the results are equal or reported too coarsely")
			}
			e.Chosen = true
			return e, nil
		}
	}
	return nil, refuse("groups", name, "no two results follow each other without an exclusion or a break between, so there is no moving range")
}

// publish rounds the sigmas and the centre and derives both traces from the rounded figures.
func (res *Result) publish(req *Request, b *basis) error {
	places := res.defaultDecimals(req, b)
	if req.PublishedDecimals != nil {
		places = *req.PublishedDecimals
	}
	res.PublishedDecimals = places
	if err := res.roundSigmas(); err != nil {
		return err
	}
	scale, _ := AtModel(req.Kind, res.ProcessSigma, &res.Model, req.SubgroupSize)
	res.Location = traceAt(res.CentreUnrounded, scale.LocationSigma, places)
	res.Dispersion = traceAt(scale.DispersionCentre, scale.DispersionSigma, places)
	for _, t := range []*chart.Trace{&res.Location, &res.Dispersion} {
		if !distinct(t) {
			return refuse("publishedDecimals", places, "sigma is %.3g, so the lines fall on each other or vanish beside a centre of %g when rounded; publish more decimals or report results from a nearer origin", *t.Sigma, *t.Centre)
		}
	}
	dropImpossible(&res.Dispersion)
	dropBelowFloor(&res.Location, req.Transform)
	if err := req.Fixed[chart.Location].place(chart.Location, &res.Location); err != nil {
		return err
	}
	return req.Fixed[chart.Dispersion].place(chart.Dispersion, &res.Dispersion)
}

func (res *Result) roundSigmas() (err error) {
	places := res.PublishedDecimals
	if res.ProcessSigma, err = roundSigma("sigma", res.SigmaUnrounded, places); err != nil {
		return err
	}
	res.Model.BetweenSigma = decimal.Round(res.BetweenUnrounded, places)
	if res.Model.BetweenSigma == 0 && res.BetweenUnrounded > negligibleBetween*res.locationSigma() {
		return refuse("publishedDecimals", places, "the sigma between runs is %.4g and rounds to zero; publish more decimals (at most %d) or use a smaller unit", res.BetweenUnrounded, decimal.PlacesMax)
	}
	return nil
}

// roundSigma rounds a sigma once and refuses one that would vanish.
func roundSigma(name string, sigma float64, places int) (float64, error) {
	rounded := decimal.Round(sigma, places)
	if rounded == 0 {
		return 0, refuse("publishedDecimals", places, "%s is %.4g and rounds to zero; publish more decimals (at most %d) or use a smaller unit", name, sigma, decimal.PlacesMax)
	}
	return rounded, nil
}

// traceAt gives the rounded centre and its lines at whole multiples of sigma.
func traceAt(centre, sigma float64, places int) chart.Trace {
	centre = decimal.Round(centre, places)
	at := func(z float64) chart.Line {
		return chart.Line{Value: decimal.Line(centre, z, sigma, places), Basis: chart.SigmaMultiple}
	}
	return chart.Trace{
		Centre: &centre, Sigma: &sigma,
		LowerAction: at(-chart.ActionMultiple), UpperAction: at(chart.ActionMultiple),
		LowerWarning: at(-chart.WarningMultiple), UpperWarning: at(chart.WarningMultiple),
	}
}

// distinct reports whether rounding has left the lines and the centre in their order.
func distinct(t *chart.Trace) bool {
	return t.LowerAction.Value < t.LowerWarning.Value && t.LowerWarning.Value < *t.Centre &&
		*t.Centre < t.UpperWarning.Value && t.UpperWarning.Value < t.UpperAction.Value
}

// dropImpossible removes lower lines that no range or standard deviation can lie below. Drawn at zero they would look
// like limits that are being kept.
func dropImpossible(t *chart.Trace) {
	for _, line := range []*chart.Line{&t.LowerAction, &t.LowerWarning} {
		if line.Value <= 0 {
			*line = chart.Line{Basis: chart.Absent}
		}
	}
}

// significantDigits of sigma that the default of published decimals keeps: 0.01 % of sigma moves no verdict that matters.
const significantDigits = 4

func (res *Result) defaultDecimals(req *Request, b *basis) int {
	places := digitsPlaces(res.SigmaUnrounded)
	if !req.scaled() { // the decimals of what was measured mean nothing on another scale
		places = max(places, b.decimals+2)
	}
	for _, given := range []*float64{req.Centre, req.Sigma, req.BetweenSigma} {
		if given != nil {
			places = max(places, decimal.Places(*given))
		}
	}
	return req.placesOfFixed(places)
}

// placesOfFixed gives enough decimals for the fixed lines, and at least places, but never more than can be published.
func (req *Request) placesOfFixed(places int) int {
	for role := range chart.Roles {
		for _, line := range req.Fixed[role].all() {
			if line != nil && line.Basis != chart.Absent {
				places = max(places, decimal.Places(line.Value))
			}
		}
	}
	return min(places, decimal.PlacesMax)
}

// digitsPlaces gives the decimals that show x > 0 with at least significantDigits digits. The exponent is read from the
// decimal text, because a logarithm may err at powers of ten.
func digitsPlaces(x float64) int {
	text := strconv.FormatFloat(x, 'e', -1, 64)
	for i := range text {
		if text[i] == 'e' {
			exponent, _ := strconv.Atoi(text[i+1:])
			return max(0, significantDigits-1-exponent)
		}
	}
	return 0
}

// advisedMinimum is the number of groups under which limits are provisional: 25 individual values, or 20 subgroups
// (common practice, no source). Either way sigma then has at least 15 effective degrees of freedom.
func advisedMinimum(kind chart.Kind) int {
	if kind == chart.Individuals {
		return 25
	}
	return 20
}

// locationSigma is the standard deviation of a point of the location trace at the nominal size, before rounding.
func (res *Result) locationSigma() float64 {
	scale, _ := AtModel(res.Kind, res.SigmaUnrounded, &chart.Model{BetweenSigma: res.BetweenUnrounded}, res.SubgroupSize)
	return scale.LocationSigma
}

// centreError is the standard error of the mean of the results, with the sigmas as settled.
func (res *Result) centreError() float64 {
	if res.runs != nil {
		return res.runs.centreError
	}
	return res.SigmaUnrounded / math.Sqrt(float64(res.Readings))
}
