package validation

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// solution is an example worked by this program.
type solution struct {
	example *example
	// limits are set where the example has a kind.
	limits limits.Result
}

func (e *example) solve() (*solution, error) {
	s := &solution{example: e}
	if e.Kind == "" {
		return s, nil
	}
	req, err := e.request(quantity{})
	if err != nil {
		return nil, err
	}
	s.limits, err = limits.Compute(req)
	return s, err
}

// value computes a quantity as the print did: with its factors where it used rounded ones, from figures rounded as it
// rounded them. Without either, lines are those of the published result.
func (s *solution) value(q quantity, r rounding) (float64, error) {
	if s.limits.Kind.Counts() {
		return s.count(q, r)
	}
	switch q.Compute {
	case "anderson_darling":
		squareA, _, err := diagnostics.Normality(s.example.Data.X)
		return squareA, err
	case "moment_mean":
		return decimal.Mean(s.example.Data.X, decimal.Unrounded), nil
	case "moment_sd":
		return limits.StandardDeviation(s.example.Data.X), nil
	case "centre":
		return r.round("centre", s.limits.CentreUnrounded), nil
	case "scatter_mean":
		return s.scatterMean(r)
	case "pooled_s":
		return s.pooled(r)
	case "sigma":
		return s.sigma(r)
	case "upper_location", "lower_location", "upper_dispersion":
		return s.line(q, r)
	case "location_of", "scatter_of":
		groups := s.example.Data.Subgroups
		if q.Sample < 1 || q.Sample > len(groups) {
			return 0, fmt.Errorf("sample %d of %d", q.Sample, len(groups))
		}
		if q.Compute == "location_of" {
			return r.location(groups[q.Sample-1]), nil
		}
		return s.scatter(groups[q.Sample-1], r), nil
	}
	if s.example.Kind == "" {
		return s.accumulated(q)
	}
	return s.sum(q, r)
}

// sum adds up a column of the example.
func (s *solution) sum(q quantity, r rounding) (float64, error) {
	if s.limits.Kind == chart.Individuals && q.Compute == "scatter_sum" {
		mean, err := s.scatterMean(r)
		return mean * float64(s.limits.MovingRanges), err
	}
	sum := 0.0
	for _, g := range s.example.Data.Subgroups {
		n := float64(len(g))
		switch q.Compute {
		case "location_sum":
			sum += r.location(g)
		case "reading_sum":
			sum += n * r.location(g)
		case "scatter_sum":
			sum += s.scatter(g, r)
		case "squares_within":
			scatter := s.scatter(g, r)
			sum += (n - 1) * scatter * scatter
		default:
			return 0, fmt.Errorf("compute %q: not a known quantity", q.Compute)
		}
	}
	return sum, nil
}

// round rounds an intermediate figure where the print did.
func (r rounding) round(name string, x float64) float64 {
	if places, ok := r.Decimals[name]; ok {
		return decimal.Round(x, places)
	}
	return x
}

func (r rounding) location(group []float64) float64 {
	if places, ok := r.Decimals["location"]; ok {
		return decimal.Mean(group, places)
	}
	return decimal.Mean(group, decimal.Unrounded)
}

func (s *solution) scatter(group []float64, r rounding) float64 {
	if s.limits.Kind == chart.XbarR {
		return r.round("scatter", limits.Range(group))
	}
	return r.round("scatter", limits.StandardDeviation(group))
}

func (s *solution) estimate(name limits.Estimator) (float64, error) {
	for _, e := range s.limits.Estimates {
		if e.Name == name {
			return e.Sigma, nil
		}
	}
	return 0, fmt.Errorf("no estimate %s", name)
}

// scatterMean is the mean moving range, R-bar or s-bar behind the default estimate of sigma.
func (s *solution) scatterMean(r rounding) (float64, error) {
	sigma, err := s.estimate(limits.EstimatorsOf(s.limits.Kind)[0])
	if err != nil {
		return 0, err
	}
	factor, err := s.centreFactor()
	return r.round("scatter_mean", sigma*factor), err
}

// centreFactor is what the dispersion trace's statistic averages to, in sigmas.
func (s *solution) centreFactor() (float64, error) {
	switch s.limits.Kind {
	case chart.Individuals:
		return limits.D2(2)
	case chart.XbarR:
		return limits.D2(s.limits.SubgroupSize)
	}
	return limits.C4(s.limits.SubgroupSize)
}

// pooled takes back the division by c4 that makes the pooled estimate unbiased; prints do without it.
func (s *solution) pooled(r rounding) (float64, error) {
	sigma, err := s.estimate(limits.Pooled)
	if err != nil {
		return 0, err
	}
	c4, err := limits.C4(s.limits.Readings - s.limits.Dispersions + 1)
	return r.round("pooled_s", sigma*c4), err
}

func (s *solution) sigma(r rounding) (float64, error) {
	mean, err := s.scatterMean(r)
	for _, name := range []string{"d2", "c4"} {
		if factor, ok := r.Factors[name]; ok {
			return mean / factor, err
		}
	}
	return s.limits.SigmaUnrounded, err
}

// line gives an action line, from the published result or by the print's own factor.
func (s *solution) line(q quantity, r rounding) (float64, error) {
	if len(r.Factors) == 0 {
		return s.publishedLine(q)
	}
	scatter, err := s.scatterMean(r)
	if _, ok := r.Decimals["pooled_s"]; ok {
		scatter, err = s.pooled(r)
	}
	if err != nil {
		return 0, err
	}
	reach := 0.0
	for name, factor := range r.Factors {
		switch name {
		case "d2":
			reach = chart.ActionMultiple / factor * scatter
		case "E2", "A2", "A3", "D4", "B4":
			reach = factor * scatter
		default:
			return 0, fmt.Errorf("factor %q: not known here", name)
		}
	}
	centre := r.round("centre", s.limits.CentreUnrounded)
	switch q.Compute {
	case "upper_location":
		return centre + reach, nil
	case "lower_location":
		return centre - reach, nil
	}
	return reach, nil
}

func (s *solution) publishedLine(q quantity) (float64, error) {
	if q.Size != 0 && q.Size != s.limits.SubgroupSize {
		return 0, fmt.Errorf("size %d: lines are published for size %d", q.Size, s.limits.SubgroupSize)
	}
	switch q.Compute {
	case "upper_location":
		return s.limits.Location.UpperAction.Value, nil
	case "lower_location":
		return s.limits.Location.LowerAction.Value, nil
	}
	return s.limits.Dispersion.UpperAction.Value, nil
}
