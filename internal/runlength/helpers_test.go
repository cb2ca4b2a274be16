package runlength_test

import (
	"context"
	"fmt"
	"math"
	"testing"

	"limitary/internal/rules"
	"limitary/internal/runlength"
)

// list gives rules ids and the consequence ACT.
func list(specs ...rules.Spec) []rules.Spec {
	for i := range specs {
		specs[i].ID = fmt.Sprintf("rule-%d", i+1)
		specs[i].Consequence = rules.Act
	}
	return specs
}

func beyond(k, m int, z float64) rules.Spec { return rules.Spec{Kind: rules.Beyond, K: k, M: m, Z: z} }
func sameSide(n int) rules.Spec             { return rules.Spec{Kind: rules.SameSide, N: n} }
func trend(n int) rules.Spec                { return rules.Spec{Kind: rules.Trend, N: n} }
func alternating(n int) rules.Spec          { return rules.Spec{Kind: rules.Alternating, N: n} }
func within(n int, z float64) rules.Spec    { return rules.Spec{Kind: rules.Within, N: n, Z: z} }
func outside(n int, z float64) rules.Spec   { return rules.Spec{Kind: rules.Outside, N: n, Z: z} }
func ewma(lambda, limit float64) rules.Spec {
	return rules.Spec{Kind: rules.EWMA, Lambda: lambda, Limit: limit}
}
func cusum(k, h, start float64) rules.Spec {
	return rules.Spec{Kind: rules.CUSUM, Reference: k, Interval: h, HeadStart: start}
}

func on(s rules.Spec, side rules.Sides) rules.Spec {
	s.Sides = side
	return s
}

// mustSet gives the rules of a published set.
func mustSet(tb testing.TB, id string) []rules.Spec {
	tb.Helper()
	set, ok := rules.SetByID(id)
	if !ok {
		tb.Fatalf("there is no set %s", id)
	}
	return set.Rules
}

// mustRow answers a request with one row.
func mustRow(tb testing.TB, r runlength.Request) runlength.Row {
	tb.Helper()
	return mustRows(tb, r)[0]
}

func mustRows(tb testing.TB, r runlength.Request) []runlength.Row {
	tb.Helper()
	answer, err := runlength.Compute(context.Background(), r)
	if err != nil {
		tb.Fatalf("Compute: %v", err)
	}
	return answer.Rows
}

func one(specs ...rules.Spec) runlength.Trace { return runlength.Trace{Rules: list(specs...)} }

// near fails where got differs from want by more than a relative tolerance.
func near(tb testing.TB, what string, got, want, relative float64) {
	tb.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		tb.Errorf("%s: got %.12g, want %.12g to %.1g (off by %.2g)", what, got, want, relative, got/want-1)
	}
}

// phi is the standard normal distribution function.
func phi(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }
