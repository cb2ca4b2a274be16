package validation

import (
	"context"
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

const examplesFile = "worked-examples.json"

// workedFile is the file of worked examples.
type workedFile struct {
	Examples []example
	// NormalityP gives the p-value of the Anderson-Darling statistic A*² at printed critical values.
	NormalityP map[string]float64 `json:"ad_p_at_critical"`
}

// example is one worked example. Those without a kind are of a rule or a test, not of limits.
type example struct {
	ID, Source, Kind string
	SubgroupSize     int `json:"subgroup_size"`
	Data             struct {
		X         []float64
		Subgroups [][]float64
		// One of these holds counts: N items each, or inspection units, or one unit.
		C, Nonconforming, Nonconformities []float64
		N                                 float64
		Units                             []float64 `json:"inspection_units"`
	}
	// Parameters are those of an EWMA or a CUSUM, in the unit of the data.
	Parameters struct {
		Lambda, Start, Sigma, Mu0, K, H float64
		KSigma                          float64 `json:"k_sigma"`
		Asymptotic                      bool
	}
	Checks       []exampleCheck
	ExactFactors []exactCheck `json:"exact_factors"`
	// Signals are points, counted from 1.
	Signals map[string][]int
}

// exampleCheck is one printed answer.
type exampleCheck struct {
	quantity
	Published  string
	Recomputed float64
	Status     string
	How        string
	PrintUsed  rounding `json:"print_used"`
	// LeftOut says why nothing is computed: the program has no such method.
	LeftOut string `json:"left_out"`
}

// exactCheck is one answer computed with exact factors.
type exactCheck struct {
	quantity
	Value string
}

// quantity says what is computed: Sample counts from 1, Size is the subgroup size where it is not the nominal one,
// Without names samples that the limits leave out. Kind and SubgroupSize stand for those of the example where its
// figures are for two kinds of chart.
type quantity struct {
	Quantity, Compute string
	Sample, Size      int
	Without           []int
	Kind              string
	SubgroupSize      int `json:"subgroup_size"`
}

// rounding is how a print departed from exact arithmetic: textbook factors, and decimals of intermediate figures.
type rounding struct {
	Factors  map[string]float64
	Decimals map[string]int
}

// recomputedDigits is the relative tolerance of a value recomputed elsewhere, which files give to 12 digits.
const recomputedDigits = 1e-11

func workedExamples(context.Context) ([]Check, error) {
	var file workedFile
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
	more, err := file.normalityP()
	return append(checks, more...), err
}

// normalityP checks the p-values at the critical values of the table.
func (f *workedFile) normalityP() (checks []Check, err error) {
	for _, critical := range slices.Sorted(maps.Keys(f.NormalityP)) {
		at, err := strconv.ParseFloat(critical, 64)
		if err != nil {
			return checks, err
		}
		want := f.NormalityP[critical]
		checks = append(checks, Check{
			Name: "Anderson-Darling: p at the printed critical value " + critical, Source: "the formulas of D'Agostino and Stephens (1986), table 4.9, evaluated independently",
			Want: want, Tolerance: recomputedDigits * want,
		}.Compare(diagnostics.NormalityP(at)))
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
		if c.LeftOut != "" {
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
		return c.computed("printed %s, which does not reproduce: %s"), nil
	case "DIFFERS_BY_ONE_UNIT":
		return c.computed("printed %s, one unit of its last digit off; computed with %s"), nil
	}
	return Check{}, fmt.Errorf("status %q: want AGREES, DIFFERS_BY_ONE_UNIT or DISAGREES", c.Status)
}

// computed takes the recomputed answer; note tells what was printed and how it departs.
func (c *exampleCheck) computed(note string) Check {
	return Check{Want: c.Recomputed, Tolerance: recomputedDigits * math.Abs(c.Recomputed), Note: fmt.Sprintf(note, c.Published, c.How)}
}

func (r rounding) String() string {
	var parts []string
	for _, name := range slices.Sorted(maps.Keys(r.Factors)) {
		parts = append(parts, fmt.Sprintf("factor %s = %v", name, r.Factors[name]))
	}
	for _, name := range slices.Sorted(maps.Keys(r.Decimals)) {
		parts = append(parts, fmt.Sprintf("%s rounded to %d decimals", name, r.Decimals[name]))
	}
	if parts == nil {
		return ""
	}
	return "as the print: " + strings.Join(parts, ", ")
}

// request turns the data of an example into a request for its limits. The lines of counts are those at multiples of
// sigma, as in all prints.
func (e *example) request(q quantity) (limits.Request, error) {
	name, size := e.Kind, e.SubgroupSize
	if q.Kind != "" {
		name, size = q.Kind, q.SubgroupSize
	}
	kind, err := chart.ParseKind(name)
	if err != nil {
		return limits.Request{}, err
	}
	decimals := decimal.PlacesMax // so that rounding for publication hides nothing
	req := limits.Request{Kind: kind, SubgroupSize: size, PublishedDecimals: &decimals, Groups: e.groups()}
	if kind.Counts() {
		req.Counts.Method = chart.Normal
	}
	for _, sample := range q.Without {
		if sample < 1 || sample > len(req.Groups) {
			return req, fmt.Errorf("without sample %d of %d", sample, len(req.Groups))
		}
		g := &req.Groups[sample-1]
		g.Excluded, g.ExclusionReason = true, "left out by the print"
	}
	return req, nil
}

// groups gives the readings or counts of an example.
func (e *example) groups() (groups []limits.Group) {
	readings := func(xs ...float64) {
		groups = append(groups, limits.Group{Readings: xs, Decimals: limits.DecimalsUnknown})
	}
	counts := func(xs []float64, inspected func(i int) float64) {
		for i, x := range xs {
			groups = append(groups, limits.Group{Count: &chart.Count{Nonconforming: x, Inspected: inspected(i)}})
		}
	}
	for _, x := range e.Data.X {
		readings(x)
	}
	for _, g := range e.Data.Subgroups {
		readings(g...)
	}
	counts(e.Data.C, func(int) float64 { return 1 })
	counts(e.Data.Nonconforming, func(int) float64 { return e.Data.N })
	counts(e.Data.Nonconformities, func(i int) float64 { return e.Data.Units[i] })
	return groups
}
