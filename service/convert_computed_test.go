package service

import (
	"encoding/json"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// TestEveryFigureCanBeKept computes limits of every kind from bases so small that intervals are open, and makes of them
// what a version keeps: a figure that JSON cannot write would be found only when somebody proposes such a version.
func TestEveryFigureCanBeKept(t *testing.T) {
	r := rand.New(rand.NewPCG(17, 4))
	kept := 0
	for kind := chart.Individuals; kind <= chart.RelativeRange; kind++ {
		for n := 2; n <= 14; n++ {
			for try := range 6 {
				req := smallBasis(r, kind, n, try)
				res, err := limits.Compute(req)
				if err != nil {
					continue // too small for this kind, and said so
				}
				kept++
				c := definition.Content{
					Estimates: estimatesOf(res), Intervals: intervalsOf(res), Findings: append(findingsOf(res), foundBy(diagnostics.Examine(req, res, diagnostics.Times{}))...),
					Components: componentsOf(res), Tails: tailsOf(res), Parts: partsOf(res), FalseAlarm: falseAlarmOf(res), Compared: comparedOf(res), Model: &res.Model,
				}
				if _, err := json.Marshal(c); err != nil {
					t.Fatalf("%s, %d groups: %v\n%+v", kind, n, err, res)
				}
			}
		}
	}
	if kept < 300 {
		t.Errorf("only %d bases gave limits", kept)
	}
}

func smallBasis(r *rand.Rand, kind chart.Kind, n, try int) limits.Request {
	req := limits.Request{Kind: kind, SubgroupSize: 1}
	switch {
	case kind == chart.NP:
		req.SubgroupSize = 20
	case !kind.SizeImplied():
		req.SubgroupSize = 2 + try%3
	}
	if kind.Counts() && try%3 > 0 {
		req.Counts = limits.CountOptions{Method: chart.Normal, Extra: limits.ExtraVariation(try % 3)}
	}
	for range n {
		g := limits.Group{Decimals: limits.DecimalsUnknown}
		if kind.Counts() {
			inspected := map[chart.Kind]float64{chart.P: float64(20 + r.IntN(30)), chart.NP: 20, chart.C: 1, chart.U: 1 + float64(r.IntN(4))}[kind]
			g.Count = &chart.Count{Nonconforming: float64(r.IntN(12)), Inspected: inspected}
		} else {
			for range req.SubgroupSize {
				g.Readings = append(g.Readings, float64(r.IntN(200))/10+[]float64{1, 1e6}[try%2])
			}
		}
		req.Groups = append(req.Groups, g)
	}
	return req
}
