package limits

import (
	"fmt"
	"math"

	"limitary/internal/chart"
)

// AtModel is At with a model: between runs, sigma has a part that more readings do not lessen. The process sigma is that
// of a single reading within its run.
func AtModel(kind chart.Kind, processSigma float64, m *chart.Model, n int) (Scale, bool) {
	s, ok := At(kind, processSigma, n)
	if kind == chart.RunMeans {
		s.LocationSigma = math.Hypot(m.BetweenSigma, s.LocationSigma)
	}
	return s, ok
}

// CheckModel refuses a model that a chart of the kind does not have, or that cannot be judged by. Errors are *Error.
func CheckModel(kind chart.Kind, m *chart.Model) error {
	figures := []struct {
		field string
		value float64
		of    bool
	}{
		{"between_sigma", m.BetweenSigma, kind == chart.RunMeans || kind == chart.P || kind == chart.U},
		{"inflation", m.Inflation, kind.Counts()},
		{"inspected", m.Inspected, kind.Counts()},
	}
	for _, f := range figures {
		switch {
		case !(f.value >= 0) || !finiteAndBounded(f.value):
			return refuse(f.field, f.value, "want a finite number of at least 0")
		case f.value != 0 && !f.of:
			return refuse(f.field, f.value, "a chart of kind %s has none", kind)
		}
	}
	readings := !kind.Counts() && !kind.Duplicates() && kind != chart.Given
	switch {
	case m.CountMethod > chart.Exact || m.CountMethod != chart.CountMethodDefault && !kind.Counts():
		return refuse("count_method", m.CountMethod, "a chart of kind %s has none", kind)
	case kind.Counts() && m.CountMethod == chart.CountMethodDefault:
		return refuse("count_method", m.CountMethod, "want normal or exact")
	case kind.Counts() && m.Inspected == 0:
		return refuse("inspected", m.Inspected, "want the size that the lines are published for, more than 0")
	case m.CountMethod == chart.Exact && (m.Inflation != 0 || m.BetweenSigma != 0):
		return refuse("count_method", m.CountMethod, "exact lines are those of counting alone; take normal ones with extra variation")
	case m.Inflation != 0 && m.BetweenSigma != 0:
		return refuse("inflation", m.Inflation, "is given beside a sigma between samples; take one of the two")
	case m.Transform.Kind > chart.SquareRoot || m.Transform.Kind != chart.Identity && !readings:
		return refuse("transform", m.Transform.Kind, "a chart of kind %s is not transformed", kind)
	case !finiteAndBounded(m.Transform.Offset) || m.Transform.Kind == chart.Identity && m.Transform.Offset != 0:
		return refuse("transform.offset", m.Transform.Offset, "want a finite number, and only on a transformed scale")
	case len(m.Levels) > 0 && (!readings || m.Transform.Kind != chart.Identity):
		return refuse("levels", fmt.Sprintf("%d levels", len(m.Levels)), "only charts of untransformed readings are standardised")
	case m.Spread != nil && !kind.Duplicates():
		return refuse("spread", "given", "a chart of kind %s has none", kind)
	}
	if err := checkLevels(m.Levels); err != nil {
		return err
	}
	return checkSpread(kind, m.Spread)
}

func checkLevels(levels []chart.Level) error {
	if len(levels) > chart.LevelsMax {
		return refuse("levels", len(levels), "more than the limit of %d", chart.LevelsMax)
	}
	seen := map[string]bool{}
	for i, l := range levels {
		field := func(name string) string { return fmt.Sprintf("levels[%d].%s", i, name) }
		switch {
		case l.Material == "":
			return refuse(field("material"), "empty", "every level names its material")
		case seen[l.Material]:
			return refuse(field("material"), l.Material, "is named twice")
		case !finiteAndBounded(l.Reference):
			return refuse(field("reference"), l.Reference, "want a finite number")
		case !(l.Sigma > 0) || !finiteAndBounded(l.Sigma):
			return refuse(field("sigma"), l.Sigma, "want a finite number above 0")
		}
		seen[l.Material] = true
	}
	return nil
}

func checkSpread(kind chart.Kind, s *chart.Spread) error {
	if s == nil {
		return nil
	}
	if len(s.Bands) > chart.BandsMax {
		return refuse("spread.bands", len(s.Bands), "more than the limit of %d", chart.BandsMax)
	}
	for i, b := range s.Bands {
		field := func(name string) string { return fmt.Sprintf("spread.bands[%d].%s", i, name) }
		switch {
		case !(b.From >= 0) || !finiteAndBounded(b.From) || i > 0 && b.From <= s.Bands[i-1].From:
			return refuse(field("from"), b.From, "want means of at least 0, each larger than the one before")
		case !(b.Sigma > 0) || !finiteAndBounded(b.Sigma):
			return refuse(field("sigma"), b.Sigma, "want a finite number above 0")
		}
	}
	function := s.S0 != 0 || s.B != 0
	switch {
	case !(s.S0 >= 0) || !(s.B >= 0) || !finiteAndBounded(s.S0) || !finiteAndBounded(s.B):
		return refuse("spread.s0", fmt.Sprintf("s0 %v, b %v", s.S0, s.B), "want finite numbers of at least 0")
	case function && s.S0 == 0:
		return refuse("spread.s0", s.S0, "want more than 0: duplicates with a mean of zero would have no scatter at all")
	case function && (len(s.Bands) > 0 || kind != chart.DuplicateRange):
		return refuse("spread.s0", s.S0, "a function of the mean goes with a duplicate_range chart without bands")
	case (s.AbsoluteBelow != 0 || s.AbsoluteSigma != 0) && kind != chart.RelativeRange:
		return refuse("spread.absolute_below", s.AbsoluteBelow, "only a relative_range chart turns to the plain range at low means")
	case !(s.AbsoluteBelow >= 0) || !finiteAndBounded(s.AbsoluteBelow):
		return refuse("spread.absolute_below", s.AbsoluteBelow, "want a finite number of at least 0")
	case s.AbsoluteBelow > 0 != (s.AbsoluteSigma > 0) || !finiteAndBounded(s.AbsoluteSigma):
		return refuse("spread.absolute_sigma", s.AbsoluteSigma, "goes with a mean below which it holds; both are more than 0")
	}
	return nil
}
