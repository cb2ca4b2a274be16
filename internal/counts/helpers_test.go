package counts_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/counts"
)

// seed is fixed: a failure comes back.
const seed = 20260117

func source(stream uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, stream)) }

// tally gathers a mean and its standard error.
type tally struct{ n, sum, squares float64 }

func (a *tally) add(x float64) { a.n, a.sum, a.squares = a.n+1, a.sum+x, a.squares+x*x }

func (a *tally) mean() float64 { return a.sum / a.n }

func (a *tally) standardError() float64 {
	return math.Sqrt((a.squares/a.n - a.mean()*a.mean()) / a.n)
}

// holds fails unless the mean is want within four standard errors.
func (a *tally) holds(t *testing.T, what string, want float64) {
	t.Helper()
	t.Logf("%s: %.6g, want %.6g, standard error %.2g", what, a.mean(), want, a.standardError())
	if d := math.Abs(a.mean() - want); d > 4*a.standardError() {
		t.Errorf("%s: mean %g, want %g, standard error %g", what, a.mean(), want, a.standardError())
	}
}

func drawBinomial(r *rand.Rand, size, p float64) float64 {
	return distuv.Binomial{N: size, P: p, Src: r}.Rand()
}

func drawPoisson(r *rand.Rand, mean float64) float64 {
	return distuv.Poisson{Lambda: mean, Src: r}.Rand()
}

// sizes are unequal: from 20 to 320.
var sizes = []float64{20, 35, 50, 50, 80, 100, 100, 100, 125, 160, 160, 200, 200, 250, 300, 320, 60, 90, 110, 140}

// draw makes one sample of every size.
func draw(count func(n float64) float64) []counts.Sample {
	samples := make([]counts.Sample, len(sizes))
	for i, n := range sizes {
		samples[i] = counts.Sample{Count: count(n), Inspected: n}
	}
	return samples
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance*math.Abs(want)) {
		t.Errorf("%s: %.15g, want %.15g", what, got, want)
	}
}
