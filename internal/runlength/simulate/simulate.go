// Package simulate finds run lengths by letting the judge judge random points: for combinations that no exact method
// reaches, and as a check on those that one does. It uses the compiled rules of package rules, so what it finds is what
// the judge does, to a standard error that comes with every figure.
//
// A seed gives the same answer on every machine of one architecture.
package simulate

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"

	"limitary/internal/rules"
	"limitary/internal/runlength/effort"
)

// Points gives the points of a chart one after another. It holds the state of one chart.
type Points interface {
	// Reset starts a new segment, in control where that is asked for.
	Reset(inControl bool)
	// Shift lets the mean and sigma change at the next point.
	Shift()
	// Fill gives as many points as location holds, and those of the dispersion trace, of which the first few of a segment
	// may be missing: dispersion[i] belongs to location[i+missing].
	Fill(r *rand.Rand, location, dispersion []float64) (missing int)
}

// Chart is what is judged. A plan is nil where its trace is not judged.
type Chart struct {
	Location, Dispersion *rules.Plan
	Points               Points
	// HeadStart begins CUSUMs at their head start.
	HeadStart bool
	// WarmUp is the number of points in control, without a signal, before the run begins; 0 begins with a fresh chart.
	WarmUp int
}

// RunMax bounds one run; RunsMin is the least number of runs that gives a standard error.
const (
	RunMax  = 50_000_000
	RunsMin = 100
	// pointUnits is the work of drawing and judging one point, in units of package effort.
	pointUnits = 40
)

// Lengths are simulated run lengths in ascending order.
type Lengths struct {
	Sorted []float64
}

// Mean gives the average and its standard error.
func (l *Lengths) Mean() (mean, standardError float64) {
	n := float64(len(l.Sorted))
	for _, x := range l.Sorted {
		mean += x / n
	}
	return mean, l.SD() / math.Sqrt(n)
}

// SD gives the standard deviation.
func (l *Lengths) SD() float64 {
	n, mean, squares := float64(len(l.Sorted)), 0.0, 0.0
	for _, x := range l.Sorted {
		mean += x / n
	}
	for _, x := range l.Sorted {
		squares += (x - mean) * (x - mean)
	}
	return math.Sqrt(squares / (n - 1))
}

// Quantile gives the least length that at least a part p of the runs does not exceed.
func (l *Lengths) Quantile(p float64) float64 {
	i := int(math.Ceil(p*float64(len(l.Sorted)))) - 1
	return l.Sorted[min(max(i, 0), len(l.Sorted)-1)]
}

// Within gives the part of runs of at most n points.
func (l *Lengths) Within(n int) float64 {
	i, _ := slices.BinarySearch(l.Sorted, float64(n)+0.5)
	return float64(i) / float64(len(l.Sorted))
}

// pilotRuns are made and thrown away to tell how long runs are.
const pilotRuns = 50

// Run simulates runs run lengths, or as many as the points allow, but no fewer than RunsMin.
func Run(c Chart, runs int, pointsMax int64, seed uint64, meter *effort.Meter) (*Lengths, error) {
	s := newSimulation(c, seed)
	pilot := 0.0
	for range pilotRuns {
		n, err := s.run(meter)
		if err != nil {
			return nil, err
		}
		pilot += float64(n+c.WarmUp) / pilotRuns
	}
	runs = max(RunsMin, min(runs, int(float64(pointsMax)/pilot)))
	out := &Lengths{Sorted: make([]float64, runs)}
	for i := range out.Sorted {
		n, err := s.run(meter)
		if err != nil {
			return nil, err
		}
		out.Sorted[i] = float64(n)
	}
	slices.Sort(out.Sorted)
	return out, nil
}

// blockPoints is the number of points judged at a time.
const blockPoints = 64

type simulation struct {
	Chart
	random               *rand.Rand
	states               [2]*rules.State
	location, dispersion [blockPoints]float64
}

func newSimulation(c Chart, seed uint64) *simulation {
	s := &simulation{Chart: c, random: rand.New(rand.NewPCG(seed, 0x6c696d6974617279))}
	for i, p := range s.plans() {
		if p != nil {
			s.states[i] = p.Start(c.HeadStart)
		}
	}
	return s
}

func (s *simulation) plans() [2]*rules.Plan { return [2]*rules.Plan{s.Location, s.Dispersion} }

func (s *simulation) reset() {
	s.Points.Reset(s.WarmUp > 0)
	for i, p := range s.plans() {
		if p != nil {
			p.Reset(s.states[i], s.HeadStart)
		}
	}
}

// run gives the length of one run.
func (s *simulation) run(meter *effort.Meter) (int, error) {
	s.reset()
	for warmed := 0; warmed < s.WarmUp; {
		n := min(s.WarmUp-warmed, blockPoints)
		if err := meter.Spend(int64(n * pointUnits)); err != nil {
			return 0, err
		}
		if warmed += n; s.block(n) < n {
			s.reset() // a signal: the warm-up begins anew
			warmed = 0
		}
	}
	if s.WarmUp > 0 {
		s.Points.Shift()
	}
	for length, n := 0, 8; ; n = min(2*n, blockPoints) {
		if err := meter.Spend(int64(n * pointUnits)); err != nil {
			return 0, err
		}
		at := s.block(n)
		if at < n {
			return length + at + 1, nil
		}
		if length += n; length > RunMax {
			return 0, ErrTooLong
		}
	}
}

// block judges n points and gives the index of the first signal, n if there is none.
func (s *simulation) block(n int) int {
	missing := s.Points.Fill(s.random, s.location[:n], s.dispersion[:n])
	first := n
	if s.Location != nil {
		s.Location.Judge(s.states[0], s.location[:n], nil, func(h rules.Hit) { first = min(first, h.Point) })
	}
	if s.Dispersion != nil && missing < n {
		s.Dispersion.Judge(s.states[1], s.dispersion[:n-missing], nil, func(h rules.Hit) { first = min(first, h.Point+missing) })
	}
	return first
}

// ErrTooLong says that a run passed RunMax points without a signal.
var ErrTooLong = errors.New("simulate: runs of this chart are too long to simulate")
