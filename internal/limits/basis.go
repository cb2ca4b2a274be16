package limits

import (
	"fmt"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Exclusion is a group left out of the estimates, by its index in the request.
type Exclusion struct {
	Group  int
	Reason string
}

// within is the scatter inside one subgroup of at least two readings.
type within struct {
	n       int
	spread  float64 // range
	squares float64 // Σ(x - x̄)²
}

// run is the mean of one analytical run.
type run struct {
	n    int
	mean float64
}

// basis is the checked material that estimates rest on.
type basis struct {
	kind     chart.Kind
	groups   int       // used
	readings []float64 // of all groups used, in order
	// decimals is the largest number of decimals as written; places holds every reading exactly, see exactPlaces.
	decimals, places int
	excluded         []Exclusion
	// movingRanges of individuals, and the number of unbroken chains that gave at least one of them.
	movingRanges []float64
	chains       int
	within       []within
	// runs of run means, those of one reading included.
	runs []run
}

// checkGroups refuses what is wrong in the groups, whatever kind of readings they are.
func (r *Request) checkGroups() error {
	total := 0
	for i := range r.Groups {
		if err := r.checkGroup(i); err != nil {
			return err
		}
		total += len(r.Groups[i].Readings)
	}
	if total > ReadingsMax {
		return refuse("groups", fmt.Sprintf("%d readings", total), "more than the limit of %d readings in all", ReadingsMax)
	}
	return nil
}

// gather takes up the groups that are used. Groups of one reading in a chart of means tell about the centre, and about
// what varies between runs: alone, a reading says nothing of the scatter within its subgroup.
func (r *Request) gather() *basis {
	b := &basis{kind: r.Kind}
	for i := range r.Groups {
		g := &r.Groups[i]
		if g.Excluded {
			b.excluded = append(b.excluded, Exclusion{i, g.ExclusionReason})
			continue
		}
		b.groups++
		b.readings = append(b.readings, g.Readings...)
		b.decimals = max(b.decimals, decimalsOf(g))
		for _, x := range g.Readings {
			if b.places != decimal.Unrounded {
				b.places = atLeastPlaces(x, b.places)
			}
		}
	}
	switch r.Kind {
	case chart.Individuals:
		b.takeMovingRanges(r.Groups)
	case chart.RunMeans:
		b.takeRuns(r.Groups)
		b.takeWithin(r.Groups)
	case chart.XbarR, chart.XbarS:
		b.takeWithin(r.Groups)
	}
	return b
}

// decimalsOf gives the decimals of a group as written, or of the shortest forms, bounded by what float64 carries.
func decimalsOf(g *Group) int {
	decimals := g.Decimals
	if decimals == DecimalsUnknown {
		for _, x := range g.Readings {
			decimals = max(decimals, decimal.Places(x))
		}
	}
	return min(decimals, decimal.PlacesMax)
}

// takeMovingRanges takes the absolute differences of neighbours, never across an exclusion or a break.
func (b *basis) takeMovingRanges(groups []Group) {
	joined, inChain := false, false
	previous := 0.0
	for i := range groups {
		g := &groups[i]
		if g.Excluded {
			joined, inChain = false, false
			continue
		}
		x := g.Readings[0]
		if joined && !g.BreakBefore {
			b.movingRanges = append(b.movingRanges, difference(max(x, previous), min(x, previous), b.places))
			if !inChain {
				b.chains++
			}
			inChain = true
		} else {
			inChain = false
		}
		previous, joined = x, true
	}
}

func (b *basis) takeRuns(groups []Group) {
	for i := range groups {
		if g := &groups[i]; !g.Excluded {
			b.runs = append(b.runs, run{len(g.Readings), decimal.Mean(g.Readings, decimal.Unrounded)})
		}
	}
}

func (b *basis) takeWithin(groups []Group) {
	for i := range groups {
		g := &groups[i]
		if g.Excluded || len(g.Readings) < 2 {
			continue
		}
		_, squares := deviations(g.Readings, b.places)
		b.within = append(b.within, within{len(g.Readings), rangeOf(g.Readings, b.places), squares})
	}
}

// scatters counts the statistics that sigma can be estimated from.
func (b *basis) scatters() int {
	if b.kind == chart.Individuals {
		return len(b.movingRanges)
	}
	return len(b.within)
}
