package validation

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// count computes a quantity of an example of counts.
func (s *solution) count(q quantity, r rounding) (float64, error) {
	req, res, err := s.counted(q, r)
	if err != nil {
		return 0, err
	}
	if q.Sample != 0 {
		return sampleOfCounts(q, req.Groups, res)
	}
	switch q.Compute {
	case "centre":
		return res.CentreUnrounded, nil
	case "inspected_sum":
		return inspected(req.Groups), nil
	case "count_sum": // the centre times all that it is the mean of
		if res.Kind == chart.P || res.Kind == chart.U {
			return res.CentreUnrounded * inspected(req.Groups), nil
		}
		return res.CentreUnrounded * float64(res.N), nil
	case "upper_location":
		return present(res.Location.UpperAction)
	case "lower_location":
		return present(res.Location.LowerAction)
	case "lower_absent": // prints set to 0 a line that this program leaves out
		if res.Location.LowerAction.Basis == chart.Absent {
			return 0, nil
		}
		return present(res.Location.LowerAction)
	}
	return 0, fmt.Errorf("compute %q: not a known quantity of counts", q.Compute)
}

// counted computes the limits of counts, from the centre as the print rounded it.
func (s *solution) counted(q quantity, r rounding) (req limits.Request, res limits.Result, err error) {
	if req, err = s.example.request(q); err != nil {
		return req, res, err
	}
	if res, err = limits.Compute(req); err != nil || len(r.Decimals) == 0 || q.Compute == "centre" {
		return req, res, err
	}
	centre := r.round("centre", res.CentreUnrounded)
	if places, ok := r.Decimals["fraction"]; ok { // of the items of an np chart
		size := float64(res.SubgroupSize)
		centre = size * decimal.Round(centre/size, places)
	}
	req.Centre = &centre
	res, err = limits.Compute(req)
	return req, res, err
}

func present(l chart.Line) (float64, error) {
	if l.Basis == chart.Absent {
		return 0, fmt.Errorf("there is no such line")
	}
	return l.Value, nil
}

func inspected(groups []limits.Group) (sum float64) {
	for _, g := range groups {
		sum += g.Count.Inspected
	}
	return sum
}

// sampleOfCounts gives what the judge plots for a sample, or one of its own lines there.
func sampleOfCounts(q quantity, groups []limits.Group, res limits.Result) (float64, error) {
	if q.Sample < 1 || q.Sample > len(groups) {
		return 0, fmt.Errorf("sample %d of %d", q.Sample, len(groups))
	}
	j, err := judge.New(judgeable(res, beyondThree))
	if err != nil {
		return 0, err
	}
	var v judge.Verdict
	j.Judge(j.NewState(), judge.Point{Count: groups[q.Sample-1].Count}, &v)
	at := v.Traces[chart.Location]
	if !at.Point {
		return 0, fmt.Errorf("sample %d is no point: %v", q.Sample, v.Reason)
	}
	lines := j.Lines(chart.Location, at.Scale)
	var line *float64
	switch q.Compute {
	case "location_of":
		return at.Statistic, nil
	case "upper_location":
		line = lines.UpperAction
	case "lower_location":
		line = lines.LowerAction
	default:
		return 0, fmt.Errorf("compute %q: not a known quantity of one sample", q.Compute)
	}
	if line == nil {
		return 0, fmt.Errorf("sample %d has no such line", q.Sample)
	}
	return *line, nil
}

// judgeable makes computed limits ready for the judge, with one rule on each trace.
func judgeable(res limits.Result, rule rules.Spec) judge.Limits {
	l := judge.Limits{
		Kind: res.Kind, SubgroupSize: res.SubgroupSize, Places: res.PublishedDecimals, ProcessSigma: res.ProcessSigma, Model: res.Model,
	}
	for role, t := range [...]chart.Trace{res.Location, res.Dispersion} {
		if res.Kind.Has(chart.Role(role)) {
			l.Traces[role] = &judge.Trace{Trace: t, Rules: []rules.Spec{rule}}
		}
	}
	return l
}
