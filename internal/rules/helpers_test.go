package rules_test

import (
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// hit is a rules.Hit with its window and first counting point as indices from the start of the series.
type hit struct {
	point       int
	side        rules.Side
	windowFirst int
	firstCounts int
}

// only is a hit of a rule about one point.
func only(point int, side rules.Side) hit { return hit{point, side, point, point} }

func ptr(x float64) *float64 { return &x }

// plain is a trace with sigma lines at the usual multiples.
func plain(centre, sigma float64) chart.Trace { return chart.Trace{Centre: &centre, Sigma: &sigma} }

func mustCompile(tb testing.TB, trace chart.Trace, places int, specs ...rules.Spec) *rules.Plan {
	tb.Helper()
	for i := range specs {
		if specs[i].ID == "" {
			specs[i].ID = string(rune('a' + i))
		}
		if specs[i].Consequence == 0 {
			specs[i].Consequence = rules.Act
		}
	}
	plan, err := rules.Compile(trace, places, specs)
	if err != nil {
		tb.Fatal(err)
	}
	return plan
}

func collectInto(hits *[]hit, offset int) func(rules.Hit) {
	return func(h rules.Hit) {
		point := h.Point + offset
		*hits = append(*hits, hit{point, h.Side, point - h.WindowBack, point - h.FirstBack})
	}
}

// judged gives the hits of one rule on a trace with centre 0 and sigma 1, nothing rounded.
func judged(tb testing.TB, spec rules.Spec, xs ...float64) (hits []hit) {
	tb.Helper()
	plan := mustCompile(tb, plain(0, 1), decimal.Unrounded, spec)
	plan.Judge(plan.Start(false), xs, nil, collectInto(&hits, 0))
	return hits
}

func wantHits(tb testing.TB, got []hit, want ...hit) {
	tb.Helper()
	if !slices.Equal(got, want) {
		tb.Errorf("hits (point, side, window first, first counting):\n got %v\nwant %v", got, want)
	}
}

func beyond(k, m int, z float64) rules.Spec { return rules.Spec{Kind: rules.Beyond, K: k, M: m, Z: z} }
func sameSide(n int) rules.Spec             { return rules.Spec{Kind: rules.SameSide, N: n} }
func trend(n int) rules.Spec                { return rules.Spec{Kind: rules.Trend, N: n} }
func alternating(n int) rules.Spec          { return rules.Spec{Kind: rules.Alternating, N: n} }
func within(n int, z float64) rules.Spec    { return rules.Spec{Kind: rules.Within, N: n, Z: z} }
func outside(n int, z float64) rules.Spec   { return rules.Spec{Kind: rules.Outside, N: n, Z: z} }
func span(z float64) rules.Spec             { return rules.Spec{Kind: rules.Span, Z: z} }
func cusum(k, h float64) rules.Spec {
	return rules.Spec{Kind: rules.CUSUM, Reference: k, Interval: h}
}
func ewma(lambda, limit float64) rules.Spec {
	return rules.Spec{Kind: rules.EWMA, Lambda: lambda, Limit: limit}
}
func onSides(s rules.Spec, sides rules.Sides) rules.Spec { s.Sides = sides; return s }
func line(kind rules.LineKind) rules.Spec {
	return rules.Spec{Kind: rules.BeyondLine, Line: kind}
}
