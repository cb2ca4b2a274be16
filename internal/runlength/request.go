package runlength

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// Lines are the action and warning lines of a trace in sigmas of its statistic from its centre; an absent line is
// infinite.
type Lines struct {
	LowerAction, UpperAction, LowerWarning, UpperWarning float64
}

// CustomaryLines are three and two sigmas on both sides.
func CustomaryLines() Lines {
	return Lines{-chart.ActionMultiple, chart.ActionMultiple, -chart.WarningMultiple, chart.WarningMultiple}
}

// Trace is the rules of one trace.
type Trace struct {
	Rules []rules.Spec
	// Lines for rules that name one; nil is CustomaryLines.
	Lines *Lines
}

// lines gives the trace's lines.
func (t *Trace) lines() Lines {
	if t.Lines == nil {
		return CustomaryLines()
	}
	return *t.Lines
}

// ShiftUnit is what a shift of the mean is measured in.
type ShiftUnit uint8

const (
	// StandardErrors are standard deviations of the plotted statistic of the location trace; the default.
	StandardErrors ShiftUnit = iota
	// ProcessSigmas are standard deviations of single readings. In a chart of means of n readings one of them is √n
	// standard errors.
	ProcessSigmas
)

// String names the unit.
func (u ShiftUnit) String() string {
	if u == ProcessSigmas {
		return "process sigmas"
	}
	return "standard errors"
}

// Start is the state of the chart when the run begins.
type Start uint8

const (
	// FreshStart is the start of a version: no points yet, CUSUMs at their head start.
	FreshStart Start = iota
	// SegmentStart is a new segment without head starts.
	SegmentStart
	// SteadyState is a chart that has run in control, without a signal, for so long that its start is forgotten; the mean
	// and sigma change at the next point. Run lengths count from that change.
	SteadyState
)

// Shape is the distribution of the points.
type Shape uint8

const (
	// NormalShape is the default.
	NormalShape Shape = iota
	// StudentShape has Data.Parameter degrees of freedom, more than 2.
	StudentShape
	// GammaShape has shape Data.Parameter; skewness 2/√shape.
	GammaShape
)

// Data describes points that are not independent, normal or exact. The zero value is independent normal points. With
// subgroups the shape is that of the readings, and rounding and correlation are those of the plotted means.
type Data struct {
	Shape     Shape
	Parameter float64
	// Step rounds points of the location trace to multiples of it, in its sigmas, counted from the centre; 0 does not.
	Step float64
	// Correlation of a point with the one before, as in a first-order autoregression of unchanged standard deviation.
	Correlation float64
}

// Request asks for the run length of a chart.
type Request struct {
	// Kind is chart.Given for one trace of independent points, or a kind with two traces.
	Kind chart.Kind
	// SubgroupSize of XbarR and XbarS; it also turns process sigmas into standard errors where Kind is Given. 0 is 1.
	SubgroupSize int
	Location     Trace
	// Dispersion is used with a kind that has two traces.
	Dispersion Trace
	// Shifts of the mean in ShiftUnit, one row of the answer each; none is the one shift 0.
	Shifts    []float64
	ShiftUnit ShiftUnit
	// SigmaRatio is the standard deviation of readings over that of the limits; 0 is 1.
	SigmaRatio float64
	// Horizons asks for P(signal within n points); Quantiles for quantiles, 0.1, 0.5 and 0.9 if none.
	Horizons  []int
	Quantiles []float64
	// Ends is the mildest consequence that ends the run; 0 is rules.Act.
	Ends  rules.Consequence
	Start Start
	Data  Data
	// Seed of simulations, and how many runs one takes; 0 is SimulationRunsDefault.
	Seed           uint64
	SimulationRuns int
	// Simulate asks for a simulation where an exact computation would do, as a check.
	Simulate bool
}

const (
	// ShiftsMax, HorizonsMax and QuantilesMax bound the lists of one request.
	ShiftsMax, HorizonsMax, QuantilesMax = 64, 64, 32
	// ShiftMax bounds shifts, in standard errors; a point so far out passes any limit.
	ShiftMax = 100.0
	// SigmaRatioMin and SigmaRatioMax bound the ratio of sigmas.
	SigmaRatioMin, SigmaRatioMax = 0.01, 100.0
	// HorizonMax bounds a horizon, in points.
	HorizonMax = 1_000_000_000
	// SimulationRunsDefault gives about three digits; SimulationRunsMax bounds what may be asked.
	SimulationRunsDefault, SimulationRunsMax = 100_000, 10_000_000
)

// Reason names what is wrong with a request.
type Reason uint8

const (
	// BadField is a value out of range; the field says which.
	BadField Reason = iota + 1
	// NoRules: no trace has a rule.
	NoRules
	// NothingFires: none of the rules that end a run can complete.
	NothingFires
	// TooCostly: the computation needs more work than its limit.
	TooCostly
)

// Error says what is wrong with a request, in the contract's words.
type Error struct {
	Reason         Reason
	Field, Problem string
}

func (e *Error) Error() string {
	if e.Field == "" {
		return e.Problem
	}
	return e.Field + ": " + e.Problem
}

func bad(field, format string, args ...any) error {
	return &Error{BadField, field, fmt.Sprintf(format, args...)}
}

// normalise fills in defaults and refuses what is wrong.
func (r Request) normalise() (Request, error) {
	if r.Kind == chart.Given || r.Kind == chart.Individuals {
		r.SubgroupSize = max(r.SubgroupSize, 1)
	}
	if r.Kind == chart.Given {
		if r.SubgroupSize > chart.SubgroupSizeMax {
			return r, bad("subgroup_size", "%d: want 1 to %d", r.SubgroupSize, chart.SubgroupSizeMax)
		}
		if len(r.Dispersion.Rules) > 0 {
			return r, bad("dispersion", "statistics as given make one trace; name a chart kind for a second")
		}
	} else if r.Kind != chart.Individuals && r.Kind != chart.XbarR && r.Kind != chart.XbarS {
		return r, bad("kind", "%s: run lengths of a whole chart are those of individuals, xbar_r and xbar_s; leave the kind out for one trace", r.Kind)
	} else if err := r.Kind.CheckSize(r.SubgroupSize); err != nil {
		return r, bad("subgroup_size", "%v", err)
	}
	if len(r.Shifts) == 0 {
		r.Shifts = []float64{0}
	}
	if len(r.Quantiles) == 0 {
		r.Quantiles = []float64{0.1, 0.5, 0.9}
	}
	if r.SigmaRatio == 0 {
		r.SigmaRatio = 1
	}
	if r.Ends == 0 {
		r.Ends = rules.Act
	}
	if r.SimulationRuns == 0 {
		r.SimulationRuns = SimulationRunsDefault
	}
	if err := r.checkNumbers(); err != nil {
		return r, err
	}
	return r, r.checkRules()
}

func (r *Request) checkNumbers() error {
	switch {
	case len(r.Shifts) > ShiftsMax:
		return bad("shifts", "%d shifts, the limit is %d", len(r.Shifts), ShiftsMax)
	case len(r.Horizons) > HorizonsMax:
		return bad("horizons_points", "%d horizons, the limit is %d", len(r.Horizons), HorizonsMax)
	case len(r.Quantiles) > QuantilesMax:
		return bad("quantiles", "%d quantiles, the limit is %d", len(r.Quantiles), QuantilesMax)
	case !(r.SigmaRatio >= SigmaRatioMin && r.SigmaRatio <= SigmaRatioMax):
		return bad("sigma_ratio", "%v: want %v to %v", r.SigmaRatio, SigmaRatioMin, SigmaRatioMax)
	case r.Ends > rules.Stop:
		return bad("consequence", "unknown value %d", r.Ends)
	case r.SimulationRuns < 100 || r.SimulationRuns > SimulationRunsMax:
		return bad("simulation_runs", "%d: want 100 to %d", r.SimulationRuns, SimulationRunsMax)
	}
	for i, s := range r.Shifts {
		if !(math.Abs(s)*r.perShift() <= ShiftMax) {
			return bad(fmt.Sprintf("shifts[%d]", i), "%v: want a number of at most %v standard errors either way", s, ShiftMax)
		}
	}
	for i, n := range r.Horizons {
		if n < 1 || n > HorizonMax {
			return bad(fmt.Sprintf("horizons_points[%d]", i), "%d: want 1 to %d points", n, HorizonMax)
		}
	}
	for i, p := range r.Quantiles {
		if !(p > 0 && p < 1) {
			return bad(fmt.Sprintf("quantiles[%d]", i), "%v: want more than 0 and less than 1", p)
		}
	}
	return r.Data.check()
}

func (d *Data) check() error {
	switch {
	case d.Shape == StudentShape && !(d.Parameter > 2 && d.Parameter <= 1000):
		return bad("data.degrees_of_freedom", "%v: want more than 2, so that there is a standard deviation, and at most 1000", d.Parameter)
	case d.Shape == GammaShape && !(d.Parameter >= 0.1 && d.Parameter <= 1e6):
		return bad("data.gamma_shape", "%v: want 0.1 to 1e6", d.Parameter)
	case !(d.Step >= 0 && d.Step <= 10):
		return bad("data.rounding_step", "%v: want 0 to 10 sigmas", d.Step)
	case d.Step > 0 && d.Step < 1e-6:
		return bad("data.rounding_step", "%v: a step below 1e-6 sigmas changes nothing; leave it out", d.Step)
	case !(d.Correlation > -1 && d.Correlation < 1):
		return bad("data.correlation", "%v: want more than -1 and less than 1", d.Correlation)
	}
	return nil
}

// checkRules checks each trace's rules as the judge does and keeps those that end a run.
func (r *Request) checkRules() error {
	if len(r.Location.Rules)+len(r.Dispersion.Rules) == 0 {
		return &Error{NoRules, "rules", "no rules are given"}
	}
	zero, one := 0.0, 1.0
	for i, t := range []*Trace{&r.Location, &r.Dispersion} {
		role, l := chart.Role(i).String(), t.lines()
		if !(l.LowerAction < l.UpperAction) {
			return bad(role+".lines", "the lower action line, %v, is not below the upper one, %v", l.LowerAction, l.UpperAction)
		}
		if !(l.LowerWarning < l.UpperWarning) {
			return bad(role+".lines", "the lower warning line, %v, is not below the upper one, %v", l.LowerWarning, l.UpperWarning)
		}
		if _, err := rules.Compile(chart.Trace{Centre: &zero, Sigma: &one}, -1, t.Rules); err != nil {
			e := err.(*rules.SpecError)
			return &Error{BadField, role + "." + e.Field, e.Problem}
		}
		var kept []rules.Spec
		for _, s := range t.Rules {
			if s.Consequence >= r.Ends {
				kept = append(kept, s)
			}
		}
		t.Rules = kept
	}
	if len(r.Location.Rules)+len(r.Dispersion.Rules) == 0 {
		return &Error{NothingFires, "consequence", fmt.Sprintf("none of the rules has a consequence of %s or worse, so none ends the run", r.Ends)}
	}
	return nil
}

// perShift is the number of standard errors in one unit of shift.
func (r *Request) perShift() float64 {
	if r.ShiftUnit == ProcessSigmas {
		return math.Sqrt(float64(r.SubgroupSize))
	}
	return 1
}

// spreadScale gives centre and sigma of the dispersion statistic in process sigmas.
func (r *Request) spreadScale() (centre, sigma float64) {
	n := max(r.SubgroupSize, 2)
	f, err := limits.Factors(n)
	if err != nil {
		panic(err) // the size has been checked
	}
	if r.Kind == chart.XbarS {
		return f.SMean, math.Sqrt(1 - f.SMean*f.SMean)
	}
	return f.RangeMean, f.RangeSigma
}
