package runlength

import (
	"context"
	"errors"
	"math"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength/automaton"
	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/effort"
	"limitary/internal/runlength/forward"
	"limitary/internal/runlength/simulate"
)

// Rates says at what rate a chart that nobody resets speaks up, in the long run at one shift. They are three different
// things: a point may be flagged by several rules, a signal may flag several points, and the first signal after a start
// comes later than either rate suggests.
type Rates struct {
	Shift, ShiftStandardErrors float64
	// PointsFlaggedPer1000 is how many of 1000 points complete at least one rule.
	PointsFlaggedPer1000 float64
	// SignalsOpenedPer1000 is how many signals, episodes of one rule on one side of one trace, begin in 1000 points.
	SignalsOpenedPer1000 float64
	// Rules has the same for each rule alone.
	Rules       []RuleRates
	Computation Computation
	// FlaggedErrorBound and OpenedErrorBound are per 1000 points; twice the standard error where rates are simulated.
	FlaggedErrorBound, OpenedErrorBound float64
}

// RuleRates are the rates of one rule.
type RuleRates struct {
	ID                                         string
	Trace                                      chart.Role
	PointsFlaggedPer1000, SignalsOpenedPer1000 float64
}

// LongRun gives the rates at every shift of a request. Start and quantiles do not matter.
func LongRun(ctx context.Context, r Request) ([]Rates, error) {
	return LongRunWith(effort.New(ctx, 0), r)
}

// LongRunWith is LongRun within the limit of a meter.
func LongRunWith(meter *effort.Meter, r Request) (all []Rates, err error) {
	r.Start = SegmentStart
	if r, err = r.normalise(); err != nil {
		return nil, err
	}
	p, err := prepare(meter, r, true)
	if err != nil {
		return nil, plain(err)
	}
	for _, shift := range r.Shifts {
		one := Rates{Shift: shift, ShiftStandardErrors: shift * r.perShift()}
		err := errOutOfReach
		if !p.simulated {
			err = p.rates(&one, meter)
		}
		if errors.Is(err, errOutOfReach) {
			err = p.simulateRates(&one, meter)
		}
		if err != nil {
			return nil, plain(err)
		}
		all = append(all, one)
	}
	return all, nil
}

// rates finds the rates exactly. A chart of windowed rules forgets its start within its memory, so the state after as
// many points is the long-run state, not merely near it.
func (p *problem) rates(out *Rates, meter *effort.Meter) error {
	r, shift := &p.request, out.ShiftStandardErrors
	flagged, misplaced, err := p.flagged(shift, meter)
	if err != nil {
		return err
	}
	out.Computation = p.computation()
	out.PointsFlaggedPer1000 = 1000 * flagged
	out.FlaggedErrorBound = 1000 * (misplaced + 1e-15)
	for role, t := range []*Trace{&r.Location, &r.Dispersion} {
		for _, s := range t.Rules {
			one := RuleRates{ID: s.ID, Trace: chart.Role(role)}
			for _, side := range sides(s) {
				f, o, lost, err := p.side(chart.Role(role), side, shift, meter)
				if err != nil {
					return err
				}
				one.PointsFlaggedPer1000 += 1000 * f
				one.SignalsOpenedPer1000 += 1000 * o
				out.OpenedErrorBound += 1000 * (lost + 1e-15)
			}
			out.SignalsOpenedPer1000 += one.SignalsOpenedPer1000
			out.Rules = append(out.Rules, one)
		}
	}
	return nil
}

// flagged gives the part of points at which any rule completes.
func (p *problem) flagged(shift float64, meter *effort.Meter) (rate, misplaced float64, err error) {
	if p.joint != nil {
		return p.joint.longRun(p.joint.machine, p.request.run(shift, p.request.SigmaRatio, chart.Location).law, meter)
	}
	unflagged := 1.0
	for role, m := range []*model{p.location, p.dispersion} {
		if m == nil {
			continue
		}
		f, lost, err := m.longRun(m.machine, p.request.run(shift, p.request.SigmaRatio, chart.Role(role)).law, meter)
		if err != nil {
			return 0, 0, err
		}
		unflagged *= 1 - f
		rate = f
		misplaced += lost
	}
	if p.location != nil && p.dispersion != nil {
		rate = 1 - unflagged
	}
	return rate, misplaced, nil
}

// sides splits a rule into rules that complete on one side only, each an episode of its own.
func sides(s rules.Spec) (list []rules.Spec) {
	switch {
	case s.Kind == rules.Alternating, s.Kind == rules.Within, s.Kind == rules.Outside && !s.OneSideOK:
		return []rules.Spec{s}
	case s.Kind == rules.Outside: // all above, all below, or both present
		for _, side := range []rules.Sides{rules.UpperOnly, rules.LowerOnly} {
			one := s
			one.Kind, one.Sides, one.K, one.M, one.OneSideOK = rules.Beyond, side, s.N, s.N, false
			list = append(list, one)
		}
		s.OneSideOK = false
		return append(list, s)
	}
	for _, side := range []rules.Sides{rules.UpperOnly, rules.LowerOnly} {
		if s.Sides == rules.BothSides || s.Sides == side {
			one := s
			one.Sides = side
			list = append(list, one)
		}
	}
	return list
}

// side gives the rates of one rule on one side.
func (p *problem) side(role chart.Role, s rules.Spec, shift float64, meter *effort.Meter) (flagged, opened, misplaced float64, err error) {
	r := p.request
	alone := Trace{Rules: []rules.Spec{s}, Lines: r.Location.Lines}
	if role == chart.Dispersion {
		alone.Lines = r.Dispersion.Lines
	}
	l := r.run(shift, r.SigmaRatio, role).law
	var machine *automaton.DFA
	var run func(*automaton.DFA, law, *effort.Meter) (float64, float64, error)
	if role == chart.Dispersion && p.joint != nil {
		r.Location, r.Dispersion = Trace{}, alone
		j, err := newJoint(meter, &r, true)
		if err != nil {
			return 0, 0, 0, err
		}
		l = r.run(shift, r.SigmaRatio, chart.Location).law
		machine, run = j.machine, j.longRun
	} else {
		m, err := newModel(meter, alone.Rules, alone.lines(), modelKind{r.Data.Step > 0 && role == chart.Location, true, false})
		if err != nil {
			return 0, 0, 0, err
		}
		machine, run = m.machine, m.longRun
	}
	onset, err := machine.Onset(meter)
	if err != nil {
		return 0, 0, 0, reach(err)
	}
	if flagged, _, err = run(machine, l, meter); err == nil {
		opened, misplaced, err = run(onset, l, meter)
	}
	return flagged, opened, misplaced, err
}

// longRun gives the probability that a continuing machine fires at a point of the long run.
func (m *model) longRun(machine *automaton.DFA, l law, meter *effort.Meter) (rate, misplaced float64, err error) {
	if !m.ordered {
		return steadyRate(forward.NewZoneChain(machine, m.alphabet.probabilities(l.Distribution), nil), m.memory, meter)
	}
	for terms := termsFirst; ; terms += termsMore {
		rate, misplaced, err = steadyRate(forward.NewPanelChain(machine, m.layout(l, terms)), m.memory, meter)
		if err != nil || misplaced < 1e-12 || terms >= termsMax {
			return rate, misplaced, err
		}
	}
}

func (j *joint) longRun(machine *automaton.DFA, l law, meter *effort.Meter) (rate, misplaced float64, err error) {
	last := 0.0
	for i, terms := range jointTerms {
		last = rate
		rate, _, err = steadyRate(forward.NewPanelChain(machine, j.layout(l, l, terms)), j.memory, meter)
		if misplaced = math.Abs(rate - last); err != nil || i > 0 && misplaced < 1e-10 {
			break
		}
	}
	return rate, misplaced, err
}

// steadyRate steps a chain until it has forgotten its start, and one point more, since an onset looks a point further
// back.
func steadyRate(chain curve.Chain, memory int, meter *effort.Meter) (rate, misplaced float64, err error) {
	for range memory + 2 {
		if err := meter.Spend(chain.Cost()); err != nil {
			return 0, 0, err
		}
		fired, lost := chain.Advance()
		rate = fired
		misplaced += lost
	}
	return rate, misplaced, nil
}

// ratePoints is the number of points of a simulation of rates.
const ratePoints = 4_000_000

func (p *problem) simulateRates(out *Rates, meter *effort.Meter) error {
	c, err := p.request.simulated(out.ShiftStandardErrors)
	if err != nil {
		return err
	}
	rates, err := simulate.Long(c, ratePoints, p.request.Seed, meter)
	if err != nil {
		return err
	}
	*out = Rates{
		Shift: out.Shift, ShiftStandardErrors: out.ShiftStandardErrors, Computation: Simulation,
		PointsFlaggedPer1000: 1000 * rates.Flagged, SignalsOpenedPer1000: 1000 * rates.Opened,
		FlaggedErrorBound: 2000 * rates.FlaggedStandardError, OpenedErrorBound: 2000 * rates.OpenedStandardError,
	}
	specs := [chart.Roles][]rules.Spec{p.request.Location.Rules, p.request.Dispersion.Rules}
	for role, list := range specs {
		for i, s := range list {
			out.Rules = append(out.Rules, RuleRates{
				ID: s.ID, Trace: chart.Role(role),
				PointsFlaggedPer1000: 1000 * rates.Rules[role][i].Flagged, SignalsOpenedPer1000: 1000 * rates.Rules[role][i].Opened,
			})
		}
	}
	return nil
}

// Workload is what rates mean for the people who answer them.
type Workload struct {
	// SignalsPerWeek are signals opened, PointsFlaggedPerWeek points at which at least one rule completes.
	PointsPerWeek, SignalsPerWeek, PointsFlaggedPerWeek float64
}

// Workload gives the expected signals of tracks with so many points a day each, seven days a week.
func (r *Rates) Workload(tracks int, pointsPerDay float64) Workload {
	points := 7 * float64(tracks) * pointsPerDay
	return Workload{points, points * r.SignalsOpenedPer1000 / 1000, points * r.PointsFlaggedPer1000 / 1000}
}
