package judge_test

import (
	"math/rand/v2"
	"testing"
	"time"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
)

// BenchmarkSeries judges 100 000 single values on both traces of an individuals chart beside a plain sum over them, with
// published decimals and with none. The fastest of each counts.
func BenchmarkSeries(b *testing.B) {
	const points = 100_000
	for name, places := range map[string]int{"published to 4 decimals": 4, "nothing rounded": decimal.Unrounded} {
		b.Run(name, func(b *testing.B) {
			r := rand.New(rand.NewPCG(1, 1))
			xs := make([]float64, points)
			for i := range xs {
				xs[i] = decimal.Round(10+r.NormFloat64(), 3)
			}
			j := mustNew(b, judge.Limits{Kind: chart.Individuals, SubgroupSize: 1, Places: places, Traces: [chart.Roles]*judge.Trace{
				trace(10, 1, set(b, "nelson-1984")...), trace(1.128, 0.853, beyond(1, 1, 3))}})
			b.ReportAllocs()
			total, hits := 0.0, 0
			judged, sum := time.Hour, time.Hour
			for b.Loop() {
				start := b.Elapsed()
				hits += len(j.Series(xs))
				middle := b.Elapsed()
				total += sumOf(xs)
				judged, sum = min(judged, middle-start), min(sum, b.Elapsed()-middle)
			}
			if hits == 0 || total == 0 {
				b.Fatal("nothing was judged")
			}
			b.ReportMetric(float64(judged)/points, "ns/value")
			b.ReportMetric(float64(judged)/float64(sum), "judge/sum")
		})
	}
}

// sumOf is outside the benchmark's loop, whose body is kept from being optimised.
func sumOf(xs []float64) (s float64) {
	for _, x := range xs {
		s += x
	}
	return s
}

// BenchmarkJudgeOneResult is what one posted subgroup costs, all eight rules on the location trace.
func BenchmarkJudgeOneResult(b *testing.B) {
	j := mustNew(b, judge.Limits{Kind: chart.XbarR, SubgroupSize: 4, Places: 4, ProcessSigma: 2, Traces: [chart.Roles]*judge.Trace{
		trace(10, 1, set(b, "nelson-1984")...), trace(4.1178, 1.7596, beyond(1, 1, 3))}})
	r := rand.New(rand.NewPCG(1, 2))
	pts := make([]judge.Point, 512)
	for i := range pts {
		for range 4 - i%8/7 { // every eighth lacks a reading
			pts[i].Readings = append(pts[i].Readings, decimal.Round(10+2*r.NormFloat64(), 3))
		}
	}
	st := j.NewState()
	var v judge.Verdict
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		j.Judge(st, pts[i%len(pts)], &v)
	}
}
