package runlength

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sync"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength/effort"
)

// ChoiceRequest asks which of a chart's rules are worth having.
type ChoiceRequest struct {
	// Request has the rules to choose from and the chart; its shifts are not used.
	Request
	// InControlARLMin is the budget of false alarms: the least mean run length in control that is acceptable.
	InControlARLMin float64
	// Shift is the shift that matters, in the request's unit.
	Shift float64
	// Basis, where set, is what the limits are estimated from. Subsets whose run lengths at the shift differ by less than
	// that estimation moves them are called equal.
	Basis *Basis
	// Progress, where set, is called as subsets are done.
	Progress func(done, of int)
}

// Candidate is one subset of the rules, or a weighted average or cumulative sum beside them.
type Candidate struct {
	// Rules are the ids of a subset, as in Answer.Ending; Label is what the candidate is called otherwise.
	Rules []string
	Label string
	// InControl and Shifted are its run lengths.
	InControl, Shifted Row
	// Within says whether it keeps to the budget.
	Within bool
	// Rank counts from 1; candidates of equal rank differ by less than is known of them.
	Rank int
	// request has its rules.
	request Request
}

// ChoiceRulesMax bounds the rules to choose from: 255 subsets of eight, 1023 of ten.
const ChoiceRulesMax = 10

// Choose ranks all subsets of the rules: those within the budget first, by mean run length at the shift that matters,
// then the others by how far they overspend. For the location trace of a single-trace chart an EWMA and a CUSUM set
// to the same budget are ranked with them.
func Choose(ctx context.Context, c ChoiceRequest) ([]Candidate, error) {
	return ChooseWith(effort.New(ctx, 0), c)
}

// ChooseWith is Choose within the limit of a meter.
func ChooseWith(meter *effort.Meter, c ChoiceRequest) ([]Candidate, error) {
	if !(c.InControlARLMin >= 2 && c.InControlARLMin <= 1e9) {
		return nil, bad("in_control_arl_min", "%v: want 2 to 1e9 points", c.InControlARLMin)
	}
	c.Shifts = []float64{0, c.Shift}
	r, err := c.Request.normalise()
	if err != nil {
		return nil, err
	}
	if c.Shift == 0 && r.SigmaRatio == 1 {
		return nil, bad("shift", "0: want the shift that matters, other than 0")
	}
	members := r.members()
	if len(members) > ChoiceRulesMax {
		return nil, bad("rules", "%d rules have %d subsets, the limit is %d rules", len(members), 1<<len(members)-1, ChoiceRulesMax)
	}
	list, err := subsets(meter, r, members, c.Progress)
	if err != nil {
		return nil, err
	}
	if r.Kind == chart.Given && r.Data == (Data{}) {
		beside, err := alternatives(meter, r, c)
		if err != nil {
			return nil, err
		}
		list = append(list, beside...)
	}
	return c.rank(meter, list)
}

// subsets computes every subset, a few at a time: no more than half the processors, so that others have the rest.
func subsets(meter *effort.Meter, r Request, members []member, progress func(int, int)) ([]Candidate, error) {
	count := 1<<len(members) - 1
	out := make([]Candidate, count)
	var group sync.WaitGroup
	var guard sync.Mutex
	var failed error
	next, done := 0, 0
	take := func() int {
		guard.Lock()
		defer guard.Unlock()
		if next >= count || failed != nil {
			return -1
		}
		next++
		return next - 1
	}
	for range max(1, runtime.GOMAXPROCS(0)/2) {
		group.Go(func() {
			for i := take(); i >= 0; i = take() {
				var list []member
				for j, m := range members {
					if (i+1)>>j&1 == 1 {
						list = append(list, m)
						out[i].Rules = append(out[i].Rules, m.name())
					}
				}
				subset := r.with(list)
				out[i].request = subset
				subset.Shifts = r.Shifts[1:]
				rows, err := inControlAndShifted(meter, subset)
				guard.Lock()
				if err != nil && failed == nil {
					failed = err
				}
				if done++; progress != nil && err == nil {
					progress(done, count)
				}
				guard.Unlock()
				if err == nil {
					out[i].InControl, out[i].Shifted = rows[0], rows[1]
				}
			}
		})
	}
	group.Wait()
	return out, failed
}

// alternatives sets an EWMA for a few weights and a CUSUM for the shift to the budget.
func alternatives(meter *effort.Meter, r Request, c ChoiceRequest) (list []Candidate, err error) {
	shift := math.Abs(c.Shift) * r.perShift()
	for _, lambda := range []float64{0.1, 0.2, 0.4} {
		spec := rules.Spec{Kind: rules.EWMA, Lambda: lambda, Asymptotic: true}
		one, err := toBudget(meter, r, c, spec, func(s *rules.Spec, x float64) { s.Limit = x }, 1, 8)
		if err != nil {
			return nil, err
		}
		list = append(list, one...)
	}
	if k := shift / 2; k >= 0.1 && k <= 2 {
		spec := rules.Spec{Kind: rules.CUSUM, Reference: k}
		one, err := toBudget(meter, r, c, spec, func(s *rules.Spec, x float64) { s.Interval = x }, 0.2, 40)
		if err != nil {
			return nil, err
		}
		list = append(list, one...)
	}
	return list, nil
}

// toBudget sets one number of a rule so that its mean run length in control is the budget, between low and high.
func toBudget(meter *effort.Meter, r Request, c ChoiceRequest, spec rules.Spec, set func(*rules.Spec, float64), low, high float64) ([]Candidate, error) {
	spec.ID, spec.Consequence = "beside", r.Ends
	at := func(x float64, shift, ratio float64) (Row, error) {
		set(&spec, x)
		one := r.with([]member{{chart.Location, spec}})
		one.Shifts, one.SigmaRatio = []float64{shift}, ratio
		answer, err := With(meter, one)
		if err != nil {
			return Row{}, err
		}
		return answer.Rows[0], nil
	}
	want := math.Log(c.InControlARLMin)
	miss := func(x float64) (float64, error) {
		row, err := at(x, 0, 1)
		var refused *Error
		if errors.As(err, &refused) && refused.Reason == NothingFires {
			return 700, nil
		}
		return math.Log(row.ARL) - want, err
	}
	x, ok, err := root(miss, low, high)
	if err != nil || !ok {
		return nil, err
	}
	x = math.Ceil(x*1000) / 1000 // three decimals, and within the budget
	var out Candidate
	if out.InControl, err = at(x, 0, 1); err != nil {
		return nil, err
	}
	if out.Shifted, err = at(x, c.Shift, r.SigmaRatio); err != nil {
		return nil, err
	}
	out.request = r.with([]member{{chart.Location, spec}})
	out.Label = fmt.Sprintf("EWMA, lambda %v, limit %v sigma of the average", spec.Lambda, spec.Limit)
	if spec.Kind == rules.CUSUM {
		out.Label = fmt.Sprintf("CUSUM, reference %v, interval %v", spec.Reference, spec.Interval)
	}
	return []Candidate{out}, nil
}

// root finds where a rising function is 0, by the Illinois form of false position; ok is false where it is not between
// low and high.
func root(f func(float64) (float64, error), low, high float64) (x float64, ok bool, err error) {
	fl, err := f(low)
	if err != nil || fl > 0 {
		return low, false, err
	}
	mid := low
	// The function may rise beyond what can be computed long before high, so the upper end is sought from below.
	fh := fl
	for step := (high - low) / 16; fh < 0; step *= 1.6 {
		if low, fl = mid, fh; mid >= high {
			return high, false, nil
		}
		mid = min(mid+step, high)
		if fh, err = f(mid); err != nil {
			return mid, false, err
		}
	}
	high = mid
	side := 0
	for range 60 {
		x = (low*fh - high*fl) / (fh - fl)
		fx, err := f(x)
		if err != nil {
			return x, false, err
		}
		switch {
		case math.Abs(fx) < 1e-9 || high-low < 1e-9:
			return x, true, nil
		case fx > 0:
			high, fh = x, fx
			if side == 1 {
				fl /= 2
			}
			side = 1
		default:
			low, fl = x, fx
			if side == -1 {
				fh /= 2
			}
			side = -1
		}
	}
	return x, true, nil
}

// rank sorts the candidates and gives equal ranks to those that cannot be told apart.
func (c *ChoiceRequest) rank(meter *effort.Meter, list []Candidate) ([]Candidate, error) {
	for i := range list {
		list[i].Within = list[i].InControl.ARL+list[i].InControl.ErrorBound >= c.InControlARLMin
	}
	slices.SortStableFunc(list, func(a, b Candidate) int {
		switch {
		case a.Within != b.Within:
			if a.Within {
				return -1
			}
			return 1
		case a.Within:
			return compare(a.Shifted.ARL, b.Shifted.ARL)
		}
		return compare(b.InControl.ARL, a.InControl.ARL)
	})
	spread, leader := 0.0, 0
	for i := range list {
		own, best := &list[i], &list[leader]
		value := func(one *Candidate) (float64, float64) {
			if one.Within {
				return one.Shifted.ARL, one.Shifted.ErrorBound
			}
			return one.InControl.ARL, one.InControl.ErrorBound
		}
		a, ea := value(own)
		b, eb := value(best)
		if i > 0 && own.Within == best.Within && math.Abs(a-b) <= ea+eb+spread+1e-9*b {
			own.Rank = best.Rank
			continue
		}
		own.Rank, leader = i+1, i
		if c.Basis != nil {
			var err error
			if spread, err = c.moved(meter, own); err != nil {
				return nil, err
			}
		}
	}
	return list, nil
}

// moved gives by how much the estimation of the limits moves the run length a candidate is ranked by: half the width
// of the middle 80 % over sigma's estimate.
func (c *ChoiceRequest) moved(meter *effort.Meter, own *Candidate) (float64, error) {
	r := own.request
	estimate, err := c.Basis.estimate(r.Kind, r.SubgroupSize)
	if err != nil {
		return 0, err
	}
	one, err := prepare(meter, r, false)
	if err != nil || one.simulated {
		return 0, err
	}
	shift, ratio := c.Shift*r.perShift(), r.SigmaRatio
	if !own.Within {
		shift, ratio = 0, 1
	}
	var ends [2]float64
	for i, p := range []float64{0.1, 0.9} {
		s := estimate.sigma(p)
		curve, err := one.curve(shift/s, ratio/s, meter)
		if err != nil {
			return 0, plain(err)
		}
		ends[i] = curve.Mean()
	}
	return math.Abs(ends[1]-ends[0]) / 2, nil
}

func compare(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}
