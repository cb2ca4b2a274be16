package chart

import (
	"fmt"
	"strings"
)

// Kind says which statistics a chart plots.
type Kind uint8

const (
	// Given plots statistics exactly as they come; nothing is computed from readings.
	Given Kind = iota
	// Individuals plots single values and the moving range of two neighbours.
	Individuals
	// XbarR plots subgroup means and subgroup ranges.
	XbarR
	// XbarS plots subgroup means and subgroup standard deviations.
	XbarS
	// RunMeans plots means of analytical runs, whose sigma has a part between runs and one within, and the standard
	// deviations within runs.
	RunMeans
	// P plots the fraction of nonconforming items in samples of any size.
	P
	// NP plots the number of nonconforming items in samples of one size.
	NP
	// C plots the number of nonconformities in one inspection unit.
	C
	// U plots nonconformities per inspection unit in samples of any size.
	U
	// DuplicateRange plots the range of replicate readings of one sample.
	DuplicateRange
	// RelativeRange plots that range in percent of the mean of the readings.
	RelativeRange

	kindCount
)

var kindNames = [kindCount]string{
	Given: "given", Individuals: "individuals", XbarR: "xbar_r", XbarS: "xbar_s", RunMeans: "run_means",
	P: "p", NP: "np", C: "c", U: "u", DuplicateRange: "duplicate_range", RelativeRange: "relative_range",
}

// KindNames lists the kinds a user can ask for, in words for a message.
func KindNames() string { return strings.Join(kindNames[Individuals:], ", ") }

// String is the name used on the command line, in files and in canonical bytes.
func (k Kind) String() string {
	if k < kindCount {
		return kindNames[k]
	}
	return fmt.Sprintf("kind(%d)", uint8(k))
}

// ParseKind reads a name written by Kind.String. Given is not a name a user can ask for.
func ParseKind(name string) (Kind, error) {
	for k := Individuals; k < kindCount; k++ {
		if kindNames[k] == name {
			return k, nil
		}
	}
	return Given, fmt.Errorf("kind %q: want one of %s", name, KindNames())
}

// Counts reports whether results of the kind are counts of something inspected, not readings.
func (k Kind) Counts() bool { return k == P || k == NP || k == C || k == U }

// Items reports whether what is counted are items, of which a sample has no more than were inspected.
func (k Kind) Items() bool { return k == P || k == NP }

// Duplicates reports whether the kind plots only how replicate readings of one sample differ.
func (k Kind) Duplicates() bool { return k == DuplicateRange || k == RelativeRange }

// Has reports whether charts of the kind have the trace.
func (k Kind) Has(r Role) bool {
	switch {
	case k.Duplicates():
		return r == Dispersion
	case k.Counts() || k == Given:
		return r == Location
	}
	return true
}

const (
	// SubgroupSizeMax bounds the readings of one subgroup. Chart factors beyond it change in the fourth digit only, and
	// a range of so many readings wastes nearly all of them.
	SubgroupSizeMax = 100
	// InspectedMin and InspectedMax bound the items or inspection units of one sample.
	InspectedMin = 1e-9
	InspectedMax = 1e9
)

// CheckSize reports whether a subgroup of size readings fits the kind. For np it is the one size of all samples; the
// other charts of counts have none, which is written 1.
func (k Kind) CheckSize(size int) error {
	switch {
	case k == Given:
	case k == Individuals && size != 1:
		return fmt.Errorf("subgroup size %d: an individuals chart has size 1", size)
	case k == NP && (size < 1 || size > InspectedMax):
		return fmt.Errorf("subgroup size %d: a chart of kind np has samples of one size, 1 to %d items", size, int(InspectedMax))
	case (k == P || k == C || k == U) && size != 1:
		return fmt.Errorf("subgroup size %d: a chart of kind %s has size 1; its results say how much was inspected", size, k)
	case (k == XbarR || k == XbarS || k == RunMeans || k.Duplicates()) && (size < 2 || size > SubgroupSizeMax):
		return fmt.Errorf("subgroup size %d: a chart of kind %s has 2 to %d readings a subgroup", size, k, SubgroupSizeMax)
	}
	return nil
}

// SizeImplied reports whether the kind leaves no choice of subgroup size, so that it need not be given.
func (k Kind) SizeImplied() bool { return k == Individuals || k == P || k == C || k == U }
