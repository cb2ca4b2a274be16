package simulate

import (
	"math"

	"limitary/internal/rules"
	"limitary/internal/runlength/effort"
)

// Rates are what the judge says of a long run of points that no signal interrupts, per point.
type Rates struct {
	// Flagged is the part of points at which a rule completes; Opened the number of signals, episodes of one rule on one
	// side of one trace, that begin at a point.
	Flagged, Opened                           float64
	FlaggedStandardError, OpenedStandardError float64
	// Rules has the rates of each rule, by trace.
	Rules [2][]RuleRates
}

// RuleRates are those of one rule, without standard errors.
type RuleRates struct{ Flagged, Opened float64 }

// batches is the number of stretches whose spread gives the standard errors; within one, points depend on each other.
const batches = 50

// Long judges points points, after as many again of one batch that are not counted, and gives the rates.
func Long(c Chart, points int, seed uint64, meter *effort.Meter) (Rates, error) {
	s := newSimulation(c, seed)
	s.reset()
	if s.WarmUp > 0 {
		s.Points.Shift()
	}
	size := max(points/batches/blockPoints, 1) * blockPoints
	var flagged, opened [batches + 1]float64
	var r Rates
	for i, p := range s.plans() {
		if p != nil {
			r.Rules[i] = make([]RuleRates, len(p.Specs()))
		}
	}
	counted := 1 / float64(batches*size)
	last := map[[3]int]int{} // the last point each rule completed at, by trace, rule and side
	for at := 0; at < (batches+1)*size; at += blockPoints {
		if err := meter.Spend(blockPoints * pointUnits); err != nil {
			return Rates{}, err
		}
		missing := s.Points.Fill(s.random, s.location[:], s.dispersion[:])
		var hit [blockPoints]bool
		take := func(trace, shift int) func(rules.Hit) {
			return func(h rules.Hit) {
				i, key := h.Point+shift, [3]int{trace, h.Rule, int(h.Side)}
				before, had := last[key]
				fresh := !had || before < at+i-1
				if fresh {
					opened[at/size]++
				}
				if one := &r.Rules[trace][h.Rule]; at >= size {
					one.Flagged += counted
					if fresh {
						one.Opened += counted
					}
				}
				last[key] = at + i
				hit[i] = true
			}
		}
		if s.Location != nil {
			s.Location.Judge(s.states[0], s.location[:], nil, take(0, 0))
		}
		if s.Dispersion != nil {
			s.Dispersion.Judge(s.states[1], s.dispersion[:blockPoints-missing], nil, take(1, missing))
		}
		for _, h := range hit {
			if h {
				flagged[at/size]++
			}
		}
	}
	r.Flagged, r.FlaggedStandardError = batchMean(flagged[1:], float64(size))
	r.Opened, r.OpenedStandardError = batchMean(opened[1:], float64(size))
	return r, nil
}

func batchMean(counts []float64, size float64) (mean, standardError float64) {
	n, squares := float64(len(counts)), 0.0
	for _, c := range counts {
		mean += c / size / n
	}
	for _, c := range counts {
		squares += (c/size - mean) * (c/size - mean)
	}
	return mean, math.Sqrt(squares / (n - 1) / n)
}
