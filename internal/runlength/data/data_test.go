package data_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"

	"limitary/internal/limits"
	"limitary/internal/runlength/data"
)

const seed = 20260103

func distributions(tb testing.TB) map[string]data.Distribution {
	f, err := limits.Factors(5)
	if err != nil {
		tb.Fatal(err)
	}
	pair, err := limits.Factors(2)
	if err != nil {
		tb.Fatal(err)
	}
	s := math.Sqrt(1 - f.SMean*f.SMean)
	return map[string]data.Distribution{
		"normal":    data.Normal{Mean: 0, SD: 1},
		"t":         data.T{Freedom: 5, Mean: 0, SD: 1},
		"gamma":     data.Gamma{Shape: 3, Mean: 0, SD: 1},
		"range":     data.Range{N: 5, Ratio: 1, Centre: f.RangeMean, Sigma: f.RangeSigma},
		"pair":      data.Range{N: 2, Ratio: 1, Centre: pair.RangeMean, Sigma: pair.RangeSigma},
		"deviation": data.Spread{N: 5, Ratio: 1, Centre: f.SMean, Sigma: s},
		"mirrored":  data.Mirrored{Whole: data.Gamma{Shape: 3, Mean: 0, SD: 1}},
	}
}

// Every distribution here is scaled to mean 0 and standard deviation 1. Probabilities add up, agree with the density and
// with random points.
func TestDistributionsAgreeWithThemselves(t *testing.T) {
	t.Logf("seed %d", seed)
	const draws = 200_000
	for name, d := range distributions(t) {
		t.Run(name, func(t *testing.T) {
			inf := math.Inf(1)
			if got := d.Between(-inf, inf); math.Abs(got-1) > 1e-12 {
				t.Errorf("all of it is %v", got)
			}
			for _, z := range []float64{-1.3, -0.2, 0.4, 2.5} {
				if got := d.Between(-inf, z) + d.Between(z, inf); math.Abs(got-1) > 1e-12 {
					t.Errorf("below and above %v: %v", z, got)
				}
				want := quad.Fixed(d.Density, z, z+0.3, 12, quad.Legendre{}, 0)
				if got := d.Between(z, z+0.3); math.Abs(got-want) > 1e-7 {
					t.Errorf("from %v to %v: %v, the density says %v", z, z+0.3, got, want)
				}
			}
			lo, hi := d.Support()
			if got := d.Between(-inf, lo) + d.Between(hi, inf); got > 1e-14 {
				t.Errorf("%v lies outside the support", got)
			}
			r := rand.New(rand.NewPCG(seed, 1))
			sum, squares, inside := 0.0, 0.0, 0.0
			for range draws {
				z := d.Draw(r)
				sum, squares = sum+z, squares+z*z
				if z > -0.5 && z < 1 {
					inside++
				}
			}
			if mean := sum / draws; math.Abs(mean) > 4/math.Sqrt(draws) {
				t.Errorf("mean of random points %v", mean)
			}
			if variance := squares / draws; math.Abs(variance-1) > 0.05 {
				t.Errorf("variance of random points %v", variance)
			}
			p := d.Between(-0.5, 1)
			if d := (inside/draws - p) / math.Sqrt(p*(1-p)/draws); math.Abs(d) > 4 {
				t.Errorf("random points between -0.5 and 1: %v, want %v", inside/draws, p)
			}
		})
	}
}

// Far tails keep their digits: 1-Φ(6) and 1-Φ(10) (Abramowitz and Stegun table 26.2; from memory), and the t of one tail.
func TestTailsKeepTheirDigits(t *testing.T) {
	unit := data.Normal{Mean: 0, SD: 1}
	for z, want := range map[float64]float64{6: 9.865876450376946e-10, 10: 7.619853024160527e-24} {
		for _, got := range []float64{unit.Between(z, math.Inf(1)), unit.Between(math.Inf(-1), -z)} {
			if math.Abs(got/want-1) > 1e-12 {
				t.Errorf("beyond %v: %v, want %v", z, got, want)
			}
		}
	}
}

func TestRoundedPointsLieOnMultiples(t *testing.T) {
	exact := data.Normal{Mean: 0.2, SD: 1}
	for _, step := range []float64{0.5, 0.3, 1} {
		d := data.Rounded{Exact: exact, Step: step}
		total := 0.0
		for cell := -40; cell <= 40; cell++ {
			total += d.At(float64(cell) * step)
		}
		if math.Abs(total-1) > 1e-12 {
			t.Errorf("step %v: cells add up to %v", step, total)
		}
		for _, line := range []float64{-2, -1, 0, 1, 2} {
			all := d.Between(math.Inf(-1), line) + d.On(line) + d.Between(line, math.Inf(1))
			if math.Abs(all-1) > 1e-12 {
				t.Errorf("step %v, line %v: below, on and above add up to %v", step, line, all)
			}
			want := 0.0
			for cell := -40; cell <= 40; cell++ {
				if v := float64(cell) * step; v > line+1e-9 {
					want += exact.Between(v-step/2, v+step/2)
				}
			}
			if got := d.Between(line, math.Inf(1)); math.Abs(got-want) > 1e-12 {
				t.Errorf("step %v: above %v lies %v, want %v", step, line, got, want)
			}
		}
	}
}

func TestTruncatedPoints(t *testing.T) {
	whole := data.Normal{Mean: 0.3, SD: 1}
	d := data.Truncate(whole, -1, 2)
	if got, want := d.Between(0, 5), whole.Between(0, 2)/whole.Between(-1, 2); math.Abs(got-want) > 1e-14 {
		t.Errorf("got %v, want %v", got, want)
	}
	r := rand.New(rand.NewPCG(seed, 2))
	for range 1000 {
		if z := d.Draw(r); z <= -1 || z >= 2 {
			t.Fatal(fmt.Sprint(z, " lies outside"))
		}
	}
}
