package limits_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// Simulations of independent normal readings, seeds fixed. Every bound below is four standard errors of what is estimated, plus a stated
// allowance where a method is an approximation.
const replications = 4000

// design is the shape of a basis.
type design struct {
	kind chart.Kind
	size int
	// sizes of the subgroups; breaks holds the indexes with a break before.
	sizes  []int
	breaks map[int]bool
}

func repeat(n, times int) []int {
	sizes := make([]int, times)
	for i := range sizes {
		sizes[i] = n
	}
	return sizes
}

// everySecond breaks n values into pairs, so that no two moving ranges share a value.
func everySecond(n int) map[int]bool {
	breaks := map[int]bool{}
	for i := 0; i < n; i += 2 {
		breaks[i] = true
	}
	return breaks
}

func (d design) String() string {
	return fmt.Sprintf("%s, %d groups of up to %d, %d breaks", d.kind, len(d.sizes), d.size, len(d.breaks))
}

// draw gives a request of readings from a normal distribution with mean 10 and sigma 2.
func (d design) draw(r *rand.Rand) limits.Request {
	places := 12
	req := limits.Request{Kind: d.kind, SubgroupSize: d.size, PublishedDecimals: &places}
	for i, n := range d.sizes {
		g := limits.Group{Decimals: 3, BreakBefore: d.breaks[i]}
		for range n {
			// Short decimals, as results are; a step of sigma/2000 is far below what the simulation resolves.
			g.Readings = append(g.Readings, math.Round((10+2*r.NormFloat64())*1000)/1000)
		}
		req.Groups = append(req.Groups, g)
	}
	return req
}

var designs = []design{
	{chart.Individuals, 1, repeat(1, 10), nil},
	{chart.Individuals, 1, repeat(1, 25), nil},
	{chart.Individuals, 1, repeat(1, 25), map[int]bool{5: true, 6: true, 15: true}},
	{chart.Individuals, 1, repeat(1, 40), everySecond(40)},
	{chart.XbarR, 4, repeat(4, 8), nil},
	{chart.XbarS, 5, repeat(5, 20), nil},
	{chart.XbarR, 6, []int{2, 6, 3, 6, 1, 5, 6, 4, 2, 6}, nil},
	{chart.XbarS, 10, []int{10, 3, 2, 10, 1, 7, 5}, nil},
}

// tally holds sums of one estimator over the replications.
type tally struct {
	n, sum, squares, fourths, freedom float64
}

// simulate estimates by every estimator and adds up the relative errors.
func simulate(t *testing.T, d design, seed uint64) map[limits.Estimator]*tally {
	r := rand.New(rand.NewPCG(seed, 77))
	tallies := map[limits.Estimator]*tally{}
	for range replications {
		req := d.draw(r)
		res, err := limits.Compute(req)
		if err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		for _, e := range res.Estimates {
			s := tallies[e.Name]
			if s == nil {
				s = &tally{freedom: e.DegreesOfFreedom}
				tallies[e.Name] = s
			}
			x := e.Sigma/2 - 1
			s.n++
			s.sum += x
			s.squares += x * x
			s.fourths += x * x * x * x
		}
	}
	return tallies
}

// unbiasedVariance gives the variance of s/c4 at ν degrees of freedom for sigma 1, by log-gamma, apart from the code
// under test.
func unbiasedVariance(freedom float64) float64 {
	above, _ := math.Lgamma((freedom + 1) / 2)
	below, _ := math.Lgamma(freedom / 2)
	c4 := math.Sqrt(2/freedom) * math.Exp(above-below)
	return 1/(c4*c4) - 1
}

func TestEstimatorsAreUnbiasedWithTheStatedFreedom(t *testing.T) {
	for i, d := range designs {
		t.Run(d.String(), func(t *testing.T) {
			for name, s := range simulate(t, d, uint64(i)) {
				if name == limits.MedianMovingRange {
					continue // biased for few ranges, see the next test
				}
				mean := s.sum / s.n
				variance := s.squares/s.n - mean*mean
				if bound := 4 * math.Sqrt(variance/s.n); math.Abs(mean) > bound {
					t.Errorf("seed %d,77, %s: got a relative bias of %.5f, want 0 within %.5f", i, name, mean, bound)
				}
				want := unbiasedVariance(s.freedom)
				if bound := 4 * math.Sqrt((s.fourths/s.n-variance*variance)/s.n); math.Abs(variance-want) > bound {
					t.Errorf("seed %d,77, %s: got variance %.6f, want %.6f of %.3f degrees of freedom within %.6f", i, name, variance, want, s.freedom, bound)
				}
			}
		})
	}
}

// The divisor of the median is the limit for many ranges. The doc comment states a relative bias of 0.5/m or so; here for
// m = 24, and next to none for m = 999, where the asymptotic variance must hold as well.
func TestMedianMovingRangeBias(t *testing.T) {
	few := simulate(t, designs[1], 31)[limits.MedianMovingRange]
	if got := 24 * few.sum / few.n; got < 0.25 || got > 0.75 {
		t.Errorf("seed 31,77: got a bias of %.3f/m at m = 24, want about 0.5/m", got)
	}
	r, d := rand.New(rand.NewPCG(32, 77)), design{chart.Individuals, 1, repeat(1, 1000), nil}
	const runs = 1000
	var sum, squares, freedom float64
	for range runs {
		res, err := limits.Compute(d.draw(r))
		if err != nil {
			t.Fatal(err)
		}
		e := estimate(t, res, limits.MedianMovingRange)
		sum, squares, freedom = sum+e.Sigma/2-1, squares+(e.Sigma/2-1)*(e.Sigma/2-1), e.DegreesOfFreedom
	}
	mean, want := sum/runs, unbiasedVariance(freedom)
	variance := squares/runs - mean*mean
	if math.Abs(mean-0.5/999) > 4*math.Sqrt(want/runs) {
		t.Errorf("seed 32,77: got a bias of %.5f at m = 999, want nearly none", mean)
	}
	if math.Abs(variance/want-1) > 4*math.Sqrt(2./runs) {
		t.Errorf("seed 32,77: got variance %.6f, want %.6f of %.1f degrees of freedom", variance, want, freedom)
	}
}
