package integral

import (
	"errors"
	"math"

	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/data"
	"limitary/internal/runlength/effort"
)

// ErrTooFine says that the kernel is too narrow for the interval: the equation would need too many nodes.
var ErrTooFine = errors.New("integral: the equation needs more nodes than the limit")

// NodesMax bounds the nodes of an equation.
const NodesMax = 1600

// chain steps the distribution of the statistic. Its state is the weight of each node: the probability that n more
// points bring no signal is the sum of weight times value. That is what a distribution is to functions held at nodes.
type chain struct {
	grid      *grid
	matrix    []float64 // rows of the nodes
	signals   []float64 // probability of a signal from each node
	now, then []float64
	mass      float64
	// moving gives the walk of each coming point where its border still moves; nil once it stands.
	moving func(point int) (Walk, bool)
	final  Walk
	point  int
	build  func(walk Walk, point int) *grid
	law    data.Distribution
}

// Advance takes one point.
func (c *chain) Advance() (signalled, misplaced float64) {
	c.now, c.then = c.then, c.now
	c.point++
	if c.moving != nil {
		walk, moves := c.moving(c.point)
		if moves {
			return c.move(walk), 0
		}
		c.moving = nil
		signalled = c.move(c.final)
		c.fill()
		return signalled, 0
	}
	clear(c.now)
	n := len(c.then)
	for i, p := range c.then {
		signalled += p * c.signals[i]
		row := c.matrix[i*n : (i+1)*n]
		for j, w := range row {
			c.now[j] += p * w
		}
	}
	c.mass = sum(c.now)
	return signalled, 0
}

// move takes one point onto the grid of a border that differs from the last.
func (c *chain) move(walk Walk) (signalled float64) {
	next := c.build(walk, c.point)
	now, row := make([]float64, len(next.nodes)), make([]float64, len(next.nodes))
	for i, p := range c.then {
		signalled += p * next.row(c.grid.walk, c.grid.nodes[i], c.law, row)
		for j, w := range row {
			now[j] += p * w
		}
	}
	c.grid, c.now, c.then, c.mass = next, now, make([]float64, len(now)), sum(now)
	return signalled
}

// fill makes the matrix of the present grid.
func (c *chain) fill() {
	n := len(c.grid.nodes)
	c.matrix, c.signals = make([]float64, n*n), make([]float64, n)
	for i, y := range c.grid.nodes {
		c.signals[i] = c.grid.row(c.grid.walk, y, c.law, c.matrix[i*n:(i+1)*n])
	}
}

// Mass gives the probability that no signal has come.
func (c *chain) Mass() float64 { return c.mass }

// Change is as curve.Chain wants it.
func (c *chain) Change(factor float64) (total float64) {
	if c.moving != nil {
		return math.Inf(1)
	}
	for i, p := range c.now {
		total += math.Abs(p - factor*c.then[i])
	}
	return total
}

// Cost is the work of one Advance.
func (c *chain) Cost() int64 {
	n := int64(len(c.now))
	if c.moving != nil {
		return 20 * n * n
	}
	return n * n
}

func sum(xs []float64) (total float64) {
	for _, x := range xs {
		total += x
	}
	return total
}

const (
	// orderCoarse and orderFine are the nodes of a panel; both are computed, and their difference is the error told.
	orderCoarse, orderFine = 14, 18
	// panelWidth is the widest panel, in standard deviations of the kernel.
	panelWidth = 2.0
)

// Law is the distribution of a point with its standard deviation, which sets the width of panels.
type Law struct {
	data.Distribution
	SD float64
}

// Settings of a solution.
type Settings struct {
	// Start is the statistic at the beginning.
	Start float64
	// Before, where set, is the law in control: the run begins from the distribution of a chart that has long run under it.
	Before *Law
	// Moving gives the walk of the n-th point (from 1) while its borders move, and false once they are those of the walk.
	Moving func(point int) (Walk, bool)
	// Memory is about how many points the statistic remembers.
	Memory int
}

// Solve gives the distribution of the run length, with the difference between two orders of the method in its error.
func Solve(w Walk, law Law, s Settings, meter *effort.Meter) (curve.Curve, error) {
	coarse, err := solve(w, law, s, orderCoarse, meter)
	if err != nil {
		return coarse, err
	}
	fine, err := solve(w, law, s, orderFine, meter)
	if err != nil {
		return fine, err
	}
	fine.RelativeError += math.Abs(coarse.Mean()/fine.Mean() - 1)
	return fine, nil
}

func solve(w Walk, law Law, s Settings, order int, meter *effort.Meter) (curve.Curve, error) {
	deviation := law.SD
	if s.Before != nil {
		deviation = min(deviation, s.Before.SD)
	}
	if float64(order)*(w.Upper-w.Lower)/(panelWidth*w.Weight*deviation) > NodesMax {
		return curve.Curve{}, ErrTooFine
	}
	walkAt := func(point int) Walk {
		if s.Moving != nil {
			if moved, moves := s.Moving(point); moves {
				return moved
			}
		}
		return w
	}
	build := func(w Walk, point int) *grid {
		later := func(g int) Walk { return walkAt(point + g) }
		kinks := breaks(law, deviation, later)
		if s.Before != nil {
			kinks = append(kinks, breaks(s.Before, deviation, later)...)
		}
		return newGrid(w, order, panelWidth*w.Weight*deviation, kinks)
	}
	c := &chain{grid: build(w, 0), law: law, moving: s.Moving, build: build, final: w}
	n := len(c.grid.nodes)
	if err := meter.Spend(int64(30 * n * n)); err != nil {
		return curve.Curve{}, err
	}
	if s.Before != nil {
		return steady(c, *s.Before, s.Memory, meter)
	}
	c.begin(s.Start)
	if c.moving == nil {
		c.fill()
	}
	return curve.Follow(c, s.Memory, meter)
}

// begin sets the state to one value of the statistic, which need not be a node: its own Lagrange weights.
func (c *chain) begin(start float64) {
	c.now, c.then = make([]float64, len(c.grid.nodes)), make([]float64, len(c.grid.nodes))
	c.mass = 1
	if c.grid.walk.Floor && start == 0 {
		c.now[0] = 1
		return
	}
	for i := 1; i < len(c.grid.edges); i++ {
		a, b := c.grid.edges[i-1], c.grid.edges[i]
		if start <= b || i == len(c.grid.edges)-1 {
			c.grid.lagrange((2*start-a-b)/(b-a), c.now[c.grid.atom+(i-1)*c.grid.order:][:c.grid.order])
			return
		}
	}
}

// steady runs the chart in control until its state is steady, and then under the law of the run.
func steady(c *chain, before Law, memory int, meter *effort.Meter) (curve.Curve, error) {
	run := c.law
	c.law = before
	c.begin(0)
	c.fill()
	in, err := curve.Follow(c, memory, meter)
	if err != nil {
		return in, err
	}
	for i := range c.now {
		c.now[i] /= c.mass
	}
	c.law, c.mass = run, 1
	c.fill()
	out, err := curve.Follow(c, memory, meter)
	out.RelativeError += in.RelativeError
	return out, err
}
