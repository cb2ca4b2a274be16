package validation

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// average is the EWMA of an example, sums its CUSUM.
func (e *example) average() rules.Spec {
	p := e.Parameters
	return rules.Spec{ID: "average", Kind: rules.EWMA, Consequence: rules.Act, Lambda: p.Lambda, Limit: p.KSigma, Asymptotic: p.Asymptotic}
}

func (e *example) sums(sides rules.Sides) rules.Spec {
	p := e.Parameters
	return rules.Spec{ID: "sum", Kind: rules.CUSUM, Consequence: rules.Act, Sides: sides, Reference: p.K / p.Sigma, Interval: p.H / p.Sigma}
}

// centre is the level that an EWMA starts from, or the reference of a CUSUM.
func (e *example) centre() float64 { return e.Parameters.Start + e.Parameters.Mu0 }

// trace is what the rule of an example looks at.
func (e *example) trace() chart.Trace {
	centre, sigma := e.centre(), e.Parameters.Sigma
	return chart.Trace{Centre: &centre, Sigma: &sigma}
}

// sumAt gives what a rule has accumulated after a sample.
func (e *example) sumAt(rule rules.Spec, sample int) (rules.Sum, error) {
	if sample < 1 || sample > len(e.Data.X) {
		return rules.Sum{}, fmt.Errorf("sample %d of %d", sample, len(e.Data.X))
	}
	plan, err := rules.Compile(e.trace(), decimal.Unrounded, []rules.Spec{rule})
	if err != nil {
		return rules.Sum{}, err
	}
	st := plan.Start(false)
	plan.Judge(st, e.Data.X[:sample], nil, func(rules.Hit) {})
	return plan.Sums(st)[0], nil
}

// accumulated computes a quantity of an EWMA or CUSUM in the unit of the data.
func (s *solution) accumulated(q quantity) (float64, error) {
	e, sigma := s.example, s.example.Parameters.Sigma
	switch q.Compute {
	case "average_of":
		sum, err := e.sumAt(e.average(), q.Sample)
		return e.centre() + sigma*sum.Average, err
	case "average_upper_limit", "average_lower_limit": // those of the last point, which are asymptotic from the first on
		sum, err := e.sumAt(e.average(), len(e.Data.X))
		if q.Compute == "average_lower_limit" {
			sum.Limit = -sum.Limit
		}
		return e.centre() + sigma*sum.Limit, err
	case "upper_sum_of", "lower_sum_of", "upper_points_of", "upper_level_of":
		rule := e.sums(rules.BothSides)
		sum, err := e.sumAt(rule, q.Sample)
		switch q.Compute {
		case "upper_sum_of":
			return sigma * sum.Upper.Sum, err
		case "lower_sum_of":
			return sigma * sum.Lower.Sum, err
		case "upper_points_of":
			return float64(sum.Upper.Points), err
		}
		return e.centre() + sigma*sum.Upper.Shift(rule.Reference), err
	}
	return 0, fmt.Errorf("compute %q: not a known quantity", q.Compute)
}
