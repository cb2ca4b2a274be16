package runlength

import (
	"errors"
	"math"

	"limitary/internal/rules"
	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/data"
	"limitary/internal/runlength/effort"
	"limitary/internal/runlength/integral"
)

// accumulated gives the run length of an EWMA or CUSUM, with limits on single points where there are any. Those signal
// with the same probability at every point, whatever the statistic, so the first signal of both is that of a geometric
// variable and of the statistic of the points that lie inside.
func (m *model) accumulated(r run, meter *effort.Meter) (curve.Curve, error) {
	inside := r
	limited := !math.IsInf(m.lo, -1) || !math.IsInf(m.hi, 1)
	if limited {
		inside.law.Distribution = data.Truncate(r.law.Distribution, m.lo, m.hi)
		if r.before != nil {
			before := *r.before
			before.Distribution = data.Truncate(before.Distribution, m.lo, m.hi)
			inside.before = &before
		}
	}
	solve := m.ewma
	if m.accumulator.Kind == rules.CUSUM {
		solve = m.cusum
	}
	c, err := solve(inside, meter)
	if err != nil || !limited {
		return c, err
	}
	out := r.law.Between(math.Inf(-1), m.lo) + r.law.Between(m.hi, math.Inf(1))
	return curve.Independent(curve.Geometric(out), c), nil
}

// settings are what both kinds of statistic share.
func settings(r run, memory int) integral.Settings {
	s := integral.Settings{Memory: memory}
	if r.before != nil {
		s.Before = &integral.Law{Distribution: r.before.Distribution, SD: r.before.sd}
	}
	return s
}

const (
	// ewmaReach is how far, in its own standard deviations, an average may stray to the side that is not watched.
	ewmaReach = 9.0
	// memoryMax bounds what is told of a statistic's memory.
	memoryMax = 400
	// borderStands is the part of an EWMA's variance still missing at which its limits stand.
	borderStands = 1e-16
)

func (m *model) ewma(r run, meter *effort.Meter) (curve.Curve, error) {
	s := m.accumulator
	deviation := math.Sqrt(s.Lambda / (2 - s.Lambda))
	limit := s.Limit * deviation
	walk := func(limit float64) integral.Walk {
		return integral.Walk{Keep: 1 - s.Lambda, Weight: s.Lambda, Lower: -limit, Upper: limit}
	}
	w := walk(limit)
	if s.Sides != rules.BothSides {
		if _, normal := r.law.Distribution.(data.Normal); !normal {
			return curve.Curve{}, errOutOfReach
		}
		reach := ewmaReach*deviation*max(r.law.sd, 1) + limit
		if s.Sides == rules.UpperOnly {
			w.Lower = min(0, r.law.mean) - reach
		} else {
			w.Upper = max(0, r.law.mean) + reach
		}
	}
	set := settings(r, min(memoryMax, int(math.Ceil(2/s.Lambda))))
	if !s.Asymptotic {
		if r.before != nil {
			return curve.Curve{}, errOutOfReach
		}
		set.Moving = func(point int) (integral.Walk, bool) {
			missing := math.Pow(1-s.Lambda, 2*float64(point))
			moved := walk(limit * math.Sqrt(1-missing))
			if s.Sides == rules.UpperOnly {
				moved.Lower = w.Lower
			} else if s.Sides == rules.LowerOnly {
				moved.Upper = w.Upper
			}
			return moved, missing > borderStands
		}
	}
	return integral.Solve(w, integral.Law{Distribution: r.law.Distribution, SD: r.law.sd}, set, meter)
}

// hazardLeast stands for the hazard of an arm that signals more rarely than rounding lets see. Beside an arm that does
// signal it makes no difference.
const hazardLeast = 1e-17

func (m *model) cusum(r run, meter *effort.Meter) (curve.Curve, error) {
	s := m.accumulator
	start := 0.0
	if r.start == FreshStart {
		start = s.HeadStart
	}
	two := s.Sides == rules.BothSides
	if two && (r.before != nil || 2*start > s.Interval+2*s.Reference) {
		return curve.Curve{}, errOutOfReach
	}
	memory := min(memoryMax, 10+int(4*s.Interval))
	arm := func(l law, before *law) (arm integral.Arm, err error) {
		w := integral.Walk{Keep: 1, Weight: 1, Drift: -s.Reference, Floor: true, Upper: s.Interval}
		in := integral.Law{Distribution: l.Distribution, SD: l.sd}
		arm.Zero, err = integral.Solve(w, in, settings(run{before: before}, memory), meter)
		if errors.Is(err, curve.ErrNeverSignals) && two {
			silent := curve.Geometric(hazardLeast)
			silent.RelativeError = 1
			return integral.Arm{Start: silent, Zero: silent}, nil
		}
		if err != nil {
			return arm, err
		}
		arm.Start = arm.Zero
		if start > 0 {
			arm.Start, err = integral.Solve(w, in, integral.Settings{Memory: memory, Start: start}, meter)
		}
		return arm, err
	}
	if s.Sides != rules.LowerOnly {
		upper, err := arm(r.law, r.before)
		if err != nil || !two {
			return upper.Start, err
		}
		lower, err := arm(mirrored(r.law), nil)
		if err != nil {
			return curve.Curve{}, err
		}
		c, err := integral.TwoArms(upper, lower, memory, meter)
		if errors.Is(err, curve.ErrNeverSignals) {
			return c, errOutOfReach // each arm signals, but their difference holds no digit
		}
		return c, err
	}
	var before *law
	if r.before != nil {
		b := mirrored(*r.before)
		before = &b
	}
	lower, err := arm(mirrored(r.law), before)
	return lower.Start, err
}

func mirrored(l law) law { return law{data.Mirrored{Whole: l.Distribution}, -l.mean, l.sd} }
