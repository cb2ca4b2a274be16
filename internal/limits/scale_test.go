package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

// readingKinds are those with a location trace of readings.
var readingKinds = []chart.Kind{chart.Individuals, chart.XbarR, chart.XbarS, chart.RunMeans}

// positive draws a request of readings that no transform refuses.
func positive(kind chart.Kind, seed uint64) limits.Request {
	r := rand.New(rand.NewPCG(seed, 31))
	size := 4
	if kind == chart.Individuals {
		size = 1
	}
	req := limits.Request{Kind: kind, SubgroupSize: size, PublishedDecimals: ptr(9)}
	for i := range 30 {
		g := limits.Group{Decimals: 2, Material: string(rune('A' + i%3)), BreakBefore: i == 11}
		for range 1 + i%size {
			g.Readings = append(g.Readings, math.Round(100*(3+math.Exp(0.4*r.NormFloat64()+0.2*float64(i%2))))/100)
		}
		req.Groups = append(req.Groups, g)
	}
	req.Groups[4].Excluded, req.Groups[4].ExclusionReason = true, "spilt"
	return req
}

// alike compares two results but for their models.
func alike(t *testing.T, name string, got, want limits.Result) {
	t.Helper()
	got.Model, want.Model = chart.Model{BetweenSigma: got.Model.BetweenSigma}, chart.Model{BetweenSigma: want.Model.BetweenSigma}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("%s: got %+v, want %+v", name, got, want)
	}
}

func TestTransformedEqualsTransformingFirst(t *testing.T) {
	for i, kind := range readingKinds {
		for _, c := range []struct {
			transform chart.Transform
			f         func(float64) float64
		}{
			{chart.Transform{Kind: chart.Log, Offset: 0.5}, func(x float64) float64 { return math.Log(x + 0.5) }},
			{chart.Transform{Kind: chart.SquareRoot, Offset: -2}, func(x float64) float64 { return math.Sqrt(x - 2) }},
		} {
			req := positive(kind, uint64(i))
			first := mapReadings(req, c.f)
			before := req.Groups[0].Readings[0]
			req.Transform = c.transform
			res := mustCompute(t, req)
			if res.Model.Transform != c.transform || req.Groups[0].Readings[0] != before {
				t.Errorf("%s, %s: got model %+v", kind, c.transform.Kind, res.Model)
			}
			alike(t, kind.String()+", "+c.transform.Kind.String(), res, mustCompute(t, first))
		}
	}
}

func level(material string, reference, sigma float64) chart.Level {
	return chart.Level{Material: material, Reference: reference, Sigma: sigma}
}

func TestLevelsEqualStandardisingFirst(t *testing.T) {
	levels := []chart.Level{level("A", 4, 0.5), level("B", 4.5, 0.25), level("C", 3.75, 2)}
	for i, kind := range readingKinds {
		for _, given := range []bool{false, true} {
			req := positive(kind, uint64(10+i))
			if given {
				req.Centre, req.Sigma = ptr(0.0), ptr(1.0)
			}
			first := req
			first.Groups = append([]limits.Group(nil), req.Groups...)
			for j, g := range req.Groups {
				l := levels[j%3]
				first.Groups[j].Readings = nil
				for _, x := range g.Readings {
					first.Groups[j].Readings = append(first.Groups[j].Readings, decimal.Round((x-l.Reference)/l.Sigma, 12))
				}
			}
			req.Levels = levels
			res := mustCompute(t, req)
			if !reflect.DeepEqual(res.Model.Levels, levels) {
				t.Errorf("%s: got levels %+v", kind, res.Model.Levels)
			}
			alike(t, kind.String(), res, mustCompute(t, first))
		}
	}
}

// On the scale of roots a line below zero is absent in what is published exactly where the judge has none.
func TestLinesBelowTheFloorAreAbsent(t *testing.T) {
	for _, c := range []struct {
		centre, sigma   float64
		action, warning bool
	}{{3, 0.9, true, true}, {3, 1, true, true}, {3, 1.0001, false, true}, {3, 1.5, false, true}, {3, 1.6, false, false}} {
		res := mustCompute(t, limits.Request{Kind: chart.Individuals, Transform: chart.Transform{Kind: chart.SquareRoot}, Centre: &c.centre, Sigma: &c.sigma, PublishedDecimals: ptr(4)})
		action, warning := res.Location.LowerAction.Basis != chart.Absent, res.Location.LowerWarning.Basis != chart.Absent
		if action != c.action || warning != c.warning {
			t.Errorf("%g ± %g: action line %v, warning line %v, want %v, %v", c.centre, c.sigma, action, warning, c.action, c.warning)
		}
		j := judgeBy(t, res)
		at, _ := j.Scale(chart.Location, 1)
		if lines := j.Lines(chart.Location, at); (lines.LowerAction != nil) != action || (lines.LowerWarning != nil) != warning {
			t.Errorf("%g ± %g: the judge has %+v", c.centre, c.sigma, lines)
		}
	}
}

// Decimals of what was measured say nothing on another scale: four digits of sigma decide.
func TestPublishedDecimalsOnAnotherScale(t *testing.T) {
	req := limits.Request{Kind: chart.Individuals, Groups: singles(5.12345, 7, 4, 6)}
	req.Transform.Kind = chart.Log
	res := mustCompute(t, req)
	if got, want := res.PublishedDecimals, 4; got != want || res.SigmaUnrounded < 0.1 || res.SigmaUnrounded >= 1 {
		t.Errorf("got %d decimals for sigma %g, want %d", got, res.SigmaUnrounded, want)
	}
}

func TestScaleErrors(t *testing.T) {
	log := chart.Transform{Kind: chart.Log, Offset: 1}
	groups := func(materials ...string) []limits.Group {
		g := singles(5, -1, 4)
		for i, m := range materials {
			g[i].Material = m
		}
		return g
	}
	levels := []chart.Level{level("low", 1, 0.5)}
	for _, c := range []struct {
		name, field, says string
		req               limits.Request
	}{
		{"outside the domain", "groups[1].readings[0]", "-1: with the offset 1", limits.Request{Groups: groups(), Transform: log}},
		{"unknown material", "groups[1].material", `"high"`, limits.Request{Groups: groups("low", "high", "low"), Levels: levels}},
		{"no material", "groups[2].material", `""`, limits.Request{Groups: groups("low", "low"), Levels: levels}},
		{"levels and transform", "levels", "untransformed", limits.Request{Groups: groups(), Transform: log, Levels: levels}},
		{"offset without transform", "transform.offset", "only on a transformed scale", limits.Request{Groups: groups(), Transform: chart.Transform{Offset: 1}}},
		{"NaN offset", "transform.offset", "NaN", limits.Request{Groups: groups(), Transform: chart.Transform{Kind: chart.Log, Offset: math.NaN()}}},
		{"sigma of a level", "levels[0].sigma", "above 0", limits.Request{Groups: groups(), Levels: []chart.Level{level("low", 1, 0)}}},
		{"huge on the scale", "groups[0].readings[0]", "1e+100", limits.Request{Groups: groups("low", "low", "low"), Levels: []chart.Level{level("low", 1, 1e-250)}}},
		{"centre below the floor", "centre", "below 0", limits.Request{Groups: groups(), Transform: chart.Transform{Kind: chart.SquareRoot, Offset: 2}, Centre: ptr(-1.0)}},
	} {
		c.req.Kind = chart.Individuals
		if c.name == "huge on the scale" {
			c.req.Groups[0].Readings = []float64{1e90}
		}
		_, err := limits.Compute(c.req)
		var refused *limits.Error
		if !errors.As(err, &refused) || refused.Field != c.field || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: got %v, want field %s and %q", c.name, err, c.field, c.says)
		}
	}
	excluded := groups("low", "high", "low")
	excluded[1].Excluded, excluded[1].ExclusionReason = true, "other material"
	excluded[2].Readings = []float64{6}
	for _, req := range []limits.Request{{Groups: excluded, Transform: log, Sigma: ptr(1.0)}, {Groups: excluded, Levels: levels, Sigma: ptr(1.0)}} {
		req.Kind = chart.Individuals
		if res := mustCompute(t, req); res.N != 2 || len(res.Excluded) != 1 {
			t.Errorf("excluded: got %d groups used, %v", res.N, res.Excluded)
		}
	}
}
