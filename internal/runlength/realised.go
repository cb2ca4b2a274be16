package runlength

import (
	"context"
	"math"
	"slices"

	"limitary/internal/runlength/effort"
)

// RealisedRequest asks what limits estimated from a basis will really do.
type RealisedRequest struct {
	// Request has the rules and the chart; its shifts are not used.
	Request
	Basis Basis
	// Shift is the shift that matters, in the request's unit.
	Shift float64
	// PowerPoints is the horizon of the power: P(signal within so many points of the shift); 0 is 1 point.
	PowerPoints int
	// Assurance and Factor ask for the number of points with which, with probability Assurance, the rate of false alarms
	// is at most Factor times the nominal one; 0 is 0.9 and 1.5.
	Assurance, Factor float64
	// Progress, where set, is called as the work goes on.
	Progress func(done, of int)
}

// Spread is a quantity over all the limits that the basis might have given: 10 % are lower than Low and 10 % higher than
// High. There is no mean: that of a run length is ruled by the few bases that gave far too wide limits.
type Spread struct{ Low, Median, High float64 }

// Realised is what estimated limits will do.
type Realised struct {
	// Nominal is the run length in control with the true centre and sigma.
	Nominal Row
	// ARL in control, and FalseAlarmsPer1000, the rate of a chart that starts afresh after each alarm, 1000/ARL.
	ARL, FalseAlarmsPer1000 Spread
	// ShiftedARL is the mean run length at the shift that matters, Power the probability of a signal within PowerPoints.
	NominalShifted    Row
	NominalPower      float64
	ShiftedARL, Power Spread
	PowerPoints       int
	// DegreesOfFreedom of the estimate of sigma.
	DegreesOfFreedom float64
	// PointsNeeded for the assurance; 0 where BasisPointsMax do not give it.
	PointsNeeded      int
	Assurance, Factor float64
	// RelativeError is by how much the figures change when the grid they are interpolated on is thinned to half: larger
	// than their error.
	RelativeError float64
	Computation   Computation
}

// Realise gives what estimated limits will do.
func Realise(ctx context.Context, q RealisedRequest) (*Realised, error) {
	return RealiseWith(effort.New(ctx, 0), q)
}

// RealiseWith is Realise within the limit of a meter.
func RealiseWith(meter *effort.Meter, q RealisedRequest) (*Realised, error) {
	if err := q.defaults(); err != nil {
		return nil, err
	}
	q.Shifts, q.Horizons = []float64{0, q.Shift}, []int{q.PowerPoints}
	r, err := q.Request.normalise()
	if err != nil {
		return nil, err
	}
	estimate, err := q.Basis.estimate(r.Kind, r.SubgroupSize)
	if err != nil {
		return nil, err
	}
	nominal, err := inControlAndShifted(meter, r.withShifts(q.Shift))
	if err != nil {
		return nil, err
	}
	p, err := prepare(meter, r, false)
	if err != nil {
		return nil, plain(err)
	}
	if p.simulated {
		return nil, bad("rules", "limits estimated from data are studied with rules that have an exact method; these need a simulation")
	}
	out := &Realised{
		Nominal: nominal[0], NominalShifted: nominal[1], NominalPower: nominal[1].Within[0], PowerPoints: q.PowerPoints,
		DegreesOfFreedom: estimate.freedom, Assurance: q.Assurance, Factor: q.Factor, Computation: nominal[0].Computation,
	}
	total := 3 * gridNodes * gridNodes
	step := func(done int) {
		if q.Progress != nil {
			q.Progress(done, total)
		}
	}
	study := study{p, r, meter, step, 0}
	if err := study.spreads(&q, estimate, out); err != nil {
		return nil, plain(err)
	}
	out.PointsNeeded, err = study.needed(&q, out.Nominal.ARL)
	return out, plain(err)
}

func (q *RealisedRequest) defaults() error {
	if q.Assurance == 0 {
		q.Assurance = 0.9
	}
	if q.Factor == 0 {
		q.Factor = 1.5
	}
	q.PowerPoints = max(q.PowerPoints, 1)
	switch {
	case !(q.Assurance >= 0.5 && q.Assurance <= 0.99):
		return bad("assurance", "%v: want 0.5 to 0.99", q.Assurance)
	case !(q.Factor > 1 && q.Factor <= 100):
		return bad("factor", "%v: want more than 1 and at most 100", q.Factor)
	case q.Request.Start == SteadyState || q.Request.Data != (Data{}):
		return bad("data", "limits estimated from data are studied for independent normal points and a fresh chart")
	}
	return nil
}

// withShifts gives the request with one shift.
func (r *Request) withShifts(shift float64) Request {
	out := *r
	out.Shifts = []float64{shift}
	return out
}

// study computes run lengths under limits that are off.
type study struct {
	problem *problem
	request Request
	meter   *effort.Meter
	step    func(int)
	done    int
}

const (
	// gridNodes is the number of values of the centre, and of sigma, at which run lengths are computed; thinned leaves out
	// every other one.
	gridNodes = 13
	// gridTail is the probability outside the grid at each end.
	gridTail = 1e-6
	// gridSamples is the number of equally probable values of the centre, and of sigma, that quantiles are taken over.
	gridSamples = 160
)

// grid holds the logarithm of a quantity at Chebyshev-Lobatto nodes of centre and of the logarithm of sigma.
type grid struct {
	centres, sigmas [2]float64 // ranges
	values          [][]float64
	thinned         bool
}

// spreads fills in what estimated limits do.
func (s *study) spreads(q *RealisedRequest, e *estimate, out *Realised) error {
	run := func(shift, ratio float64, quantity func(arl, power float64) []float64) ([]*grid, error) {
		return s.grids(e, shift, ratio, q.PowerPoints, quantity)
	}
	in, err := run(0, 1, func(arl, _ float64) []float64 { return []float64{math.Log(arl)} })
	if err != nil {
		return err
	}
	shifted, err := run(q.Shift*s.request.perShift(), s.request.SigmaRatio, func(arl, power float64) []float64 {
		return []float64{math.Log(arl), logit(power)}
	})
	if err != nil {
		return err
	}
	take := func(g *grid, back func(float64) float64) (Spread, float64) {
		fine := g.spread(e)
		g.thinned = true
		coarse := g.spread(e)
		g.thinned = false
		values := Spread{back(fine.Low), back(fine.Median), back(fine.High)}
		off := max(math.Abs(back(coarse.Low)/values.Low-1), math.Abs(back(coarse.Median)/values.Median-1), math.Abs(back(coarse.High)/values.High-1))
		return values, off
	}
	var errors [3]float64
	out.ARL, errors[0] = take(in[0], math.Exp)
	out.ShiftedARL, errors[1] = take(shifted[0], math.Exp)
	out.Power, errors[2] = take(shifted[1], func(x float64) float64 { return 1 / (1 + math.Exp(-x)) })
	out.FalseAlarmsPer1000 = Spread{1000 / out.ARL.High, 1000 / out.ARL.Median, 1000 / out.ARL.Low}
	out.RelativeError = slices.Max(errors[:])
	return nil
}

func logit(p float64) float64 {
	p = min(max(p, 1e-300), 1-1e-15)
	return math.Log(p) - math.Log1p(-p)
}

// grids computes quantities at every node.
func (s *study) grids(e *estimate, shift, ratio float64, horizon int, quantity func(arl, power float64) []float64) ([]*grid, error) {
	centres := [2]float64{e.centre(gridTail), e.centre(1 - gridTail)}
	sigmas := [2]float64{math.Log(e.sigma(gridTail)), math.Log(e.sigma(1 - gridTail))}
	var out []*grid
	for i := range gridNodes {
		for j := range gridNodes {
			centre, sigma := node(centres, i), math.Exp(node(sigmas, j))
			c, err := s.problem.curve((shift-centre)/sigma, ratio/sigma, s.meter)
			if err != nil {
				return nil, err
			}
			for n, v := range quantity(c.Mean(), c.Within(horizon)) {
				if n >= len(out) {
					out = append(out, &grid{centres: centres, sigmas: sigmas})
				}
				if len(out[n].values) <= i {
					out[n].values = append(out[n].values, nil)
				}
				out[n].values[i] = append(out[n].values[i], v)
			}
			s.done++
			s.step(s.done)
		}
	}
	return out, nil
}

// node gives a Chebyshev-Lobatto node of a range.
func node(ends [2]float64, i int) float64 {
	t := -math.Cos(math.Pi * float64(i) / (gridNodes - 1))
	return (ends[0]+ends[1])/2 + t*(ends[1]-ends[0])/2
}

// basis gives the Lagrange polynomials of the nodes at x, by the barycentric formula.
func (g *grid) basis(ends [2]float64, x float64) []float64 {
	out, sum, by := make([]float64, gridNodes), 0.0, 1
	if g.thinned {
		by = 2
	}
	for i := 0; i < gridNodes; i += by {
		weight := 1.0
		if i == 0 || i == gridNodes-1 {
			weight = 0.5
		}
		if i/by%2 == 1 {
			weight = -weight
		}
		d := x - node(ends, i)
		if d == 0 {
			clear(out)
			out[i] = 1
			return out
		}
		out[i] = weight / d
		sum += out[i]
	}
	for i := range out {
		out[i] /= sum
	}
	return out
}

// sorted gives the quantity over equally probable limits, in ascending order.
func (g *grid) sorted(e *estimate) []float64 {
	var byCentre [][]float64 // quantity at each centre and sigma node
	for i := range gridSamples {
		b := g.basis(g.centres, e.centre((float64(i)+0.5)/gridSamples))
		row := make([]float64, gridNodes)
		for n, weight := range b {
			for j, v := range g.values[n] {
				row[j] += weight * v
			}
		}
		byCentre = append(byCentre, row)
	}
	values := make([]float64, 0, gridSamples*gridSamples)
	for j := range gridSamples {
		b := g.basis(g.sigmas, math.Log(e.sigma((float64(j)+0.5)/gridSamples)))
		for _, row := range byCentre {
			v := 0.0
			for n, weight := range b {
				v += weight * row[n]
			}
			values = append(values, v)
		}
	}
	slices.Sort(values)
	return values
}

// spread gives the quantiles of the quantity.
func (g *grid) spread(e *estimate) Spread {
	values := g.sorted(e)
	at := func(p float64) float64 { return values[int(p*float64(len(values)))] }
	return Spread{at(0.1), at(0.5), at(0.9)}
}

// needed gives the least number of points with which the rate is kept with the assurance.
func (s *study) needed(q *RealisedRequest, nominal float64) (int, error) {
	const fewest = 20 // the grid is made for so few and serves all more
	basis := q.Basis
	basis.Points = fewest
	widest, err := basis.estimate(s.request.Kind, s.request.SubgroupSize)
	if err != nil {
		return 0, err
	}
	grids, err := s.grids(widest, 0, 1, 1, func(arl, _ float64) []float64 { return []float64{math.Log(arl)} })
	if err != nil {
		return 0, err
	}
	want := math.Log(nominal / q.Factor)
	enough := func(points int) (bool, error) {
		b := Basis{points, q.Basis.Estimator}
		e, err := b.estimate(s.request.Kind, s.request.SubgroupSize)
		if err != nil {
			return false, err
		}
		if err := s.meter.Spend(gridSamples * gridSamples * gridNodes); err != nil {
			return false, err
		}
		values := grids[0].sorted(e)
		return values[int((1-q.Assurance)*float64(len(values)))] >= want, nil
	}
	low, high := fewest-1, fewest
	for {
		ok, err := enough(high)
		if err != nil {
			return 0, err
		}
		if ok {
			break
		}
		if high >= BasisPointsMax {
			return 0, nil
		}
		low, high = high, min(2*high, BasisPointsMax)
	}
	for high-low > 1 {
		mid := low + (high-low)/2
		ok, err := enough(mid)
		if err != nil {
			return 0, err
		}
		if ok {
			high = mid
		} else {
			low = mid
		}
	}
	return high, nil
}
