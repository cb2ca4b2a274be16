package diagnostics_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// design is the shape of a basis: groups of size readings; size 1 is a chart of individuals.
type design struct {
	kind         chart.Kind
	groups, size int
}

func (d design) String() string {
	if d.size == 1 {
		return fmt.Sprintf("%d individuals", d.groups)
	}
	return fmt.Sprintf("%s, %d subgroups of %d", d.kind, d.groups, d.size)
}

// maker draws the readings of a basis, groups after groups, in sigmas around 0.
type maker func(r *rand.Rand, d design) []float64

func clean(r *rand.Rand, d design) []float64 {
	xs := make([]float64, d.groups*d.size)
	for i := range xs {
		xs[i] = r.NormFloat64()
	}
	return xs
}

// requestOf puts readings into groups around 50 with sigma 2, rounded to a step in sigmas.
func requestOf(d design, xs []float64, step float64) limits.Request {
	places := 9
	req := limits.Request{Kind: d.kind, SubgroupSize: d.size, PublishedDecimals: &places}
	for i := 0; i+d.size <= len(xs); i += d.size {
		g := limits.Group{Decimals: 6, Readings: make([]float64, d.size)}
		for j, x := range xs[i : i+d.size] {
			g.Readings[j] = math.Round((50+2*step*math.Round(x/step))*1e6) / 1e6
		}
		req.Groups = append(req.Groups, g)
	}
	return req
}

// fineStep is far below what a test can see, and short in decimals.
const fineStep = 0.0001

func examine(tb testing.TB, req limits.Request) diagnostics.Report {
	tb.Helper()
	res, err := limits.Compute(req)
	if err != nil {
		tb.Fatal(err)
	}
	return diagnostics.Examine(req, res, diagnostics.Times{})
}

// tally counts outcomes of tests by name and subject over replications.
type tally struct {
	order               []string
	found, made, voided map[string]int
	any, runs           int
}

func newTally() *tally {
	return &tally{found: map[string]int{}, made: map[string]int{}, voided: map[string]int{}}
}

func keyOf(t diagnostics.Test) string {
	code := t.Code
	if code == diagnostics.CodeBetweenTooSmall {
		code = diagnostics.CodeBetweenTooLarge // one test, two tails
	}
	return code + ", " + t.Subject
}

func (y *tally) take(rep *diagnostics.Report) {
	y.runs++
	any := 0
	for _, t := range rep.Tests {
		if t.Level == 0 && t.Code != diagnostics.CodeRoundingCoarse {
			continue
		}
		key := keyOf(t)
		if _, known := y.made[key]; !known {
			y.order = append(y.order, key)
			y.made[key] = 0
		}
		switch t.Outcome {
		case diagnostics.Found:
			any = 1
			y.found[key]++
			y.made[key]++
		case diagnostics.NothingFound:
			y.made[key]++
		case diagnostics.Void:
			y.voided[key]++
		}
	}
	y.any += any
}

// rate is the share of replications in which the test found something.
func (y *tally) rate(key string) float64 { return float64(y.found[key]) / float64(y.runs) }

func simulate(tb testing.TB, d design, make maker, step float64, runs int, seed uint64) *tally {
	tb.Helper()
	r := rand.New(rand.NewPCG(seed, 99))
	y := newTally()
	for range runs {
		rep := examine(tb, requestOf(d, make(r, d), step))
		y.take(&rep)
	}
	return y
}

// fourErrors gives four standard errors of a rate over so many replications.
func fourErrors(rate float64, runs int) float64 { return 4 * math.Sqrt(rate*(1-rate)/float64(runs)) }
