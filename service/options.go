package service

import (
	"fmt"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// readOptions fills what limits of some kinds can be asked for; package limits checks whether the kind of the request has
// it. Sides is the side of a one-sided chart.
func readOptions(in *pb.KindOptions, req *limits.Request) (sides rules.Sides, err error) {
	if in == nil {
		return rules.BothSides, nil
	}
	if req.Transform, err = transformFromProto(in.Transform); err != nil {
		return sides, err
	}
	req.Levels, req.BetweenSigma = levelsFromProto(in.Levels), in.BetweenSigma
	if req.Counts.Method, err = countMethodFromProto(in.CountMethod); err != nil {
		return sides, err
	}
	if e := in.ExtraVariation; e < 0 || e > pb.ExtraVariation_EXTRA_VARIATION_BETWEEN_SAMPLES {
		return sides, definition.Invalid("extra_variation", "%d: no such value", e)
	}
	req.Counts.Extra, req.Counts.MeanUpperBound = limits.ExtraVariation(in.ExtraVariation), in.MeanUpperBound
	req.Duplicates = limits.DuplicateOptions{
		Bands: in.BandFrom, Sigmas: in.BandSigma, Function: in.SpreadFunction, S0: in.S0, B: in.B,
		AbsoluteBelow: in.AbsoluteBelow, AbsoluteSigma: in.AbsoluteSigma,
	}
	if in.OneSided != pb.WatchedSide_WATCHED_SIDE_UNSPECIFIED && !req.Kind.Has(chart.Location) {
		return sides, definition.Invalid("one_sided", "is given, but a chart of kind %s has no location trace; it watches the upper side by itself", req.Kind)
	}
	return oneSided(in.OneSided, req)
}

// oneSided leaves out the lines of the location trace on the side that is not watched.
func oneSided(side pb.WatchedSide, req *limits.Request) (rules.Sides, error) {
	fixed := &req.Fixed[chart.Location]
	var drop []**chart.Line
	var sides rules.Sides
	switch side {
	case pb.WatchedSide_WATCHED_SIDE_UNSPECIFIED:
		return rules.BothSides, nil
	case pb.WatchedSide_WATCHED_SIDE_UPPER:
		sides, drop = rules.UpperOnly, []**chart.Line{&fixed.LowerAction, &fixed.LowerWarning}
	case pb.WatchedSide_WATCHED_SIDE_LOWER:
		sides, drop = rules.LowerOnly, []**chart.Line{&fixed.UpperAction, &fixed.UpperWarning}
	default:
		return 0, definition.Invalid("one_sided", "%d: no such value", side)
	}
	for _, line := range drop {
		if *line != nil && (*line).Basis != chart.Absent {
			return 0, definition.Invalid("one_sided", "a line is given on the side that is not watched, at %v; leave one of the two out", (*line).Value)
		}
		*line = &chart.Line{Basis: chart.Absent}
	}
	return sides, nil
}

// watched gives the rules as a chart with the side watched has them. Rules that need both sides are refused.
func watched(field string, specs []rules.Spec, sides rules.Sides) ([]rules.Spec, error) {
	if sides == rules.BothSides {
		return specs, nil
	}
	for i, s := range specs {
		if s.Sides != rules.BothSides && s.Sides != sides {
			return nil, definition.Invalid(fmt.Sprintf("%s.rules[%d].sides", field, i), "%s watches the side that this chart does not watch", s.ID)
		}
		if s.Kind == rules.Span {
			return nil, definition.Invalid(fmt.Sprintf("%s.rules[%d]", field, i), "%s looks for points on opposite sides, and one side only is watched", s.ID)
		}
	}
	return rules.OneSide(specs, sides), nil
}
