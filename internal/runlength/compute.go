package runlength

import (
	"context"
	"errors"
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/effort"
	"limitary/internal/runlength/simulate"
)

// Computation says how an answer was found.
type Computation uint8

const (
	// Exact is a Markov chain over the states of the rules.
	Exact Computation = iota + 1
	// ExactOrder is such a chain that carries the place of the latest point by quadrature.
	ExactOrder
	// IntegralEquation is the equation of an EWMA or CUSUM.
	IntegralEquation
	// Simulation is the judge on random points; the answer has a standard error.
	Simulation
)

// String is the name in the API.
func (c Computation) String() string {
	return [...]string{"", "EXACT", "EXACT_WITH_QUADRATURE", "INTEGRAL_EQUATION", "SIMULATION"}[min(int(c), 4)]
}

// Row is the run length at one shift. Lengths are in points, the signalling one included.
type Row struct {
	// Shift is as asked for, in the request's unit; ShiftStandardErrors the same in standard errors.
	Shift, ShiftStandardErrors float64
	// ARL is the mean run length and SDRL its standard deviation.
	ARL, SDRL float64
	// Quantiles and Within belong to the request's quantiles and horizons: lengths, and P(signal within n points).
	Quantiles, Within []float64
	Computation       Computation
	// ErrorBound is a bound on the error of ARL in points, from the convergence of the method. A simulation has twice its
	// standard error here.
	ErrorBound float64
	// StandardError of ARL and Runs behind it; simulations only.
	StandardError float64
	Runs          int
	// HeadStartWithin is P(signal within HeadStartPoints points), where a CUSUM begins at a head start; else nil.
	HeadStartWithin *float64
	// Curve is the whole distribution, nil for simulations, whose lengths are in Lengths.
	Curve   *curve.Curve
	Lengths *simulate.Lengths
}

// HeadStartPoints is how long after a head start a false signal is blamed on it.
const HeadStartPoints = 20

// Answer is the run length at every shift asked for.
type Answer struct {
	Rows []Row
	// Ending is the ids of the rules that end a run, those of the location trace first; those of the dispersion trace have
	// "dispersion:" before them.
	Ending []string
	// States of the exact machine; 0 where there is none.
	States int
	// ShiftUnit, Quantiles and Horizons are those of the request, defaults filled in.
	ShiftUnit ShiftUnit
	Quantiles []float64
	Horizons  []int
}

// Compute gives the run length of a chart. Errors are *Error, or those of the context.
func Compute(ctx context.Context, r Request) (*Answer, error) {
	return With(effort.New(ctx, 0), r)
}

// With is Compute within the limit of a meter.
func With(meter *effort.Meter, r Request) (*Answer, error) {
	r, err := r.normalise()
	if err != nil {
		return nil, err
	}
	p, err := prepare(meter, r, false)
	if err != nil {
		return nil, plain(err)
	}
	out := &Answer{ShiftUnit: r.ShiftUnit, Quantiles: r.Quantiles, Horizons: r.Horizons, States: p.states()}
	for _, m := range r.members() {
		out.Ending = append(out.Ending, m.name())
	}
	for _, shift := range r.Shifts {
		row, err := p.row(shift, meter)
		if err != nil {
			return nil, plain(err)
		}
		out.Rows = append(out.Rows, row)
	}
	return out, nil
}

// plain turns errors of the methods into those of the contract.
func plain(err error) error {
	var cost *effort.LimitError
	switch {
	case errors.As(err, &cost):
		return &Error{TooCostly, "", cost.Error()}
	case errors.Is(err, curve.ErrNeverSignals):
		return &Error{NothingFires, "rules", "no rule that ends a run can complete: the probability is below what float64 holds"}
	case errors.Is(err, errOutOfReach):
		return bad("rules", "these rules are out of reach of the exact methods, which this question needs")
	case errors.Is(err, simulate.ErrTooLong):
		return &Error{TooCostly, "", err.Error()}
	}
	return err
}

// problem is a request made ready: the machines of its traces.
type problem struct {
	request  Request
	location *model
	// dispersion is independent of location; joint replaces both where it is not.
	dispersion *model
	joint      *joint
	// simulated says why there is no exact method.
	simulated bool
}

// prepare builds what the exact methods need, and notes where they do not reach.
func prepare(meter *effort.Meter, r Request, continuing bool) (*problem, error) {
	p := &problem{request: r, simulated: r.Simulate || r.Data.Correlation != 0}
	if r.Kind == chart.XbarR || r.Kind == chart.XbarS {
		p.simulated = p.simulated || r.Data.Shape != NormalShape
	}
	if r.Data.Step > 0 && r.Kind == chart.Individuals && len(r.Dispersion.Rules) > 0 {
		p.simulated = true
	}
	err := p.build(meter, continuing)
	if errors.Is(err, errOutOfReach) {
		p.simulated, err = true, nil
	}
	if err != nil || p.simulated {
		return p, err
	}
	if !p.canFire() {
		return p, &Error{NothingFires, "rules", "none of the rules that end a run can ever complete"}
	}
	return p, nil
}

func (p *problem) build(meter *effort.Meter, continuing bool) (err error) {
	r := &p.request
	if p.simulated {
		return nil
	}
	if r.Kind == chart.Individuals && len(r.Dispersion.Rules) > 0 {
		p.joint, err = newJoint(meter, r, continuing)
		return err
	}
	changing := r.Start == SteadyState
	if len(r.Location.Rules) > 0 {
		if p.location, err = newModel(meter, r.Location.Rules, r.Location.lines(), modelKind{r.Data.Step > 0, continuing, changing}); err != nil {
			return err
		}
	}
	if len(r.Dispersion.Rules) > 0 {
		p.dispersion, err = newModel(meter, r.Dispersion.Rules, r.Dispersion.lines(), modelKind{false, continuing, changing})
		if err == nil && p.dispersion.accumulator != nil {
			return errOutOfReach
		}
	}
	return err
}

func (p *problem) canFire() bool {
	if p.joint != nil {
		return p.joint.machine.CanFire()
	}
	for _, m := range []*model{p.location, p.dispersion} {
		if m != nil && (m.accumulator != nil || m.machine.CanFire()) {
			return true
		}
	}
	return false
}

func (p *problem) states() (states int) {
	if p.simulated {
		return 0
	}
	if p.joint != nil {
		return p.joint.machine.States()
	}
	for _, m := range []*model{p.location, p.dispersion} {
		if m != nil && m.machine != nil {
			states += m.machine.States()
		}
	}
	return states
}

// reachable is the largest relative error of an exact method that is not worse than a simulation.
const reachable = 1e-5

// row answers for one shift.
func (p *problem) row(shift float64, meter *effort.Meter) (Row, error) {
	row := Row{Shift: shift, ShiftStandardErrors: shift * p.request.perShift()}
	if !p.simulated {
		c, err := p.curve(row.ShiftStandardErrors, p.request.SigmaRatio, meter)
		if err == nil && c.RelativeError < reachable {
			p.fill(&row, &c)
			return row, nil
		}
		if err != nil && !errors.Is(err, errOutOfReach) {
			return row, err
		}
	}
	return row, p.simulate(&row, meter)
}

// curve gives the distribution by the exact methods.
func (p *problem) curve(shift, ratio float64, meter *effort.Meter) (curve.Curve, error) {
	r := &p.request
	if p.joint != nil {
		return p.joint.curve(r.run(shift, ratio, chart.Location), meter)
	}
	var curves []curve.Curve
	for role, m := range []*model{p.location, p.dispersion} {
		if m == nil || m.machine != nil && !m.machine.CanFire() {
			continue
		}
		c, err := m.curve(r.run(shift, ratio, chart.Role(role)), meter)
		if err != nil {
			return c, err
		}
		curves = append(curves, c)
	}
	if len(curves) == 2 {
		return curve.Independent(curves[0], curves[1]), nil
	}
	return curves[0], nil
}

func (p *problem) fill(row *Row, c *curve.Curve) {
	row.Curve = c
	row.ARL, row.SDRL = c.Mean(), c.SD()
	row.ErrorBound = row.ARL * c.RelativeError
	row.Computation = p.computation()
	for _, q := range p.request.Quantiles {
		row.Quantiles = append(row.Quantiles, c.Quantile(q))
	}
	for _, n := range p.request.Horizons {
		row.Within = append(row.Within, c.Within(n))
	}
	if p.headStarts() {
		within := c.Within(HeadStartPoints)
		row.HeadStartWithin = &within
	}
}

// computation names the exact method: that of the trace that needs most.
func (p *problem) computation() Computation {
	if p.joint != nil {
		return ExactOrder
	}
	how := Exact
	for _, m := range []*model{p.location, p.dispersion} {
		switch {
		case m == nil:
		case m.accumulator != nil:
			return IntegralEquation
		case m.ordered:
			how = ExactOrder
		}
	}
	return how
}

// headStarts reports whether a run begins at a head start.
func (p *problem) headStarts() bool {
	if p.request.Start != FreshStart {
		return false
	}
	for _, t := range []*Trace{&p.request.Location, &p.request.Dispersion} {
		for _, s := range t.Rules {
			if s.Kind == rules.CUSUM && s.HeadStart > 0 {
				return true
			}
		}
	}
	return false
}

// simulate answers by the judge on random points.
func (p *problem) simulate(row *Row, meter *effort.Meter) error {
	c, err := p.request.simulated(row.ShiftStandardErrors)
	if err != nil {
		return err
	}
	lengths, err := simulate.Run(c, p.request.SimulationRuns, simulationPoints, p.request.Seed, meter)
	if err != nil {
		return err
	}
	row.Lengths, row.Computation, row.Runs = lengths, Simulation, len(lengths.Sorted)
	row.ARL, row.StandardError = lengths.Mean()
	row.SDRL = lengths.SD()
	row.ErrorBound = 2 * row.StandardError
	for _, q := range p.request.Quantiles {
		row.Quantiles = append(row.Quantiles, lengths.Quantile(q))
	}
	for _, n := range p.request.Horizons {
		row.Within = append(row.Within, lengths.Within(n))
	}
	if p.headStarts() {
		within := lengths.Within(HeadStartPoints)
		row.HeadStartWithin = &within
	}
	return nil
}

// simulationPoints bounds the points of one simulation: some seconds.
const simulationPoints = 40_000_000

// Describe says in words how a row was found and how far it can be trusted.
func (r *Row) Describe() string {
	if r.Computation == Simulation {
		return fmt.Sprintf("simulation of %d runs, standard error %.3g", r.Runs, r.StandardError)
	}
	return fmt.Sprintf("%s, error below %.2g", map[Computation]string{Exact: "exact chain", ExactOrder: "exact chain with quadrature",
		IntegralEquation: "integral equation"}[r.Computation], math.Max(r.ErrorBound, 1e-15*r.ARL))
}
