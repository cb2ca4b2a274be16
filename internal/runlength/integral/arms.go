package integral

import (
	"math"

	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/effort"
)

// Arm is one arm of a CUSUM: the distribution of its own first signal from its start and from 0.
type Arm struct{ Start, Zero curve.Curve }

// twoArms steps the first signal of either arm. With x_n and y_n the probabilities that the lower or the upper arm
// signals first, at point n, and f the run length of an arm alone,
//
//	lower from start = x + y * lower from 0,   upper from start = y + x * upper from 0
//
// where * is convolution, because the arm that has not signalled stands at 0 when the other does.
type twoArms struct {
	upper, lower [2][]float64 // probabilities of each run length, from the start and from 0
	arms         [2]Arm       // upper, lower
	first        [2][]float64 // y and x by point, from both starts; index 0 is no point
	survive      float64
	point        int
}

// TwoArms gives the first signal of both arms. It holds where both starts together are at most
// the decision interval plus twice the reference value: when one arm signals the other must stand at 0.
func TwoArms(upper, lower Arm, memory int, meter *effort.Meter) (curve.Curve, error) {
	t := &twoArms{arms: [2]Arm{upper, lower}, survive: 1}
	t.first = [2][]float64{{0}, {0}}
	t.upper, t.lower = [2][]float64{{0}, {0}}, [2][]float64{{0}, {0}}
	c, err := curve.Follow(t, memory, meter)
	if err != nil {
		return c, err
	}
	// The mean also has a closed form (Lucas and Crosier 1982, Technometrics 24(3), from memory).
	up, down := upper.Start.Mean(), lower.Start.Mean()
	up0, down0 := upper.Zero.Mean(), lower.Zero.Mean()
	closed := (up*down0 + down*up0 - up0*down0) / (up0 + down0)
	// An arm that signals rarely has little part in the mean of both, and so has its error.
	part := down0 / (up0 + down0)
	c.RelativeError += math.Abs(c.Mean()/closed-1) + part*(upper.Start.RelativeError+upper.Zero.RelativeError) +
		(1-part)*(lower.Start.RelativeError+lower.Zero.RelativeError)
	return c, nil
}

// Advance takes one point.
func (t *twoArms) Advance() (signalled, misplaced float64) {
	t.point++
	n := t.point
	length := func(c *curve.Curve) float64 { return c.At(n) }
	t.upper[0], t.upper[1] = append(t.upper[0], length(&t.arms[0].Start)), append(t.upper[1], length(&t.arms[0].Zero))
	t.lower[0], t.lower[1] = append(t.lower[0], length(&t.arms[1].Start)), append(t.lower[1], length(&t.arms[1].Zero))
	up, down := t.upper[0][n], t.lower[0][n]
	for j := 1; j < n; j++ {
		up -= t.first[1][j] * t.upper[1][n-j]
		down -= t.first[0][j] * t.lower[1][n-j]
	}
	up, down = max(up, 0), max(down, 0)
	t.first[0], t.first[1] = append(t.first[0], up), append(t.first[1], down)
	t.survive = max(t.survive-up-down, 0)
	return up + down, 0
}

// survivalNoise is where differences of probabilities leave no digit of what survives.
const survivalNoise = 1e-13

// Mass gives the probability that no signal has come.
func (t *twoArms) Mass() float64 {
	if t.survive < survivalNoise {
		return 0
	}
	return t.survive
}

// Change is not known; the hazard has to tell.
func (t *twoArms) Change(float64) float64 { return math.Inf(1) }

// Cost is the work of one Advance.
func (t *twoArms) Cost() int64 { return int64(2*t.point + 10) }
