package main

import (
	"fmt"
	"slices"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// kindFlags are what limits of some kinds can be asked for. Compute and the proposal of a version share them.
type kindFlags struct {
	levels                                                levelFlag
	scale, oneSided, countMethod, extra                   string
	offset, between, meanUpperBound                       numberFlag
	bands, bandSigmas                                     numbersFlag
	spreadFunction                                        bool
	spreadAtZero, spreadGrowth, absoluteBelow, absoluteOf numberFlag
}

func (k *kindFlags) register(f *flagSet) {
	f.Var(&k.levels, "level", "`MATERIAL=REFERENCE,SIGMA`: results of the material are standardised by these, with a decimal point; repeatable")
	f.StringVar(&k.scale, "scale", "", "`NAME` of the scale the results are judged on: log or sqrt; centre, sigma and lines are then given on it")
	f.Var(&k.offset, "offset", "`X` added to every result before --scale")
	f.StringVar(&k.oneSided, "one-sided", "", "`SIDE` of the location trace that alone is watched: upper or lower")
	f.Var(&k.between, "between-sigma", "`S`: the standard deviation between runs is a target, not estimated; --sigma is then that within runs")
	f.StringVar(&k.countMethod, "count-method", "", "`NAME` of how lines of counts follow from their mean: normal or exact; if not given, exact where few are expected")
	f.StringVar(&k.extra, "extra", "", "`NAME` of the variation of counts between samples beyond counting: factor or between; if not given, none")
	f.Var(&k.meanUpperBound, "mean-upper-bound", "`M` in place of the mean of counts that are all zero")
	f.Var(&k.bands, "bands", "`LIST` of means, separated by commas, from which each band of duplicates has its own sigma: 0,10,50")
	f.Var(&k.bandSigmas, "band-sigma", "`LIST` of the bands' standard deviations of a single reading, separated by commas: targets, not estimated")
	f.BoolVar(&k.spreadFunction, "spread-function", false, "the sigma of duplicates is the root of s0² + (b·mean)², both estimated unless given")
	f.Var(&k.spreadAtZero, "spread-at-zero", "`S0` of --spread-function is a target")
	f.Var(&k.spreadGrowth, "spread-growth", "`B` of --spread-function is a target")
	f.Var(&k.absoluteBelow, "absolute-below", "`X`: below this mean a relative range is not relative, and the plain range is plotted")
	f.Var(&k.absoluteOf, "absolute-sigma", "`S`: the standard deviation of a single reading below it is a target, not estimated")
}

// kindFlag is one flag with whether it is given and which kinds it fits.
type kindFlag struct {
	name  string
	given bool
	fits  func(chart.Kind) bool
}

func (k *kindFlags) all() []kindFlag {
	readings := func(kind chart.Kind) bool { return kind.Has(chart.Location) && !kind.Counts() }
	only := func(kinds ...chart.Kind) func(chart.Kind) bool {
		return func(kind chart.Kind) bool { return slices.Contains(kinds, kind) }
	}
	plain, relative := only(chart.DuplicateRange), only(chart.RelativeRange)
	return []kindFlag{
		{"level", len(k.levels) > 0, readings}, {"scale", k.scale != "", readings}, {"offset", k.offset.value != nil, readings},
		{"one-sided", k.oneSided != "", func(kind chart.Kind) bool { return kind.Has(chart.Location) }},
		{"between-sigma", k.between.value != nil, only(chart.RunMeans)},
		{"count-method", k.countMethod != "", chart.Kind.Counts}, {"extra", k.extra != "", chart.Kind.Counts},
		{"mean-upper-bound", k.meanUpperBound.value != nil, chart.Kind.Counts},
		{"bands", len(k.bands) > 0, chart.Kind.Duplicates}, {"band-sigma", len(k.bandSigmas) > 0, chart.Kind.Duplicates},
		{"spread-function", k.spreadFunction, plain}, {"spread-at-zero", k.spreadAtZero.value != nil, plain}, {"spread-growth", k.spreadGrowth.value != nil, plain},
		{"absolute-below", k.absoluteBelow.value != nil, relative}, {"absolute-sigma", k.absoluteOf.value != nil, relative},
	}
}

// fit refuses a flag that the kind does not have, and names those that do.
func (k *kindFlags) fit(kind chart.Kind) error {
	for _, f := range k.all() {
		if f.given && !f.fits(kind) {
			return fmt.Errorf("--%s: fits charts of kind %s, and this one is of kind %s", f.name, kindsThat(f.fits), kind)
		}
	}
	return nil
}

// kindsThat names the kinds that something fits.
func kindsThat(fits func(chart.Kind) bool) string {
	var names []string
	for _, name := range strings.Split(chart.KindNames(), ", ") {
		if kind, err := chart.ParseKind(name); err == nil && fits(kind) {
			names = append(names, name)
		}
	}
	return strings.Join(names, ", ")
}

// options gives the flags in the contract's words; nil where none is given.
func (k *kindFlags) options() (*pb.KindOptions, error) {
	if !slices.ContainsFunc(k.all(), func(f kindFlag) bool { return f.given }) {
		return nil, nil
	}
	out := &pb.KindOptions{
		BetweenSigma: k.between.value, MeanUpperBound: k.meanUpperBound.value, BandFrom: k.bands, BandSigma: k.bandSigmas,
		SpreadFunction: k.spreadFunction, S0: k.spreadAtZero.value, B: k.spreadGrowth.value, AbsoluteSigma: k.absoluteOf.value,
	}
	if k.absoluteBelow.value != nil {
		out.AbsoluteBelow = *k.absoluteBelow.value
	}
	for _, l := range k.levels {
		out.Levels = append(out.Levels, &pb.Level{Material: l.Material, Reference: l.Reference, Sigma: l.Sigma})
	}
	transform, err := k.transform()
	if err != nil {
		return nil, err
	}
	if transform.Kind != chart.Identity {
		out.Transform = &pb.Transform{Kind: pb.TransformKind(transform.Kind), Offset: transform.Offset}
	}
	sides, err := parseSide(k.oneSided)
	if err != nil {
		return nil, err
	}
	out.OneSided = map[rules.Sides]pb.WatchedSide{rules.UpperOnly: pb.WatchedSide_WATCHED_SIDE_UPPER, rules.LowerOnly: pb.WatchedSide_WATCHED_SIDE_LOWER}[sides]
	counts, err := k.counts()
	out.CountMethod, out.ExtraVariation = pb.CountMethod(counts.Method), pb.ExtraVariation(counts.Extra)
	return out, err
}

// apply fills in the request.
func (k *kindFlags) apply(req *limits.Request) (err error) {
	if err = k.fit(req.Kind); err != nil {
		return err
	}
	if req.Transform, err = k.transform(); err != nil {
		return err
	}
	if req.Counts, err = k.counts(); err != nil {
		return err
	}
	req.Levels, req.BetweenSigma = k.levels, k.between.value
	req.Duplicates = limits.DuplicateOptions{
		Bands: k.bands, Sigmas: k.bandSigmas, Function: k.spreadFunction, S0: k.spreadAtZero.value, B: k.spreadGrowth.value, AbsoluteSigma: k.absoluteOf.value,
	}
	if k.absoluteBelow.value != nil {
		req.Duplicates.AbsoluteBelow = *k.absoluteBelow.value
	}
	return k.watchOneSide(&req.Fixed[chart.Location])
}

func (k *kindFlags) transform() (t chart.Transform, err error) {
	if k.scale != "" {
		if t.Kind, err = chart.ParseTransform(k.scale); err != nil || t.Kind == chart.Identity {
			return t, fmt.Errorf("--scale %q: want log or sqrt", k.scale)
		}
	}
	if x := k.offset.value; x != nil {
		if t.Kind == chart.Identity {
			return t, fmt.Errorf("--offset %v: is added before a scale is taken; give it with --scale log or --scale sqrt", *x)
		}
		t.Offset = *x
	}
	return t, nil
}

func (k *kindFlags) counts() (o limits.CountOptions, err error) {
	o.MeanUpperBound = k.meanUpperBound.value
	var ok bool
	methods := map[string]chart.CountMethod{"": chart.CountMethodDefault, "normal": chart.Normal, "exact": chart.Exact}
	if o.Method, ok = methods[k.countMethod]; !ok {
		return o, fmt.Errorf("--count-method %q: want normal or exact", k.countMethod)
	}
	extras := map[string]limits.ExtraVariation{"": limits.NoExtra, "factor": limits.LaneyFactor, "between": limits.BetweenSamples}
	if o.Extra, ok = extras[k.extra]; !ok {
		return o, fmt.Errorf("--extra %q: want factor or between", k.extra)
	}
	return o, nil
}

// watchOneSide leaves out the lines of the side that is not watched.
func (k *kindFlags) watchOneSide(fixed *limits.FixedLines) error {
	sides, err := parseSide(k.oneSided)
	if err != nil || sides == rules.BothSides {
		return err
	}
	at := [2]int{0, 2} // of lineNames: the lower lines
	lines := [4]**chart.Line{&fixed.LowerAction, &fixed.UpperAction, &fixed.LowerWarning, &fixed.UpperWarning}
	if sides == rules.LowerOnly {
		at = [2]int{1, 3}
	}
	for _, i := range at {
		if had := *lines[i]; had != nil && had.Basis != chart.Absent {
			return fmt.Errorf("--%s %v: lies on the side that --one-sided %s does not watch; leave one of the two out", lineNames[i].flag, had.Value, k.oneSided)
		}
		*lines[i] = &chart.Line{Basis: chart.Absent}
	}
	return nil
}

// parseSide reads --one-sided; empty watches both sides.
func parseSide(text string) (rules.Sides, error) {
	switch text {
	case "":
		return rules.BothSides, nil
	case "upper":
		return rules.UpperOnly, nil
	case "lower":
		return rules.LowerOnly, nil
	}
	return rules.BothSides, fmt.Errorf("--one-sided %q: want upper or lower", text)
}

// watchSide lets the rules of the location trace watch one side. Rules that need both sides are refused.
func (c *choice) watchSide(text string) error {
	sides, err := parseSide(text)
	if err != nil || sides == rules.BothSides {
		return err
	}
	for _, s := range c.specs[chart.Location] {
		if s.Kind == rules.Span {
			return fmt.Errorf("--rules: %s looks for points on opposite sides, and --one-sided %s watches one side only; choose another set", s.ID, text)
		}
	}
	c.specs[chart.Location] = rules.OneSide(c.specs[chart.Location], sides)
	c.cautions = append(c.cautions, fmt.Sprintf("Only the %s side of the location trace is watched; patterns that have no side are looked for all the same.", text))
	return nil
}
