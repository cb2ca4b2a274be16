package rules_test

import (
	"math/rand/v2"
	"testing"
	"time"

	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// BenchmarkNelson1e6 judges a million normal points by all eight rules of 1984 on one core, beside a plain sum over the
// same slice, and reports how many sums a judgement costs.
func BenchmarkNelson1e6(b *testing.B) {
	const points = 1_000_000
	r := rand.New(rand.NewPCG(1984, 1))
	xs := make([]float64, points)
	for i := range xs {
		xs[i] = decimal.Round(10+r.NormFloat64(), 4)
	}
	set, _ := rules.SetByID("nelson-1984")
	plan := mustCompile(b, plain(10, 1), 4, set.Rules...)
	st, hits, total := plan.Start(false), 0, 0.0
	count := func(rules.Hit) { hits++ }

	sumOnce := func() {
		s := 0.0
		for _, x := range xs {
			s += x
		}
		total += s
	}
	judgeOnce := func() {
		plan.Reset(st, false)
		plan.Judge(st, xs, nil, count)
	}
	// The two alternate inside one run, so that both meet the same machine, and the fastest of each counts, so that
	// other work on it does not.
	b.ReportAllocs()
	judge, sum := time.Hour, time.Hour
	for b.Loop() {
		start := b.Elapsed()
		judgeOnce()
		middle := b.Elapsed()
		sumOnce()
		judge, sum = min(judge, middle-start), min(sum, b.Elapsed()-middle)
	}
	if hits == 0 || total == 0 {
		b.Fatal("nothing was judged")
	}
	b.ReportMetric(float64(judge)/points, "ns/point")
	b.ReportMetric(float64(sum)/points, "sum-ns/point")
	b.ReportMetric(float64(judge)/float64(sum), "judge/sum")
}

// BenchmarkOnePoint is what a posted result costs: one call, one point.
func BenchmarkOnePoint(b *testing.B) {
	for _, id := range []string{"action-warning", "nelson-1984"} {
		b.Run(id, func(b *testing.B) {
			r := rand.New(rand.NewPCG(1984, 2))
			xs := make([]float64, 4096)
			for i := range xs {
				xs[i] = 10 + r.NormFloat64()
			}
			set, _ := rules.SetByID(id)
			plan := mustCompile(b, plain(10, 1), 4, set.Rules...)
			st := plan.Start(false)
			b.ReportAllocs()
			for i := 0; b.Loop(); i++ {
				at := i % len(xs)
				plan.Judge(st, xs[at:at+1], nil, func(rules.Hit) {})
			}
		})
	}
}

// TestJudgeAllocatesNothing holds the promise of Judge's comment.
func TestJudgeAllocatesNothing(t *testing.T) {
	set, _ := rules.SetByID("nelson-1984")
	specs := append(set.Rules, rules.Spec{ID: "e", Kind: rules.EWMA, Lambda: 0.2, Limit: 3}, rules.Spec{ID: "c", Kind: rules.CUSUM, Reference: 0.5, Interval: 4})
	plan := mustCompile(t, plain(10, 1), 4, specs...)
	st, hits := plan.Start(false), 0
	r := rand.New(rand.NewPCG(3, 3))
	xs := make([]float64, 1000)
	for i := range xs {
		xs[i] = 10 + 2*r.NormFloat64()
	}
	count := func(rules.Hit) { hits++ }
	if got := testing.AllocsPerRun(10, func() { plan.Judge(st, xs, nil, count) }); got != 0 {
		t.Errorf("%v allocations for 1000 points", got)
	}
	if hits == 0 {
		t.Error("no hits; the test shows little")
	}
}
