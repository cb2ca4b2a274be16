package main

import (
	"errors"
	"fmt"
	"slices"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/report"
	"limitary/service"
)

// inForceFlags set new results against limits in force.
type inForceFlags struct {
	file         string
	afterSignal  bool
	looks        int
	shift, ratio numberFlag
}

func (c *inForceFlags) register(f *flagSet) {
	f.StringVar(&c.file, "in-force", "", "`FILE` that compute --json wrote: tells whether these limits should be kept, given the results, none of which may be in their basis")
	f.BoolVar(&c.afterSignal, "after-signal", false, "--in-force is looked at because of a signal, so that p is not valid")
	f.IntVar(&c.looks, "looks", 1, "`N`: how often the limits were looked at in twelve months, this time included")
	f.Var(&c.shift, "relevant-shift", "`D` sigmas of the plotted statistic up to which a difference of centres does not matter (default 0.5)")
	f.Var(&c.ratio, "relevant-ratio", "`Q` up to which a ratio of sigmas does not matter, either way (default 1.25)")
}

// check refuses flags that say nothing without limits in force.
func (c *inForceFlags) check() error {
	if c.file == "" && (c.afterSignal || c.looks != 1 || c.shift.value != nil || c.ratio.value != nil) {
		return errors.New("--after-signal, --looks, --relevant-shift and --relevant-ratio go with --in-force FILE")
	}
	return nil
}

// plainReadings reports whether limits of a kind follow from centre and sigma of single readings alone. Such limits can be
// given by these figures, and have run lengths.
func plainReadings(kind chart.Kind) bool {
	return kind == chart.Individuals || kind == chart.XbarR || kind == chart.XbarS
}

// read gives the limits in force, which must be of the kind, size and scale of the request.
func (c *inForceFlags) read(req *limits.Request) (*pb.InForce, error) {
	in, l, err := readComputed("--in-force", c.file)
	if err != nil {
		return nil, err
	}
	problem := ""
	switch {
	case l.Kind != req.Kind || l.SubgroupSize != req.SubgroupSize:
		problem = fmt.Sprintf("has limits of kind %s, subgroup size %d, and these results are of kind %s, size %d", l.Kind, l.SubgroupSize, req.Kind, req.SubgroupSize)
	case l.Model.Transform != req.Transform:
		problem = fmt.Sprintf("has limits on the scale %s with the offset %v, and these results are judged on %s with %v",
			l.Model.Transform.Kind, l.Model.Transform.Offset, req.Transform.Kind, req.Transform.Offset)
	case !slices.Equal(l.Model.Levels, req.Levels):
		problem = "standardises by other levels than these results"
	default:
		return c.message(in), nil
	}
	return nil, fmt.Errorf("--in-force %s: %s", report.Foreign(c.file), problem)
}

// message describes the limits in force in the contract's words.
func (c *inForceFlags) message(in *pb.ComputeLimitsResponse) *pb.InForce {
	out := &pb.InForce{
		Centre: in.GetLocation().GetCentre(), ProcessSigma: in.ProcessSigma, CentreGiven: in.CentreOrigin == pb.Origin_ORIGIN_GIVEN,
		SigmaGiven: in.SigmaOrigin == pb.Origin_ORIGIN_GIVEN, N: in.N, Readings: in.Readings,
		RelevantShiftSigmas: c.shift.value, RelevantSigmaRatio: c.ratio.value, AfterSignal: c.afterSignal, Looks: int32(c.looks),
		Model: in.Model, Parts: in.Parts,
	}
	if in.Kind == pb.ChartKind_CHART_KIND_RUN_MEANS {
		between := in.GetModel().GetBetweenSigma()
		out.BetweenSigma = &between
	}
	for _, e := range in.Estimates {
		if e.Chosen {
			name, _ := limits.ParseEstimator(e.Name)
			out.DegreesOfFreedom, out.Estimator = e.DegreesOfFreedom, service.EstimatorValue(name)
		}
	}
	return out
}
