package service

import (
	"errors"
	"math"
	"slices"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/limits"
	"limitary/internal/rules"
	"limitary/internal/runlength"
)

// WorkloadTracksMax and WorkloadPointsPerDayMax bound a workload.
const (
	WorkloadTracksMax       = 1_000_000
	WorkloadPointsPerDayMax = 100_000.0
)

// runLengthFromProto reads a request. Numbers are checked by package runlength, whose errors name the same fields.
func runLengthFromProto(in *pb.RunLengthRequest) (*runLengthQuestion, error) {
	q := &runLengthQuestion{rates: in.Rates, marginal: in.MarginalTable, workload: in.Workload}
	var err error
	if q.request.Kind, err = kindFromProto("kind", in.Kind); err != nil {
		return nil, err
	}
	if err := q.traces(in); err != nil {
		return nil, err
	}
	r := &q.request
	switch {
	case in.Consequence < pb.Consequence_CONSEQUENCE_UNSPECIFIED || in.Consequence > pb.Consequence_CONSEQUENCE_STOP:
		return nil, definition.Invalid("consequence", "%d: no such value", in.Consequence)
	case in.ShiftUnit < 0 || in.ShiftUnit > pb.ShiftUnit_SHIFT_UNIT_PROCESS_SIGMAS:
		return nil, definition.Invalid("shift_unit", "%d: no such value", in.ShiftUnit)
	case in.Start < 0 || in.Start > pb.RunStart_RUN_START_STEADY_STATE:
		return nil, definition.Invalid("start", "%d: no such value", in.Start)
	}
	r.Ends = rules.Consequence(in.Consequence)
	r.ShiftUnit = runlength.ShiftUnit(max(0, in.ShiftUnit-pb.ShiftUnit_SHIFT_UNIT_STANDARD_ERRORS))
	r.Start = runlength.Start(max(0, in.Start-pb.RunStart_RUN_START_FRESH))
	r.Shifts, r.Quantiles, r.SubgroupSize = in.Shifts, in.Quantiles, int(in.SubgroupSize)
	r.Seed, r.SimulationRuns = uint64(in.Seed), int(in.SimulationRuns)
	for _, n := range in.HorizonsPoints {
		r.Horizons = append(r.Horizons, int(n))
	}
	if in.SigmaRatio != nil {
		if r.SigmaRatio = *in.SigmaRatio; r.SigmaRatio == 0 { // which stands for one that is not given
			return nil, definition.Invalid("sigma_ratio", "0: want %v to %v", runlength.SigmaRatioMin, runlength.SigmaRatioMax)
		}
	}
	if r.Data, err = runLengthData(in.Data); err != nil {
		return nil, under("data", err)
	}
	return q, q.extras(in)
}

// traces reads the rules, for one trace or for those of a chart.
func (q *runLengthQuestion) traces(in *pb.RunLengthRequest) (err error) {
	q.plain = len(in.Rules) > 0 || in.RuleSet != ""
	switch {
	case q.plain && in.Location != nil:
		return definition.Invalid("location", "rules or rule_set are given as well; name the rules of the location trace once")
	case q.plain:
		q.request.Location, err = runLengthTrace(&pb.RunLengthTrace{Rules: in.Rules, RuleSet: in.RuleSet})
	case in.Location != nil:
		q.request.Location, err = runLengthTrace(in.Location)
		err = under("location", err)
	}
	if err == nil && in.Dispersion != nil {
		q.request.Dispersion, err = runLengthTrace(in.Dispersion)
		err = under("dispersion", err)
	}
	return err
}

// runLengthTrace reads the rules of one trace.
func runLengthTrace(in *pb.RunLengthTrace) (t runlength.Trace, err error) {
	switch {
	case len(in.Rules) > 0 && in.RuleSet != "":
		return t, definition.Invalid("rule_set", "rules are given as well; give one of the two")
	case in.RuleSet != "":
		set, ok := catalogue()[in.RuleSet]
		if !ok {
			return t, definition.Invalid("rule_set", "%q: there is no such set", clip(in.RuleSet))
		}
		t.Rules = slices.Clone(set.Rules)
	default:
		if t.Rules, err = specsFromProto("rules", in.Rules); err != nil {
			return t, err
		}
	}
	if in.Lines == nil {
		return t, nil
	}
	l := runlength.CustomaryLines()
	names := map[string]struct {
		line  *float64
		given *float64
		never float64
	}{
		"lower_action": {&l.LowerAction, in.Lines.LowerAction, math.Inf(-1)}, "upper_action": {&l.UpperAction, in.Lines.UpperAction, math.Inf(1)},
		"lower_warning": {&l.LowerWarning, in.Lines.LowerWarning, math.Inf(-1)}, "upper_warning": {&l.UpperWarning, in.Lines.UpperWarning, math.Inf(1)},
	}
	for _, name := range []string{"lower_action", "upper_action", "lower_warning", "upper_warning"} {
		n := names[name]
		if n.given == nil {
			continue
		}
		if !(math.Abs(*n.given) <= rules.SigmasMax) {
			return t, definition.Invalid("lines."+name, "%v: want at most %v sigmas either way", *n.given, rules.SigmasMax)
		}
		*n.line = *n.given
	}
	for _, name := range in.Lines.Absent {
		n, ok := names[name]
		if !ok || n.given != nil {
			return t, definition.Invalid("lines.absent", "%q: want lower_action, upper_action, lower_warning or upper_warning, of a line that is not given", clip(name))
		}
		*n.line = n.never
	}
	t.Lines = &l
	return t, nil
}

func runLengthData(in *pb.RunLengthData) (d runlength.Data, err error) {
	if in == nil {
		return d, nil
	}
	d.Step, d.Correlation = in.RoundingStep, in.Correlation
	switch in.Shape {
	case pb.DataShape_DATA_SHAPE_UNSPECIFIED, pb.DataShape_DATA_SHAPE_NORMAL:
		if in.DegreesOfFreedom != 0 || in.GammaShape != 0 {
			return d, definition.Invalid("shape", "is not set; degrees_of_freedom needs STUDENT and gamma_shape needs GAMMA")
		}
	case pb.DataShape_DATA_SHAPE_STUDENT:
		d.Shape, d.Parameter = runlength.StudentShape, in.DegreesOfFreedom
	case pb.DataShape_DATA_SHAPE_GAMMA:
		d.Shape, d.Parameter = runlength.GammaShape, in.GammaShape
	default:
		return d, definition.Invalid("shape", "%d: no such value", in.Shape)
	}
	return d, nil
}

// extras reads what is asked for beside the rows.
func (q *runLengthQuestion) extras(in *pb.RunLengthRequest) error {
	if w := in.Workload; w != nil {
		if w.Tracks < 1 || w.Tracks > WorkloadTracksMax {
			return definition.Invalid("workload.tracks", "%d: want 1 to %d", w.Tracks, WorkloadTracksMax)
		}
		if !(w.PointsPerDay > 0 && w.PointsPerDay <= WorkloadPointsPerDayMax) {
			return definition.Invalid("workload.points_per_day", "%v: want more than 0 and at most %v", w.PointsPerDay, WorkloadPointsPerDayMax)
		}
	}
	if c := in.Choice; c != nil {
		q.choice = &runlength.ChoiceRequest{InControlARLMin: c.InControlArlMin, Shift: c.Shift}
		if c.BasisPoints != 0 {
			e, err := estimatorFromProto(c.Estimator)
			if err != nil {
				return under("choice", err)
			}
			q.choice.Basis = &runlength.Basis{Points: int(c.BasisPoints), Estimator: e}
		}
	}
	if l := in.RealLimits; l != nil {
		e, err := estimatorFromProto(l.Estimator)
		if err != nil {
			return under("real_limits", err)
		}
		q.real = &runlength.RealisedRequest{
			Basis: runlength.Basis{Points: int(l.BasisPoints), Estimator: e}, Shift: l.Shift, PowerPoints: int(l.PowerPoints),
			Assurance: l.GetAssurance(), Factor: l.GetFactor(),
		}
	}
	return nil
}

// refusal turns an error of package runlength into one of the contract; others pass.
func (q *runLengthQuestion) refusal(err error) error {
	var e *runlength.Error
	if !errors.As(err, &e) {
		return err
	}
	if e.Reason == runlength.TooCostly {
		return &definition.Error{Reason: definition.TooManyItems, Text: e.Problem + "; ask for less at a time, or for fewer rules"}
	}
	field := e.Field
	if q.plain {
		field = strings.TrimPrefix(field, chart.Location.String()+".")
	}
	return definition.Invalid(field, "%s", e.Problem)
}

var computations = map[runlength.Computation]pb.Computation{
	runlength.Exact: pb.Computation_COMPUTATION_EXACT, runlength.ExactOrder: pb.Computation_COMPUTATION_QUADRATURE,
	runlength.IntegralEquation: pb.Computation_COMPUTATION_INTEGRAL_EQUATION, runlength.Simulation: pb.Computation_COMPUTATION_SIMULATION,
}

func rowToProto(r *runlength.Row, quantiles []float64, horizons []int) *pb.RunLengthRow {
	out := &pb.RunLengthRow{
		Shift: r.Shift, ShiftStandardErrors: r.ShiftStandardErrors, Arl: r.ARL, Sdrl: r.SDRL,
		Computation: computations[r.Computation], ErrorBound: r.ErrorBound, SimulatedRuns: int32(r.Runs), HeadStartWithin_20Points: r.HeadStartWithin,
	}
	if r.Computation == runlength.Simulation {
		out.StandardError = &r.StandardError
	}
	for i := range min(len(quantiles), len(r.Quantiles)) {
		out.Quantiles = append(out.Quantiles, &pb.RunLengthQuantile{Probability: quantiles[i], Points: r.Quantiles[i]})
	}
	for i := range min(len(horizons), len(r.Within)) {
		out.Within = append(out.Within, &pb.SignalWithin{Points: int32(horizons[i]), Probability: r.Within[i]})
	}
	return out
}

func ratesToProto(r *runlength.Rates) *pb.SignalRates {
	out := &pb.SignalRates{
		PointsFlaggedPer_1000: r.PointsFlaggedPer1000, SignalsOpenedPer_1000: r.SignalsOpenedPer1000, Computation: computations[r.Computation],
		PointsFlaggedErrorBound: r.FlaggedErrorBound, SignalsOpenedErrorBound: r.OpenedErrorBound,
	}
	for _, rule := range r.Rules {
		out.Rules = append(out.Rules, &pb.RuleRates{Rule: rule.ID, Trace: roleToProto(rule.Trace),
			PointsFlaggedPer_1000: rule.PointsFlaggedPer1000, SignalsOpenedPer_1000: rule.SignalsOpenedPer1000})
	}
	return out
}

func spreadToProto(s runlength.Spread) *pb.Spread {
	return &pb.Spread{Low: s.Low, Median: s.Median, High: s.High}
}

func realisedToProto(r *runlength.Realised) *pb.RealLimits {
	out := &pb.RealLimits{
		NominalArl: r.Nominal.ARL, Arl: spreadToProto(r.ARL), FalseAlarmsPer_1000: spreadToProto(r.FalseAlarmsPer1000),
		NominalShiftedArl: r.NominalShifted.ARL, ShiftedArl: spreadToProto(r.ShiftedARL),
		PowerPoints: int32(r.PowerPoints), NominalPower: r.NominalPower, Power: spreadToProto(r.Power),
		DegreesOfFreedom: r.DegreesOfFreedom, Assurance: r.Assurance, Factor: r.Factor,
		RelativeError: r.RelativeError, Computation: computations[r.Computation],
	}
	if r.PointsNeeded > 0 {
		needed := int32(r.PointsNeeded)
		out.PointsNeeded = &needed
	}
	return out
}

// RuleSpecs writes rules as the contract has them, for commands that need no service.
func RuleSpecs(specs []rules.Spec) []*pb.RuleSpec { return specsToProto(specs) }

// EstimatorValue gives the contract's value of an estimator.
func EstimatorValue(e limits.Estimator) pb.Estimator {
	for value, domain := range estimators {
		if domain == e {
			return value
		}
	}
	return pb.Estimator_ESTIMATOR_UNSPECIFIED
}
