package judge

import (
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// SeriesHit is one rule completing at one value of a series. The indices count all values from 0, missing ones included.
type SeriesHit struct {
	Point                      int
	Role                       chart.Role
	Rule                       int
	Side                       rules.Side
	WindowFirst, FirstCounting int
}

// Series judges a whole sequence of single values in one segment; NaN stands for no result. It gives what judging the
// values one by one gives, in a fraction of the time. Kinds with subgroups take points, not series.
func (j *Judge) Series(values []float64) []SeriesHit {
	if !j.straight {
		return j.seriesOnScale(values)
	}
	xs, index := j.present(values)
	var hits []SeriesHit
	collect := func(role chart.Role, points []float64, first int) {
		plan := j.plans[role]
		if plan == nil || len(points) == 0 {
			return
		}
		at := func(i int) int {
			if index == nil {
				return i + first
			}
			return int(index[i+first])
		}
		plan.Judge(plan.Start(false), points, nil, func(h rules.Hit) {
			hits = append(hits, SeriesHit{at(h.Point), role, h.Rule, h.Side, at(h.Point - h.WindowBack), at(h.Point - h.FirstBack)})
		})
	}
	collect(chart.Location, j.rounded(xs), 0)
	if j.limits.Kind == chart.Individuals && j.plans[chart.Dispersion] != nil && len(xs) > 1 {
		ranges := make([]float64, len(xs)-1)
		for i := range ranges {
			ranges[i] = distance(xs[i+1], xs[i], j.limits.Places)
		}
		collect(chart.Dispersion, ranges, 1)
		slices.SortStableFunc(hits, func(a, b SeriesHit) int { return a.Point - b.Point })
	}
	return hits
}

// present gives the values that are results and, where some are missing, the index each had.
func (j *Judge) present(values []float64) (xs []float64, index []int32) {
	first := slices.IndexFunc(values, math.IsNaN)
	if first < 0 {
		return values, nil
	}
	xs, index = append(xs, values[:first]...), make([]int32, first, len(values))
	for i := range index {
		index[i] = int32(i)
	}
	for i := first; i < len(values); i++ {
		if !math.IsNaN(values[i]) {
			xs, index = append(xs, values[i]), append(index, int32(i))
		}
	}
	return xs, index
}

func (j *Judge) rounded(xs []float64) []float64 {
	if j.limits.Places == decimal.Unrounded {
		return xs
	}
	out := make([]float64, len(xs))
	for i, x := range xs {
		out[i] = decimal.Round(x, j.limits.Places)
	}
	return out
}

// seriesOnScale is Series for readings that are judged on another scale, point by point.
func (j *Judge) seriesOnScale(values []float64) (hits []SeriesHit) {
	st := j.NewState()
	var v Verdict
	var index [chart.Roles][]int // of the values that were points
	for i, x := range values {
		if math.IsNaN(x) {
			continue
		}
		one := [1]float64{x}
		j.Judge(st, Point{Readings: one[:]}, &v)
		for role, t := range v.Traces {
			if t.Point {
				index[role] = append(index[role], i)
			}
		}
		for _, h := range v.Hits {
			at := index[h.Role]
			last := len(at) - 1
			hits = append(hits, SeriesHit{i, h.Role, h.Rule, h.Side, at[last-h.WindowBack], at[last-h.FirstBack]})
		}
	}
	return hits
}
