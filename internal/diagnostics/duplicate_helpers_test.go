package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// duplicateBasis is a basis of duplicates whose means lie evenly on a logarithmic scale from 1 to span; with bands, none
// near their edge at 6, where chance puts means on the wrong side of a jump of sigma.
type duplicateBasis struct {
	kind chart.Kind
	n    int
	// size gives the readings of set i.
	size  func(i int) int
	span  float64
	sigma func(mean float64) float64
	// step is the rounding step in the unit of the readings.
	step    float64
	options limits.DuplicateOptions
	// spoil changes the readings; nil leaves them.
	spoil func(r *rand.Rand, sets [][]float64)
}

func pairsOnly(int) int   { return 2 }
func twoToFive(i int) int { return 2 + i%4 }

func constantly(sigma float64) func(float64) float64 {
	return func(float64) float64 { return sigma }
}

func growing(mean float64) float64      { return math.Hypot(0.05, 0.02*mean) }
func linear(mean float64) float64       { return 0.05 + 0.02*mean }
func proportional(mean float64) float64 { return 0.03 * mean }

func levelling(mean float64) float64 { return 0.03 * max(5, mean) }

func banded(mean float64) float64 {
	if mean < 6 {
		return 0.1
	}
	return 0.5
}

func (b *duplicateBasis) request(r *rand.Rand) limits.Request {
	places := 9
	req := limits.Request{Kind: b.kind, PublishedDecimals: &places, Duplicates: b.options}
	sets := make([][]float64, b.n)
	for i := range sets {
		mean := math.Exp(r.Float64() * math.Log(b.span))
		for len(b.options.Bands) > 0 && math.Abs(mean-6) < 2 {
			mean = math.Exp(r.Float64() * math.Log(b.span))
		}
		for range b.size(i) {
			sets[i] = append(sets[i], mean+b.sigma(mean)*r.NormFloat64())
		}
		req.SubgroupSize = max(req.SubgroupSize, len(sets[i]))
	}
	if b.spoil != nil {
		b.spoil(r, sets)
	}
	for _, xs := range sets {
		g := limits.Group{Decimals: 6}
		for _, x := range xs {
			g.Readings = append(g.Readings, math.Round(1e6*b.step*math.Round(x/b.step))/1e6)
		}
		req.Groups = append(req.Groups, g)
	}
	return req
}

// simulateDuplicates examines bases that limits can be computed from.
func simulateDuplicates(tb testing.TB, b duplicateBasis, runs int, seed uint64) *tally {
	tb.Helper()
	r, y := rand.New(rand.NewPCG(seed, 17)), newTally()
	for y.runs < runs {
		req := b.request(r)
		res, err := limits.Compute(req)
		if err != nil { // a fitted function that comes out proportional, which limits refuses
			if b.options.Function {
				continue
			}
			tb.Fatal(err)
		}
		rep := diagnostics.Examine(req, res, diagnostics.Times{})
		y.take(&rep)
	}
	return y
}
