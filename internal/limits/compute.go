package limits

import (
	"fmt"
	"math"
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Origin says whether a figure was estimated from the basis or set as a target.
type Origin uint8

const (
	// Estimated from the readings of the basis.
	Estimated Origin = iota
	// Target is set by the laboratory or a programme.
	Target
	// Mixed is the origin of limits with one of centre and sigma estimated and the other a target.
	Mixed
)

// String names the origin in messages and files.
func (o Origin) String() string {
	switch o {
	case Estimated:
		return "estimated"
	case Target:
		return "target"
	case Mixed:
		return "mixed"
	}
	return fmt.Sprintf("origin(%d)", uint8(o))
}

// Result is a set of limits and what it rests on. Figures are in the chart's unit.
type Result struct {
	Kind         chart.Kind
	SubgroupSize int
	// PublishedDecimals is the number of decimals of ProcessSigma, both centres and all lines.
	PublishedDecimals int
	// ProcessSigma is the standard deviation of single readings, rounded once. Everything else that depends on sigma
	// follows from this rounded figure.
	ProcessSigma float64
	// Location and Dispersion hold, at the nominal subgroup size: the rounded centre; the sigma of the plotted
	// statistic as it follows from ProcessSigma by At, not rounded a second time; lines that are the rounded
	// centre ± z·sigma. So lines for another size follow from what is published in the same way.
	Location, Dispersion chart.Trace

	// N is the number of groups used, Readings that of their readings. MovingRanges counts the moving ranges of
	// individuals, Dispersions the subgroups of at least two readings.
	N, Readings, MovingRanges, Dispersions int
	Excluded                               []Exclusion

	// Origin of the limits as a whole and of each figure.
	Origin, CentreOrigin, SigmaOrigin Origin
	// CentreUnrounded and SigmaUnrounded (process) are the figures before rounding.
	CentreUnrounded, SigmaUnrounded float64
	// Estimates by every estimator of the kind that the basis allows; one is chosen unless sigma is a target.
	Estimates []Estimate
	Intervals Intervals

	// Provisional marks limits with something estimated from fewer groups than AdvisedMinimum.
	Provisional    bool
	AdvisedMinimum int
	Findings       []Finding

	// dataMean is the mean of the readings used, where there are any.
	dataMean float64
}

// Compute gives limits for the request, or an *Error naming the field that is wrong. It neither keeps nor changes what
// it is given.
func Compute(req Request) (Result, error) {
	if req.Kind == chart.Individuals && req.SubgroupSize == 0 {
		req.SubgroupSize = 1
	}
	if err := req.check(); err != nil {
		return Result{}, err
	}
	b, err := req.gather()
	if err != nil {
		return Result{}, err
	}
	res := Result{
		Kind: req.Kind, SubgroupSize: req.SubgroupSize,
		N: b.groups, Readings: len(b.readings), MovingRanges: len(b.movingRanges), Dispersions: len(b.within),
		Excluded: b.excluded, Estimates: b.estimates(), AdvisedMinimum: advisedMinimum(req.Kind),
	}
	if err := res.settleCentre(&req, b); err != nil {
		return Result{}, err
	}
	if err := res.settleSigma(&req, b); err != nil {
		return Result{}, err
	}
	res.Origin = res.CentreOrigin
	if res.CentreOrigin != res.SigmaOrigin {
		res.Origin = Mixed
	}
	if err := res.publish(&req, b); err != nil {
		return Result{}, err
	}
	res.Intervals = res.intervals()
	res.Provisional = res.Origin != Target && res.N < res.AdvisedMinimum
	res.Findings = res.findings()
	return res, nil
}

func (res *Result) settleCentre(req *Request, b *basis) error {
	if b.groups > 0 {
		res.dataMean = decimal.Mean(b.readings, decimal.Unrounded)
	}
	switch {
	case req.Centre != nil:
		res.CentreOrigin, res.CentreUnrounded = Target, *req.Centre
	case b.groups > 0:
		res.CentreUnrounded = res.dataMean
	case len(req.Groups) > 0:
		return refuse("groups", fmt.Sprintf("%d groups", len(req.Groups)), "all are excluded, so there is nothing to take the centre from")
	default:
		return refuse("groups", "none", "there is nothing to take the centre from; give results, or both centre and sigma")
	}
	return nil
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
	name := req.Estimator
	if name == DefaultEstimator {
		name = EstimatorsOf(req.Kind)[0]
	}
	for i := range res.Estimates {
		if e := &res.Estimates[i]; e.Name == name {
			if e.Sigma == 0 {
				return refuse("groups", name, "the spread is zero, so the estimate of sigma is zero; the results are equal or reported too coarsely")
			}
			e.Chosen = true
			res.SigmaUnrounded = e.Sigma
			return nil
		}
	}
	return refuse("groups", name, "no two results follow each other without an exclusion or a break between, so there is no moving range")
}

// publish rounds sigma and centre and derives both traces from the rounded figures.
func (res *Result) publish(req *Request, b *basis) error {
	places := res.defaultDecimals(req, b)
	if req.PublishedDecimals != nil {
		places = *req.PublishedDecimals
	}
	res.PublishedDecimals = places
	res.ProcessSigma = decimal.Round(res.SigmaUnrounded, places)
	if res.ProcessSigma == 0 {
		return refuse("publishedDecimals", places, "sigma is %.4g and rounds to zero; publish more decimals (at most %d) or use a smaller unit", res.SigmaUnrounded, decimal.PlacesMax)
	}
	scale, _ := At(req.Kind, res.ProcessSigma, req.SubgroupSize)
	res.Location = traceAt(res.CentreUnrounded, scale.LocationSigma, places)
	res.Dispersion = traceAt(scale.DispersionCentre, scale.DispersionSigma, places)
	for _, t := range []*chart.Trace{&res.Location, &res.Dispersion} {
		if !distinct(t) {
			return refuse("publishedDecimals", places, "sigma is %.3g, so the lines fall on each other or vanish beside a centre of %g when rounded; publish more decimals or report results from a nearer origin", *t.Sigma, *t.Centre)
		}
	}
	dropImpossible(&res.Dispersion)
	if err := req.Fixed[chart.Location].place(chart.Location, &res.Location); err != nil {
		return err
	}
	return req.Fixed[chart.Dispersion].place(chart.Dispersion, &res.Dispersion)
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
	places := max(b.decimals+2, digitsPlaces(res.SigmaUnrounded))
	for _, given := range []*float64{req.Centre, req.Sigma} {
		if given != nil {
			places = max(places, decimal.Places(*given))
		}
	}
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

// standardError of the location centre where sigma is known, per unit of sigma.
func (res *Result) standardError() float64 { return 1 / math.Sqrt(float64(res.Readings)) }
