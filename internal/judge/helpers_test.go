package judge_test

import (
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

func ptr(x float64) *float64 { return &x }

func mustNew(tb testing.TB, l judge.Limits) *judge.Judge {
	tb.Helper()
	j, err := judge.New(l)
	if err != nil {
		tb.Fatal(err)
	}
	return j
}

func trace(centre, sigma float64, specs ...rules.Spec) *judge.Trace {
	for i := range specs {
		if specs[i].ID == "" {
			specs[i].ID = string(rune('a' + i))
		}
		if specs[i].Consequence == 0 {
			specs[i].Consequence = rules.Act
		}
	}
	return &judge.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: specs}
}

func set(tb testing.TB, id string) []rules.Spec {
	tb.Helper()
	s, ok := rules.SetByID(id)
	if !ok {
		tb.Fatalf("no set %s", id)
	}
	return s.Rules
}

func beyond(k, m int, z float64) rules.Spec { return rules.Spec{Kind: rules.Beyond, K: k, M: m, Z: z} }
func sameSide(n int) rules.Spec             { return rules.Spec{Kind: rules.SameSide, N: n} }
func trend(n int) rules.Spec                { return rules.Spec{Kind: rules.Trend, N: n} }

// given plots statistics as they are, nothing rounded.
func given(centre, sigma float64, specs ...rules.Spec) judge.Limits {
	return judge.Limits{Places: decimal.Unrounded, Traces: [chart.Roles]*judge.Trace{trace(centre, sigma, specs...), nil}}
}

func measured(readings ...float64) judge.Point { return judge.Point{Readings: readings} }

func less(x float64) judge.Point {
	return judge.Point{Readings: []float64{x}, Bounds: []decimal.Bound{decimal.Below}}
}

func greater(x float64) judge.Point {
	return judge.Point{Readings: []float64{x}, Bounds: []decimal.Bound{decimal.Above}}
}

// verdictsOf judges points one after the other; every verdict is a copy.
func verdictsOf(j *judge.Judge, st *judge.State, points ...judge.Point) (out []judge.Verdict) {
	for _, pt := range points {
		var v judge.Verdict
		j.Judge(st, pt, &v)
		out = append(out, v)
	}
	return out
}

func standings(verdicts []judge.Verdict) (out []judge.Standing) {
	for _, v := range verdicts {
		out = append(out, v.Standing)
	}
	return out
}
