package validation

import (
	"context"
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

const examplesFile = "worked-examples.json"

// example is one worked example. Those without a kind belong to charts that other groups check; of them only quantities
// that name what to compute are taken up here.
type example struct {
	ID, Source, Kind string
	SubgroupSize     int `json:"subgroup_size"`
	Data             struct {
		X         []float64
		Subgroups [][]float64
	}
	Checks       []exampleCheck
	ExactFactors []exactCheck `json:"exact_factors"`
}

// exampleCheck is one printed answer.
type exampleCheck struct {
	quantity
	Published  string
	Recomputed float64
	Status     string
	How        string
	PrintUsed  rounding `json:"print_used"`
}

// exactCheck is one answer computed with exact factors.
type exactCheck struct {
	quantity
	Value string
}

// quantity says what is computed: Sample counts from 1, Size is the subgroup size where it is not the nominal one.
type quantity struct {
	Quantity, Compute string
	Sample, Size      int
}

// rounding is how a print departed from exact arithmetic: textbook factors, and decimals of intermediate figures.
type rounding struct {
	Factors  map[string]float64
	Decimals map[string]int
}

// recomputedDigits is the relative tolerance of a value recomputed elsewhere, which files give to 12 digits.
const recomputedDigits = 1e-11

func workedExamples(context.Context) ([]Check, error) {
	var file struct{ Examples []example }
	if err := readJSON(examplesFile, &file); err != nil {
		return nil, err
	}
	var checks []Check
	for _, e := range file.Examples {
		more, err := e.check()
		if err != nil {
			return checks, fmt.Errorf("%s: %w", e.ID, err)
		}
		checks = append(checks, more...)
	}
	return checks, nil
}

func (e *example) check() ([]Check, error) {
	s, err := e.solve()
	if err != nil {
		return nil, err
	}
	var checks []Check
	for _, c := range e.Checks {
		if c.Compute == "" && e.Kind == "" {
			continue
		}
		got, err := s.value(c.quantity, c.PrintUsed)
		if err != nil {
			return checks, fmt.Errorf("%s: %w", c.Quantity, err)
		}
		wanted, err := c.wanted()
		if err != nil {
			return checks, fmt.Errorf("%s: %w", c.Quantity, err)
		}
		wanted.Name, wanted.Source = e.ID+": "+c.Quantity, e.Source
		checks = append(checks, wanted.Compare(got))
	}
	for _, c := range e.ExactFactors {
		got, err := s.value(c.quantity, rounding{})
		if err != nil {
			return checks, fmt.Errorf("%s: %w", c.Quantity, err)
		}
		want, err := parseFigure(c.Value)
		if err != nil {
			return checks, fmt.Errorf("%s: %w", c.Quantity, err)
		}
		checks = append(checks, Check{
			Name: e.ID + ": " + c.Quantity + ", exact factors", Source: "recomputed from the data of " + e.Source,
			Want: want.value, Tolerance: want.halfUnit(),
		}.Compare(got))
	}
	return checks, nil
}

// wanted takes the printed answer, or the recomputed one where the print is known not to reproduce.
func (c *exampleCheck) wanted() (Check, error) {
	print, err := parseFigure(c.Published)
	if err != nil {
		return Check{}, err
	}
	switch c.Status {
	case "AGREES":
		return Check{Want: print.value, Printed: true, Tolerance: print.halfUnit(), Note: c.PrintUsed.String()}, nil
	case "DISAGREES":
		return Check{
			Want: c.Recomputed, Tolerance: recomputedDigits * math.Abs(c.Recomputed),
			Note: fmt.Sprintf("printed %s, which does not reproduce: %s", c.Published, c.How),
		}, nil
	}
	return Check{}, fmt.Errorf("status %q: want AGREES or DISAGREES", c.Status)
}

func (r rounding) String() string {
	if len(r.Factors)+len(r.Decimals) == 0 {
		return ""
	}
	return fmt.Sprintf("as the print: factors %v, decimals %v", r.Factors, r.Decimals)
}

// request turns the data of an example into a request for its limits.
func (e *example) request() (limits.Request, error) {
	kind, err := chart.ParseKind(e.Kind)
	if err != nil {
		return limits.Request{}, err
	}
	decimals := decimal.PlacesMax // so that rounding for publication hides nothing
	req := limits.Request{Kind: kind, SubgroupSize: e.SubgroupSize, PublishedDecimals: &decimals}
	for _, x := range e.Data.X {
		req.Groups = append(req.Groups, limits.Group{Readings: []float64{x}, Decimals: limits.DecimalsUnknown})
	}
	for _, g := range e.Data.Subgroups {
		req.Groups = append(req.Groups, limits.Group{Readings: g, Decimals: limits.DecimalsUnknown})
	}
	return req, nil
}
