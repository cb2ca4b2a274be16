package service

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
	"limitary/internal/store"
)

// LimitService computes limits and keeps versions of them.
type LimitService struct {
	pb.UnimplementedLimitServiceServer
	store *store.Store
}

// ComputeLimits gives limits and findings for the data sent, and stores nothing.
func (s *LimitService) ComputeLimits(_ context.Context, in *pb.ComputeLimitsRequest) (*pb.ComputeLimitsResponse, error) {
	kind, err := kindFromProto("kind", in.Kind)
	if err != nil {
		return nil, err
	}
	if kind == chart.Given {
		return nil, noKind()
	}
	if kind.SizeImplied() && in.SubgroupSize == 0 {
		in.SubgroupSize = 1
	}
	if err := kind.CheckSize(int(in.SubgroupSize)); err != nil {
		return nil, definition.Invalid("subgroup_size", "%v", err)
	}
	req := limits.Request{Kind: kind, SubgroupSize: int(in.SubgroupSize), Centre: in.Centre, Sigma: in.ProcessSigma}
	if err := settings(&req, in.Estimator, in.PublishedDecimals, in.LocationLines, in.DispersionLines); err != nil {
		return nil, err
	}
	if _, err := readOptions(in.Options, &req); err != nil {
		return nil, under("options", err)
	}
	data, err := sentFromProto(kind, in.GetPoints(), in.GetSeries(), in.Exclusions)
	if err != nil {
		return nil, err
	}
	req.Groups = data.groups
	c, err := compute(req, diagnostics.Times{}, data.path)
	if err != nil {
		return nil, err
	}
	for i := range c.result.Excluded {
		c.result.Excluded[i].Group = data.points[c.result.Excluded[i].Group]
	}
	out := computedToProto(c)
	if in.InForce != nil {
		if out.ChangeTest, err = CompareSent(in.InForce, req, data.path); err != nil {
			return nil, err
		}
	}
	return out, nil
}

func noKind() error {
	return definition.Invalid("kind", "is not set; want one of %s", strings.ToUpper(chart.KindNames()))
}

// computed is a computation with what its data say.
type computed struct {
	result      limits.Result
	diagnostics diagnostics.Report
}

// compute gives limits and diagnostics; path names group i in a refusal.
func compute(req limits.Request, about diagnostics.Times, path func(i int, tail string) string) (computed, error) {
	res, err := limits.Compute(req)
	if err != nil {
		return computed{}, computeRefusal(err, path)
	}
	out := computed{result: res}
	if len(req.Groups) > 0 {
		out.diagnostics = diagnostics.Examine(req, res, about)
	}
	return out, nil
}

// sent is data sent along, ready for a computation.
type sent struct {
	groups []limits.Group
	// points has the index, as sent, of each group; values that are missing have no group.
	points []int
	// of has the group of each value sent, -1 where it is missing.
	of     []int
	series bool
	// statistics tells the groups that were sent as a statistic, not as readings.
	statistics []bool
}

// path names where group i came from, and below it what the computation calls tail.
func (s *sent) path(i int, tail string) string {
	switch at := s.points[i]; {
	case s.series:
		return fmt.Sprintf("series.values[%d]", at)
	case s.statistics[i]:
		return fmt.Sprintf("points.points[%d].statistic", at)
	default:
		return fmt.Sprintf("points.points[%d]%s", at, tail)
	}
}

// add takes in the next value, or that there is none. What is missing breaks the chain of moving ranges.
func (s *sent) add(g limits.Group, there, statistic bool) {
	if !there {
		s.of = append(s.of, -1)
		return
	}
	at := len(s.of)
	g.BreakBefore = g.BreakBefore || at > 0 && s.of[at-1] < 0
	g.Decimals = limits.DecimalsUnknown
	s.of, s.points, s.groups = append(s.of, len(s.groups)), append(s.points, at), append(s.groups, g)
	s.statistics = append(s.statistics, statistic)
}

// settings fills what a computation and a proposal have in common.
func settings(req *limits.Request, e pb.Estimator, decimals *int32, location, dispersion *pb.FixedLines) error {
	var err error
	if req.Estimator, err = estimatorFromProto(e); err != nil {
		return err
	}
	if decimals != nil {
		d := int(*decimals)
		req.PublishedDecimals = &d
	}
	if req.Fixed[chart.Location], err = fixedLines(location); err != nil {
		return under("location_lines", err)
	}
	req.Fixed[chart.Dispersion], err = fixedLines(dispersion)
	return under("dispersion_lines", err)
}

var estimators = map[pb.Estimator]limits.Estimator{
	pb.Estimator_ESTIMATOR_UNSPECIFIED:         limits.DefaultEstimator,
	pb.Estimator_ESTIMATOR_MEAN_MOVING_RANGE:   limits.MeanMovingRange,
	pb.Estimator_ESTIMATOR_MEDIAN_MOVING_RANGE: limits.MedianMovingRange,
	pb.Estimator_ESTIMATOR_R_BAR_OVER_D2:       limits.RBar,
	pb.Estimator_ESTIMATOR_S_BAR_OVER_C4:       limits.SBar,
	pb.Estimator_ESTIMATOR_POOLED:              limits.Pooled,
	pb.Estimator_ESTIMATOR_OVERALL:             limits.Overall,
}

func estimatorFromProto(e pb.Estimator) (limits.Estimator, error) {
	out, ok := estimators[e]
	if !ok {
		return 0, definition.Invalid("estimator", "%d: no such value", e)
	}
	return out, nil
}

func fixedLines(in *pb.FixedLines) (out limits.FixedLines, err error) {
	for _, l := range []struct {
		field string
		in    *pb.Line
		out   **chart.Line
	}{
		{"lower_action", in.GetLowerAction(), &out.LowerAction}, {"upper_action", in.GetUpperAction(), &out.UpperAction},
		{"lower_warning", in.GetLowerWarning(), &out.LowerWarning}, {"upper_warning", in.GetUpperWarning(), &out.UpperWarning},
	} {
		if l.in == nil {
			continue
		}
		line, err := fixedLine(l.in)
		if err != nil {
			return out, under(l.field, err)
		}
		if line.Basis == chart.SigmaMultiple && l.in.Value == nil {
			continue // as computed
		}
		if line.Basis != chart.MethodCriterion && line.Basis != chart.Target && line.Basis != chart.Absent {
			return out, definition.Invalid(l.field+".basis", "want METHOD_CRITERION, TARGET or ABSENT; other lines are computed")
		}
		*l.out = &line
	}
	return out, nil
}

// sentFromProto reads data sent along with what is left out of the estimate.
func sentFromProto(kind chart.Kind, points *pb.Points, series *pb.Series, exclusions []*pb.Exclusion) (*sent, error) {
	s := &sent{series: series != nil}
	var err error
	switch {
	case series != nil && kind != chart.Individuals:
		return nil, definition.Invalid("series", "has one value a point, but the chart is of kind %s; send points with readings", kind)
	case series != nil:
		err = s.takeSeries(series.Values)
	default:
		err = s.takePoints(kind, points.GetPoints())
	}
	if err != nil {
		return nil, err
	}
	return s, s.exclude(exclusions)
}

func (s *sent) takeSeries(values []float64) error {
	if err := tooMany("series.values", len(values), PointsMax, "values"); err != nil {
		return err
	}
	for i, x := range values {
		s.add(limits.Group{Readings: values[i : i+1 : i+1]}, !math.IsNaN(x), false)
	}
	return nil
}

func (s *sent) takePoints(kind chart.Kind, points []*pb.Point) error {
	if err := tooMany("points.points", len(points), PointsMax, "points"); err != nil {
		return err
	}
	for i, p := range points {
		field := func(name string) string { return fmt.Sprintf("points.points[%d].%s", i, name) }
		if p.Centre != nil || p.Sigma != nil {
			return definition.Invalid(field("centre"), "centre and sigma of a point are for judging, not for computing limits")
		}
		g, statistic := limits.Group{BreakBefore: p.BreakBefore, Material: p.Material}, false
		switch v := p.GetValue().(type) {
		case nil:
		case *pb.Point_Statistic:
			if kind != chart.Individuals {
				return definition.Invalid(field("statistic"), "a chart of kind %s takes %s", kind, takes(kind))
			}
			g.Readings, statistic = []float64{v.Statistic}, true
		case *pb.Point_Readings:
			if kind.Counts() {
				return definition.Invalid(field("readings"), "a chart of kind %s takes counts", kind)
			}
			if len(v.Readings.GetBounds()) > 0 {
				return definition.Invalid(field("readings.bounds"), "are given, but no limits are computed from bounds; leave such points out")
			}
			g.Readings = v.Readings.GetValues()
		case *pb.Point_Count:
			if !kind.Counts() {
				return noCounts(field("count"), kind)
			}
			g.Count = &chart.Count{Nonconforming: v.Count.GetNonconforming(), Inspected: v.Count.GetInspected()}
		}
		s.add(g, p.Value != nil, statistic)
	}
	return nil
}

// takes names what results of a kind hold.
func takes(kind chart.Kind) string {
	if kind.Counts() {
		return "counts"
	}
	return "readings"
}

// exclude marks the groups left out of the estimate.
func (s *sent) exclude(exclusions []*pb.Exclusion) error {
	if err := tooMany("exclusions", len(exclusions), ExclusionsMax, "exclusions"); err != nil {
		return err
	}
	for i, e := range exclusions {
		field := func(name string) string { return fmt.Sprintf("exclusions[%d].%s", i, name) }
		if e.Point < 0 || int(e.Point) >= len(s.of) {
			return definition.Invalid(field("point"), "%d: there are points 0 to %d", e.Point, len(s.of)-1)
		}
		if err := definition.CheckText(field("reason"), e.Reason, 1, limits.ReasonBytesMax); err != nil {
			return err
		}
		at := s.of[e.Point]
		if at < 0 {
			return definition.Invalid(field("point"), "%d has no value to exclude", e.Point)
		}
		if s.groups[at].Excluded {
			return definition.Invalid(field("point"), "%d is excluded twice", e.Point)
		}
		s.groups[at].Excluded, s.groups[at].ExclusionReason = true, e.Reason
	}
	return nil
}

// computeRefusal turns what package limits says of a request into a refusal. Where the data as a whole do not give
// limits the reason says so; a wrong figure is an invalid field.
func computeRefusal(err error, group func(i int, tail string) string) error {
	var e *limits.Error
	if !errors.As(err, &e) {
		return err
	}
	text := optionNames.Replace(e.Problem)
	if e.Value != "" {
		text = e.Value + ": " + text
	}
	switch name, rest, below := strings.Cut(e.Field, "["); {
	case e.Field == "sigma":
		return definition.Invalid("process_sigma", "%s", text)
	case e.Field == "groups":
		return &definition.Error{Reason: definition.LimitsNotComputable, Field: "data", Text: text}
	case name == "groups" && below:
		var i int
		tail := ""
		if number, after, ok := strings.Cut(rest, "]"); ok {
			fmt.Sscan(number, &i)
			tail = contractNames.Replace(after)
		}
		reason := definition.InvalidField
		if tail == ".readings" {
			reason = definition.WrongReadingCount
		}
		return &definition.Error{Reason: reason, Field: group(i, tail), Text: text}
	}
	return definition.Invalid(contractField(e.Field), "%s", text)
}

// contractField gives the path of a field of package limits in the contract.
func contractField(field string) string {
	if named := optionNames.Replace(field); named != field {
		return named
	}
	if strings.HasPrefix(field, "transform") || strings.HasPrefix(field, "levels") {
		return "options." + field
	}
	return contractNames.Replace(field)
}

// optionNames turns the names of what kinds can be asked for into those of the contract.
var optionNames = strings.NewReplacer(
	"counts.method", "options.count_method", "counts.extra", "options.extra_variation", "counts.meanUpperBound", "options.mean_upper_bound",
	"duplicates.sigmas", "options.band_sigma", "duplicates.bands", "options.band_from", "duplicates.function", "options.spread_function",
	"duplicates.absoluteSigma", "options.absolute_sigma", "duplicates.absoluteBelow", "options.absolute_below",
	"duplicates.absolute_below", "options.absolute_below", "duplicates.s0", "options.s0", "duplicates.b", "options.b",
	"betweenSigma", "options.between_sigma",
)

// contractNames turns the field names of package limits into those of the contract.
var contractNames = strings.NewReplacer(
	"fixed.location.", "location_lines.", "fixed.dispersion.", "dispersion_lines.",
	"lowerAction", "lower_action", "upperAction", "upper_action", "lowerWarning", "lower_warning", "upperWarning", "upper_warning",
	"subgroupSize", "subgroup_size", "publishedDecimals", "published_decimals", "exclusionReason", "reason",
	"readings[", "readings.values[",
)
