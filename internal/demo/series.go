package demo

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"time"

	pb "limitary/api/limitary/v1"
)

const (
	// Seed is the seed of all numbers.
	Seed = 20260302
	// noiseMax is where noise is cut, in standard deviations.
	noiseMax = 2.6
	// slotsApart is the time between the runs of one day.
	slotsApart = 3 * time.Hour
)

// series describes how the results of one chart, or of one lot of it, come about.
type series struct {
	chart *pb.Chart
	// prefix begins every source id; it is unique within the demo.
	prefix string
	// stream picks the numbers, so that a change to one series leaves the others as they are. It was chosen so that the
	// set-up gives a sigma near the true one: with 30 to 40 results it often does not, which would be another story.
	stream uint64
	// source is the system that posts, lot and material what is measured, by whom and on what.
	source, lot, material, instrument string
	analysts                          []string
	// position is the place of the control in its run.
	position int32
	// The series has perDay results a day on each of days days; the last of them ends ago days before the base.
	perDay, days, ago int
	// every is how many days later the next day with results comes; 0 is one. Where days are not in a row, a result sums
	// up many runs and has none of its own.
	every int
	// setup results come first, posted as such.
	setup int
	// overlap results come first, measured beside the lot before.
	overlap int

	// centre of the process, and standard deviations between and within subgroups.
	centre, between, within float64
	decimals                int
	// level draws the level of a result, and spread is the standard deviation within a subgroup at it; nil takes the
	// process as it is described above.
	level  func(rng *rand.Rand) float64
	spread func(level float64) float64
	// counted draws a count in place of readings.
	counted countOf
	// moves displaces the process at result i.
	moves []move
	// write puts a reading into words; nil writes it with the decimals.
	write func(i int, x float64) string
	// short lists subgroups that lost all readings but the first.
	short map[int]bool
	// apart displaces the last reading of a subgroup from the others.
	apart map[int]float64
}

// move displaces the process at result i by what it gives.
type move func(i int) float64

// shift moves the process from result at on.
func shift(at int, by float64) move {
	return func(i int) float64 {
		if i < at {
			return 0
		}
		return by
	}
}

// drift moves the process a little further with each result from at on.
func drift(at int, each float64) move {
	return func(i int) float64 { return float64(max(0, float64(i-at+1)) * each) }
}

// once displaces a single result.
func once(at int, by float64) move {
	return func(i int) float64 {
		if i != at {
			return 0
		}
		return by
	}
}

// count is the number of results of the series.
func (s *series) count() int { return s.perDay * s.days }

// track names the lot of the series' track; it is empty where lots are not tracks.
func (s *series) track() string {
	if s.chart.LotsAreTracks {
		return s.lot
	}
	return ""
}

// daysBack is how many days before the base result i belongs to.
func (s *series) daysBack(i int) int { return s.ago + (s.days-1-i/s.perDay)*max(1, s.every) }

// run names the analytical run of result i, if it has one.
func (s *series) run(i int) string {
	if s.every > 1 {
		return ""
	}
	return fmt.Sprintf("%s-%03d", s.instrument, s.runNumber(i))
}

// runNumber numbers the analytical runs of an instrument, so that charts of one instrument share them: the last run before
// the base is number runsMax.
func (s *series) runNumber(i int) int {
	const runsMax = 900
	const perDayMax = 3
	return runsMax - s.daysBack(i)*perDayMax - (s.perDay - 1 - i%s.perDay)
}

// at is when result i was measured: the last at the base itself, runs three hours apart, the controls of a run some
// minutes apart.
func (s *series) at(base time.Time, i int) time.Time {
	back := time.Duration(s.daysBack(i))*day + time.Duration(s.perDay-1-i%s.perDay)*slotsApart
	return base.Add(-back - time.Duration(20-s.position*4)*time.Minute)
}

// before is a moment before result i and after the one before it.
func (s *series) before(base time.Time, i int) time.Time { return s.at(base, i).Add(-time.Minute) }

// id is the source id of result i.
func (s *series) id(i int) string { return fmt.Sprintf("%s-%04d", s.prefix, i+1) }

// results gives all results of the series, as they are posted. The same base gives the same results.
func (s *series) results(base time.Time) []*pb.Result {
	rng := rand.New(rand.NewPCG(Seed, s.stream))
	out := make([]*pb.Result, s.count())
	for i := range out {
		out[i] = s.result(base, i, rng)
	}
	return out
}

func (s *series) result(base time.Time, i int, rng *rand.Rand) *pb.Result {
	level := s.drawLevel(rng)
	for _, m := range s.moves {
		level += m(i)
	}
	r := &pb.Result{
		Chart: s.chart.Name, Source: s.source, SourceId: s.id(i), MeasuredAt: s.at(base, i).Format(time.RFC3339),
		Lot: s.lot, RunId: s.run(i), Position: s.position,
		Role: pb.ResultRole_RESULT_ROLE_ROUTINE, Unit: s.chart.Unit, Material: s.material, Instrument: s.instrument,
		Analyst: s.analysts[rng.IntN(len(s.analysts))],
	}
	switch {
	case i < s.setup:
		r.Role = pb.ResultRole_RESULT_ROLE_SETUP
	case i < s.overlap:
		r.Role = pb.ResultRole_RESULT_ROLE_OVERLAP
	}
	if s.counted != nil {
		r.Count = s.counted(rng, level)
		return r
	}
	r.Readings = s.readings(i, level, rng)
	return r
}

// drawLevel draws where the process is, before anything has moved it. The conversions keep products and sums apart on
// every processor.
func (s *series) drawLevel(rng *rand.Rand) float64 {
	if s.level != nil {
		return s.level(rng)
	}
	return s.centre + float64(s.between*noise(rng))
}

func (s *series) readings(i int, level float64, rng *rand.Rand) []string {
	within, n := s.within, int(s.chart.SubgroupSize)
	if s.spread != nil {
		within = s.spread(level)
	}
	out := make([]string, n)
	for k := range out {
		x := level
		if n > 1 {
			x += float64(within * noise(rng))
		}
		if k == n-1 {
			x += s.apart[i]
		}
		out[k] = s.text(i, x)
	}
	if s.short[i] {
		out = out[:1]
	}
	return out
}

// text writes a reading with the decimals of the series.
func (s *series) text(i int, x float64) string {
	if s.write != nil {
		return s.write(i, x)
	}
	return fixed(x, s.decimals)
}

func fixed(x float64, decimals int) string {
	scale := math.Pow(10, float64(decimals))
	return strconv.FormatFloat(math.Round(x*scale)/scale+0, 'f', decimals, 64) // + 0 takes the sign off a zero
}

// noise is a standard normal number within noiseMax.
func noise(rng *rand.Rand) float64 {
	for {
		if z := rng.NormFloat64(); math.Abs(z) <= noiseMax {
			return z
		}
	}
}
