package runlength

import (
	"context"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength/effort"
)

// CustomaryShifts are the shifts at which rules are compared, in standard errors.
func CustomaryShifts() []float64 { return []float64{0.5, 1, 1.5, 2, 3} }

// Marginal is what one rule adds to those before it.
type Marginal struct {
	ID    string
	Trace chart.Role
	// InControl is the run length in control with the rules up to this one, and FalseAlarmsPer1000 the rate of a chart that
	// starts afresh after each, 1000/ARL; Added is by how much this rule raised it.
	InControl          Row
	FalseAlarmsPer1000 float64
	Added              float64
	// Shifted has the rules up to this one at each shift, and Saved by how many points this rule shortens the mean
	// run length there. The first rule saves nothing: without it there was no chart.
	Shifted []Row
	Saved   []float64
	// Alone is the run length in control of this rule with no other.
	Alone Row
}

// Marginals adds the rules of a request one by one, in the order given, those of the location trace first. The shifts
// are the request's, the customary ones if it has none; the process is in control at shift 0 and sigma ratio 1.
func Marginals(ctx context.Context, r Request) ([]Marginal, error) {
	return MarginalsWith(effort.New(ctx, 0), r)
}

// MarginalsWith is Marginals within the limit of a meter.
func MarginalsWith(meter *effort.Meter, r Request) (table []Marginal, err error) {
	if len(r.Shifts) == 0 {
		r.Shifts = CustomaryShifts()
	}
	if r, err = r.normalise(); err != nil {
		return nil, err
	}
	all := r.members()
	for i, m := range all {
		line := Marginal{ID: m.spec.ID, Trace: m.role}
		upTo, err := inControlAndShifted(meter, r.with(all[:i+1]))
		if err != nil {
			return nil, err
		}
		line.InControl, line.Shifted = upTo[0], upTo[1:]
		alone := r.with(all[i : i+1])
		alone.Shifts, alone.SigmaRatio = []float64{0}, 1
		answer, err := With(meter, alone)
		if err != nil {
			return nil, err
		}
		line.Alone = answer.Rows[0]
		line.FalseAlarmsPer1000 = 1000 / line.InControl.ARL
		line.Added = line.FalseAlarmsPer1000
		line.Saved = make([]float64, len(line.Shifted))
		if i > 0 {
			line.Added -= table[i-1].FalseAlarmsPer1000
			for j, row := range line.Shifted {
				line.Saved[j] = table[i-1].Shifted[j].ARL - row.ARL
			}
		}
		table = append(table, line)
	}
	return table, nil
}

// inControlAndShifted answers for shift 0 at ratio 1 and then for the request's shifts at its ratio.
func inControlAndShifted(meter *effort.Meter, r Request) ([]Row, error) {
	shifts, ratio := r.Shifts, r.SigmaRatio
	if ratio == 1 {
		r.Shifts = append([]float64{0}, shifts...)
		answer, err := With(meter, r)
		if err != nil {
			return nil, err
		}
		return answer.Rows, nil
	}
	r.Shifts, r.SigmaRatio = []float64{0}, 1
	in, err := With(meter, r)
	if err != nil {
		return nil, err
	}
	r.Shifts, r.SigmaRatio = shifts, ratio
	out, err := With(meter, r)
	if err != nil {
		return nil, err
	}
	return append(in.Rows, out.Rows...), nil
}

// member is a rule with its trace.
type member struct {
	role chart.Role
	spec rules.Spec
}

// name gives the rule's id, with "dispersion:" before it where it watches that trace: ids are unique within a trace only.
func (m *member) name() string {
	if m.role == chart.Dispersion {
		return chart.Dispersion.String() + ":" + m.spec.ID
	}
	return m.spec.ID
}

// members lists the rules of both traces.
func (r *Request) members() (list []member) {
	for role, t := range []*Trace{&r.Location, &r.Dispersion} {
		for _, s := range t.Rules {
			list = append(list, member{chart.Role(role), s})
		}
	}
	return list
}

// with gives the request with these rules in place of its own.
func (r *Request) with(list []member) Request {
	out := *r
	out.Location.Rules, out.Dispersion.Rules = nil, nil
	for _, m := range list {
		if m.role == chart.Location {
			out.Location.Rules = append(out.Location.Rules, m.spec)
		} else {
			out.Dispersion.Rules = append(out.Dispersion.Rules, m.spec)
		}
	}
	return out
}
