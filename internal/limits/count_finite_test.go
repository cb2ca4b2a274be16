package limits_test

import (
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

// drawCountRequest gives a request of counts that may be anything from ordinary to absurd.
func drawCountRequest(r *rand.Rand) limits.Request {
	scale := func() float64 { return math.Pow(10, -9+18*r.Float64()) }
	kind := []chart.Kind{chart.P, chart.NP, chart.C, chart.U}[r.IntN(4)]
	req := limits.Request{Kind: kind, SubgroupSize: 1}
	items := math.Ceil(scale())
	if kind == chart.NP {
		req.SubgroupSize = int(items)
	}
	share, units := r.Float64()*r.Float64()*r.Float64(), scale()
	for range r.IntN(6) {
		size := map[chart.Kind]float64{chart.P: math.Ceil(items * r.Float64()), chart.NP: items, chart.C: 1, chart.U: units * (0.1 + r.Float64())}[kind]
		x := math.Floor(share * items * r.Float64())
		if kind == chart.P {
			x = math.Floor(share * size)
		}
		g := counted(x, size)
		g.BreakBefore = r.IntN(8) == 0
		req.Groups = append(req.Groups, g)
	}
	if r.IntN(4) == 0 {
		req.Centre = ptr(scale())
	}
	if r.IntN(4) == 0 {
		req.Counts.MeanUpperBound = ptr(scale())
	}
	if r.IntN(4) == 0 {
		req.PublishedDecimals = ptr(r.IntN(16))
	}
	req.Counts.Method, req.Counts.Extra = chart.CountMethod(r.IntN(3)), limits.ExtraVariation(max(0, r.IntN(5)-2))
	return req
}

// Whatever the counts, the answer is an error naming a field, or finite figures that the judge can judge by.
func TestCountsGiveFiniteLimitsOrAnError(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 7))
	computed := 0
	for range 1500 {
		req := drawCountRequest(r)
		res, err := limits.Compute(req)
		var refused *limits.Error
		if err != nil {
			if !errors.As(err, &refused) || refused.Field == "" {
				t.Fatalf("%+v: got %v", req, err)
			}
			continue
		}
		computed++
		if _, err := json.Marshal(res); err != nil {
			t.Fatalf("%+v: got %+v: %v", req, res, err)
		}
		j := judgeOf(t, res)
		for _, g := range req.Groups {
			beyond(j, g.Count.Nonconforming, g.Count.Inspected)
		}
		for _, tail := range res.Tails {
			if !(tail.Probability >= 0) || tail.Probability > 1 || res.Model.CountMethod == chart.Exact && tail.Probability > tail.Nominal {
				t.Fatalf("%+v: got tail %+v", req, tail)
			}
		}
		if in := res.Intervals.Centre; in != nil && !(in.Lower <= res.CentreUnrounded && res.CentreUnrounded <= in.Upper) {
			t.Fatalf("%+v: interval %+v does not hold the centre %g", req, *in, res.CentreUnrounded)
		}
	}
	if computed < 300 {
		t.Errorf("only %d requests had limits", computed)
	}
}

func TestManySamples(t *testing.T) {
	groups, total := make([]limits.Group, limits.GroupsMax), 0.0
	for i := range groups {
		total += float64(i % 7)
		groups[i] = counted(float64(i%7), 0.1*float64(10+i%5))
	}
	res := mustCompute(t, limits.Request{Kind: chart.U, Groups: groups})
	if res.N != limits.GroupsMax || !near(res.Model.Inspected, 1.2, 1e-12) || !near(res.CentreUnrounded, total/120000, 1e-14) {
		t.Errorf("got %d samples of %g, centre %g", res.N, res.Model.Inspected, res.CentreUnrounded)
	}
}
