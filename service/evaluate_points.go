package service

import (
	"fmt"
	"math"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
)

// pointFromProto makes a point for a judge of limits; one holds the value of a statistic.
func pointFromProto(in *pb.Point, l judge.Limits, one *[1]float64) (judge.Point, error) {
	pt := judge.Point{Centre: in.Centre, Sigma: in.Sigma, Break: in.GetBreakBefore(), Material: in.GetMaterial()}
	if (in.Centre != nil || in.Sigma != nil) && l.Kind != chart.Given {
		return pt, definition.Invalid("centre", "centre and sigma of a point are given, but they follow from the number of readings on a chart of kind %s", l.Kind)
	}
	if in.Centre != nil && !finite(*in.Centre) {
		return pt, definition.Invalid("centre", "%v: want a finite number", *in.Centre)
	}
	if in.Sigma != nil && !(finite(*in.Sigma) && *in.Sigma > 0) {
		return pt, definition.Invalid("sigma", "%v: want a finite number above 0", *in.Sigma)
	}
	switch v := in.GetValue().(type) {
	case nil: // no result
	case *pb.Point_Statistic:
		if l.Kind != chart.Given && l.Kind != chart.Individuals {
			return pt, definition.Invalid("statistic", "%v: a chart of kind %s takes %s", v.Statistic, l.Kind, takes(l.Kind))
		}
		if !finite(v.Statistic) {
			return pt, definition.Invalid("statistic", "%v: want a finite number; a point without a value is no result", v.Statistic)
		}
		one[0] = v.Statistic
		pt.Readings = one[:]
	case *pb.Point_Readings:
		if err := checkReadings(v.Readings.GetValues(), l); err != nil {
			return pt, err
		}
		bounds, err := boundsFromProto(v.Readings)
		if err != nil {
			return pt, err
		}
		pt.Readings, pt.Bounds = v.Readings.GetValues(), bounds
	case *pb.Point_Count:
		if !l.Kind.Counts() {
			return pt, noCounts("count", l.Kind)
		}
		pt.Count = &chart.Count{Nonconforming: v.Count.GetNonconforming(), Inspected: v.Count.GetInspected()}
		if err := l.Kind.CheckCount(*pt.Count, l.SubgroupSize); err != nil {
			return pt, definition.Invalid("count", "%v", err)
		}
	}
	return pt, nil
}

func noCounts(field string, k chart.Kind) error {
	if k == chart.Given {
		return definition.Invalid(field, "is given, but the limits are for statistics plotted as given")
	}
	return definition.Invalid(field, "is given, but a chart of kind %s takes readings", k)
}

func checkReadings(values []float64, l judge.Limits) error {
	n := len(values)
	switch {
	case l.Kind.Counts():
		return definition.Invalid("readings", "are given, but a chart of kind %s takes counts", l.Kind)
	case l.Kind == chart.Given:
		return definition.Invalid("readings", "are given, but no kind; send the statistic that is plotted, or name a kind")
	case n == 0 || n > l.SubgroupSize:
		return &definition.Error{Reason: definition.WrongReadingCount, Field: "readings",
			Text: fmt.Sprintf("%d readings: want 1 to %d, the subgroup size", n, l.SubgroupSize)}
	case n < l.SubgroupSize && l.ProcessSigma == 0:
		return definition.Invalid("readings", "%d of %d readings, and the sigma of a single reading is not known; give process_sigma", n, l.SubgroupSize)
	}
	for i, x := range values {
		if !finite(x) {
			return definition.Invalid(fmt.Sprintf("readings.values[%d]", i), "%v: want a finite number", x)
		}
	}
	return nil
}

// boundsFromProto gives a bound for each reading, nil where all are measured.
func boundsFromProto(in *pb.Readings) ([]decimal.Bound, error) {
	given := in.GetBounds()
	if len(given) == 0 {
		return nil, nil
	}
	if len(given) != len(in.GetValues()) {
		return nil, definition.Invalid("readings.bounds", "%d bounds for %d values: want as many, or none where all are measured", len(given), len(in.GetValues()))
	}
	bounds, bounded := make([]decimal.Bound, len(given)), false
	for i, g := range given {
		switch g {
		case pb.ReadingBound_READING_BOUND_UNSPECIFIED:
		case pb.ReadingBound_READING_BOUND_BELOW:
			bounds[i], bounded = decimal.Below, true
		case pb.ReadingBound_READING_BOUND_ABOVE:
			bounds[i], bounded = decimal.Above, true
		default:
			return nil, definition.Invalid(fmt.Sprintf("readings.bounds[%d]", i), "%d: no such value", g)
		}
	}
	if !bounded {
		return nil, nil
	}
	return bounds, nil
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
