package validation

import (
	"context"
	"fmt"
	"math"
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

const (
	seriesFile = "univariate.json"
	// groupColumn of a series' file names the subgroup of a value.
	groupColumn = "experiment"
)

// series is one series with certified moments.
type series struct {
	Name string
	// A generated series is Leading, then Pair repeated Pairs times; a measured one is Column of File.
	Leading, Pair     []float64
	Pairs             int
	File, Column      string
	Mean              string
	StandardDeviation string `json:"standard_deviation"`
	Lag1              string
	Digits            int
	Note              string
}

func readSeries() (source string, all []series, err error) {
	var file struct {
		Source string
		Series []series
	}
	err = readJSON(seriesFile, &file)
	return file.Source, file.Series, err
}

func (s *series) values() ([]float64, error) {
	if s.File != "" {
		return s.column()
	}
	values := append([]float64(nil), s.Leading...)
	for range s.Pairs {
		values = append(values, s.Pair...)
	}
	return values, nil
}

func (s *series) column() ([]float64, error) {
	t, err := readTable(s.File)
	if err != nil {
		return nil, err
	}
	values := make([]float64, len(t.rows))
	for row := range t.rows {
		if values[row], err = t.number(row, s.Column); err != nil {
			return nil, err
		}
	}
	return values, nil
}

// certified makes the check of a certified figure to the digits of the series.
func (s *series) certified(source, name, text string, got float64) (Check, error) {
	want, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return Check{}, fmt.Errorf("%s, %s: %w", s.Name, name, err)
	}
	return Check{
		Name: s.Name + ": " + name, Source: source, Want: want, Printed: true, Note: s.Note,
		Tolerance: math.Abs(want) * math.Pow10(-s.Digits),
	}.Compare(got), nil
}

func certifiedMoments(context.Context) ([]Check, error) {
	source, all, err := readSeries()
	if err != nil {
		return nil, err
	}
	var checks []Check
	for _, s := range all {
		values, err := s.values()
		if err != nil {
			return checks, err
		}
		lag1, err := limits.Lag1Autocorrelation(values)
		if err != nil {
			return checks, fmt.Errorf("%s: %w", s.Name, err)
		}
		for _, m := range []struct {
			name, text string
			got        float64
		}{
			{"mean", s.Mean, decimal.Mean(values, decimal.Unrounded)},
			{"standard deviation", s.StandardDeviation, limits.StandardDeviation(values)},
			{"lag-1 autocorrelation", s.Lag1, lag1},
		} {
			c, err := s.certified(source, m.name, m.text, m.got)
			if err != nil {
				return checks, err
			}
			checks = append(checks, c)
		}
	}
	return checks, nil
}

// certifiedLimits sends each measured series through the whole computation, as individuals and by its subgroups: centre
// and overall standard deviation must come out as certified.
func certifiedLimits(context.Context) ([]Check, error) {
	source, all, err := readSeries()
	if err != nil {
		return nil, err
	}
	var checks []Check
	for _, s := range all {
		if s.File == "" {
			continue
		}
		requests, err := s.requests()
		if err != nil {
			return checks, err
		}
		for _, req := range requests {
			more, err := s.limitChecks(source, req)
			if err != nil {
				return checks, fmt.Errorf("%s as %s: %w", s.Name, req.Kind, err)
			}
			checks = append(checks, more...)
		}
	}
	return checks, nil
}

func (s *series) requests() ([]limits.Request, error) {
	values, err := s.column()
	if err != nil {
		return nil, err
	}
	t, err := readTable(s.File)
	if err != nil {
		return nil, err
	}
	var single, grouped []limits.Group
	previous, size := "", 0
	for row, x := range values {
		single = append(single, limits.Group{Readings: []float64{x}, Decimals: limits.DecimalsUnknown})
		name, err := t.text(row, groupColumn)
		if err != nil {
			return nil, err
		}
		if name != previous {
			grouped = append(grouped, limits.Group{Decimals: limits.DecimalsUnknown})
		}
		last := &grouped[len(grouped)-1]
		last.Readings = append(last.Readings, x)
		previous, size = name, max(size, len(last.Readings))
	}
	return []limits.Request{
		{Kind: chart.Individuals, SubgroupSize: 1, Groups: single},
		{Kind: chart.XbarR, SubgroupSize: size, Groups: grouped},
		{Kind: chart.XbarS, SubgroupSize: size, Groups: grouped},
	}, nil
}

func (s *series) limitChecks(source string, req limits.Request) ([]Check, error) {
	res, err := limits.Compute(req)
	if err != nil {
		return nil, err
	}
	overall, err := (&solution{limits: res}).estimate(limits.Overall)
	if err != nil {
		return nil, err
	}
	c4, err := limits.C4(res.Readings)
	if err != nil {
		return nil, err
	}
	as := fmt.Sprintf(" as %s, %d groups", req.Kind, res.N)
	centre, err := s.certified(source, "centre"+as, s.Mean, *res.Location.Centre)
	if err != nil {
		return nil, err
	}
	deviation, err := s.certified(source, "overall standard deviation"+as, s.StandardDeviation, overall*c4)
	return []Check{centre, deviation}, err
}
