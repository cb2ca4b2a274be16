package runlength_test

import (
	"context"
	"fmt"
	"math"
	"testing"
	"time"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength"
)

// digits is the relative accuracy at which a simulation is compared: four digits, far less than the exact methods give.
const digits = 1e-4

// besides reports what a simulation of accuracy digits would take, in the same process: a short one is timed, and its time
// grows with the number of runs, which is (SDRL/(ARL·digits))².
func besides(b *testing.B, r runlength.Request, each time.Duration) {
	b.StopTimer()
	r.Simulate, r.SimulationRuns, r.Seed = true, 5000, seed
	start := time.Now()
	rows := mustRows(b, r)
	took := time.Since(start)
	need := 0.0
	for _, row := range rows {
		need += math.Pow(row.SDRL/(row.ARL*digits), 2) / float64(row.Runs) / float64(len(rows))
	}
	simulation := took.Seconds() * need
	b.ReportMetric(simulation, "s-simulation-to-4-digits")
	b.ReportMetric(simulation/each.Seconds(), "x-faster")
}

func benchmark(b *testing.B, r runlength.Request) {
	b.Helper()
	rows := mustRows(b, r)
	b.ResetTimer()
	for range b.N {
		mustRows(b, r)
	}
	each := b.Elapsed() / time.Duration(b.N)
	b.ReportMetric(1e12*rows[0].ErrorBound/rows[0].ARL, "e-12-relative-error-bound")
	besides(b, r, each)
}

// BenchmarkZoneSets must stay under 5 ms.
func BenchmarkZoneSets(b *testing.B) {
	for _, id := range []string{"shewhart-1931", "western-electric-1956", "harmonised-1995", "action-warning"} {
		b.Run(id, func(b *testing.B) {
			benchmark(b, runlength.Request{Location: runlength.Trace{Rules: mustSet(b, id)}, Ends: rules.Look})
		})
	}
}

// BenchmarkNelson is all eight tests at one shift: under 100 ms.
func BenchmarkNelson(b *testing.B) {
	benchmark(b, runlength.Request{Location: runlength.Trace{Rules: mustSet(b, "nelson-1984")}, Ends: rules.Look, Shifts: []float64{0}})
}

// BenchmarkGrowth adds the eight tests one by one.
func BenchmarkGrowth(b *testing.B) {
	specs := mustSet(b, "nelson-1984")
	for n := 1; n <= len(specs); n++ {
		b.Run(fmt.Sprintf("rules=%d", n), func(b *testing.B) {
			r := runlength.Request{Location: runlength.Trace{Rules: specs[:n]}, Ends: rules.Look}
			answer, err := runlength.Compute(context.Background(), r)
			if err != nil {
				b.Fatal(err)
			}
			b.ReportMetric(float64(answer.States), "states")
			benchmark(b, r)
		})
	}
}

// BenchmarkAllSubsets is the 255 subsets of the eight tests, in control and at one shift, with the averages and sums
// beside them: under 15 s.
func BenchmarkAllSubsets(b *testing.B) {
	r := runlength.Request{Location: runlength.Trace{Rules: mustSet(b, "nelson-1984")}, Ends: rules.Look}
	for range b.N {
		if _, err := runlength.Choose(context.Background(), runlength.ChoiceRequest{Request: r, InControlARLMin: 150, Shift: 1}); err != nil {
			b.Fatal(err)
		}
	}
	each := b.Elapsed() / time.Duration(b.N)
	r.Shifts = []float64{0, 1} // the simulation of one set stands for each of the subsets
	besides(b, r, each/255)
}

// BenchmarkAveragesAndSums solves integral equations.
func BenchmarkAveragesAndSums(b *testing.B) {
	asymptotic := ewma(0.2, 2.962)
	asymptotic.Asymptotic = true
	for name, spec := range map[string]rules.Spec{"EWMA": asymptotic, "widening EWMA": ewma(0.2, 2.962), "CUSUM": cusum(0.5, 5, 0)} {
		b.Run(name, func(b *testing.B) { benchmark(b, runlength.Request{Location: one(spec)}) })
	}
}

// BenchmarkIndividuals carries the moving range along.
func BenchmarkIndividuals(b *testing.B) {
	upper := on(beyond(1, 1, 3), rules.UpperOnly)
	for _, id := range []string{"shewhart-1931", "western-electric-1956", "nelson-1984"} {
		b.Run(id, func(b *testing.B) {
			benchmark(b, runlength.Request{Kind: chart.Individuals, Location: runlength.Trace{Rules: mustSet(b, id)}, Dispersion: one(upper), Ends: rules.Look})
		})
	}
}
