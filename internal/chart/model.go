package chart

import (
	"fmt"
	"math"
	"strings"

	"limitary/internal/decimal"
)

// Model is what the scale of a point follows from besides the process sigma. Its JSON form is part of a version's
// canonical bytes: names never change, and what is not used is left out. The zero value adds nothing.
type Model struct {
	// BetweenSigma is the standard deviation between runs (run_means, in the chart's unit), or of the true fraction or
	// rate between samples (p and u).
	BetweenSigma float64 `json:"between_sigma,omitempty"`
	// Inflation is the factor on the sigma of counts by which samples vary more, or less, than counts alone would
	// (Laney 2002); 0 is none.
	Inflation float64 `json:"inflation,omitempty"`
	// CountMethod says how the lines of counts follow from their mean.
	CountMethod CountMethod `json:"count_method,omitempty"`
	// Inspected is the size of the sample for which the lines of a p or u chart are published; each point has its own.
	Inspected float64 `json:"inspected,omitempty"`
	// Transform is applied to every reading before anything else.
	Transform Transform `json:"transform,omitzero"`
	// Levels standardise readings of several materials to one track.
	Levels []Level `json:"levels,omitempty"`
	// Spread gives the sigma of duplicates by their mean.
	Spread *Spread `json:"spread,omitempty"`
}

// CountMethod is the way from the mean of counts to their lines.
type CountMethod uint8

const (
	// CountMethodDefault leaves the choice to the expected count; a version never has it.
	CountMethodDefault CountMethod = iota
	// Normal puts lines at multiples of sigma.
	Normal
	// Exact puts them at the whole counts that leave at most a stated probability beyond.
	Exact
)

// String names the method in messages and reports.
func (m CountMethod) String() string {
	return [...]string{"default", "normal", "exact"}[min(int(m), 2)]
}

const (
	// ActionTail and WarningTail are the probabilities left beyond an exact line on one side: those of a normal
	// statistic beyond three and two sigmas, rounded to five decimals.
	ActionTail  = 0.00135
	WarningTail = 0.02275
)

// TailOf gives the probability that an exact line at z sigmas may leave beyond it on its side.
func TailOf(z float64) float64 {
	switch z = math.Abs(z); z {
	case ActionMultiple:
		return ActionTail
	case WarningMultiple:
		return WarningTail
	}
	return math.Erfc(z/math.Sqrt2) / 2
}

// TransformKind names a transformed scale.
type TransformKind uint8

const (
	// Identity leaves readings as they are.
	Identity TransformKind = iota
	// Log is the natural logarithm.
	Log
	// SquareRoot is the square root.
	SquareRoot
)

var transformNames = [...]string{"none", "log", "sqrt"}

// String names the scale in messages, files and flags.
func (t TransformKind) String() string { return transformNames[min(int(t), len(transformNames)-1)] }

// ParseTransform reads a name written by String.
func ParseTransform(name string) (TransformKind, error) {
	for i, n := range transformNames {
		if n == name {
			return TransformKind(i), nil
		}
	}
	return Identity, fmt.Errorf("scale %q: want one of %s", name, strings.Join(transformNames[:], ", "))
}

// Transform is the scale a chart is judged on: the kind's function of reading plus offset.
type Transform struct {
	Kind TransformKind `json:"kind"`
	// Offset is added to every reading before, in the chart's unit.
	Offset float64 `json:"offset,omitempty"`
}

// logFloor is below the logarithm of every positive float64.
const logFloor = -746

// Apply gives the reading on the judged scale. Where the reading lies outside the scale's domain, ok is false and y is
// the lower end of the scale: all that is known of the reading is that it lies below.
func (t Transform) Apply(x float64) (y float64, ok bool) {
	switch s := x + t.Offset; t.Kind {
	case Log:
		if s <= 0 {
			return logFloor, false
		}
		return math.Log(s), true
	case SquareRoot:
		if s < 0 {
			return 0, false
		}
		return math.Sqrt(s), true
	}
	return x, true
}

// Invert gives the reading in the chart's unit that lies at y on the judged scale; ok is false where none does.
func (t Transform) Invert(y float64) (x float64, ok bool) {
	switch t.Kind {
	case Log:
		x = math.Exp(y) - t.Offset
	case SquareRoot:
		if y < 0 {
			return 0, false
		}
		x = y*y - t.Offset
	default:
		x = y
	}
	return x, !math.IsInf(x, 0) && !math.IsNaN(x)
}

// Floor is the lower end of the scale, below which no line is.
func (t Transform) Floor() float64 {
	switch t.Kind {
	case Log:
		return logFloor
	case SquareRoot:
		return 0
	}
	return math.Inf(-1)
}

// Level is one material of a standardised track: a reading x counts as (x - Reference)/Sigma.
type Level struct {
	// Material is the material that results of the level name.
	Material string `json:"material"`
	// Reference and Sigma, that of a single reading, are in the chart's unit.
	Reference float64 `json:"reference"`
	Sigma     float64 `json:"sigma"`
}

// standardisedPlaces keeps what a division adds to (1.3 - 1)/0.1 from putting the reading beyond a line at 3.
const standardisedPlaces = 12

// Standardise gives a reading on the standardised scale, to twelve decimals where float64 carries as many.
func (l Level) Standardise(x float64) float64 {
	z := (x - l.Reference) / l.Sigma
	if math.Abs(z) < 1000 {
		return decimal.Round(z, standardisedPlaces)
	}
	return z
}

// LevelOf finds the level of a material.
func (m *Model) LevelOf(material string) (Level, bool) {
	for _, l := range m.Levels {
		if l.Material == material {
			return l, true
		}
	}
	return Level{}, false
}

// Scaled reports whether readings are judged on another scale than the chart's unit.
func (m *Model) Scaled() bool { return m.Transform.Kind != Identity || len(m.Levels) > 0 }

// OnScale gives a reading of a material on the judged scale; ok is false where it has no place there.
func (m *Model) OnScale(x float64, material string) (y float64, ok bool) {
	if len(m.Levels) == 0 {
		return m.Transform.Apply(x)
	}
	level, ok := m.LevelOf(material)
	if !ok || !(level.Sigma > 0) {
		return 0, false
	}
	return level.Standardise(x), true
}

// LevelsMax bounds the materials of one standardised track.
const LevelsMax = 100

// Spread gives the standard deviation of a single reading of duplicates by the size of their mean: in bands, or as
// √(S0² + (B·mean)²), or, with neither, the process sigma everywhere.
type Spread struct {
	// Bands in the order of From. The first holds below its From as well.
	Bands []Band `json:"bands,omitempty"`
	// S0 is the standard deviation at zero, in the chart's unit, and B its growth with the mean; duplicate_range only.
	S0 float64 `json:"s0,omitempty"`
	B  float64 `json:"b,omitempty"`
	// AbsoluteBelow is the mean, in the chart's unit, under which a relative_range chart plots the plain range, with
	// the standard deviation AbsoluteSigma of a single reading.
	AbsoluteBelow float64 `json:"absolute_below,omitempty"`
	AbsoluteSigma float64 `json:"absolute_sigma,omitempty"`
}

// Band is the standard deviation of a single reading from one mean up to the next band's. On a relative_range chart it
// is in percent of the mean.
type Band struct {
	From  float64 `json:"from"`
	Sigma float64 `json:"sigma"`
}

// BandsMax bounds the bands of one chart.
const BandsMax = 20

// At gives the standard deviation of a single reading of duplicates with the given mean, and whether it is that of the
// plain range although the chart plots relative ones. Process is the process sigma.
func (s *Spread) At(process, mean float64) (sigma float64, absolute bool) {
	if s == nil {
		return process, false
	}
	mean = math.Abs(mean)
	if s.AbsoluteBelow > 0 && mean < s.AbsoluteBelow {
		return s.AbsoluteSigma, true
	}
	if len(s.Bands) > 0 {
		sigma = s.Bands[0].Sigma
		for _, b := range s.Bands[1:] {
			if mean >= b.From {
				sigma = b.Sigma
			}
		}
		return sigma, false
	}
	if s.S0 > 0 || s.B > 0 {
		return math.Hypot(s.S0, s.B*mean), false
	}
	return process, false
}

// Count is one result of a chart of counts.
type Count struct {
	// Nonconforming is a whole number: nonconforming items on p and np charts, nonconformities on c and u charts.
	Nonconforming float64 `json:"nonconforming"`
	// Inspected is the number of items (p, np), or the inspection units looked at (u, any positive number; c, always 1).
	Inspected float64 `json:"inspected"`
}

// CheckCount refuses a count that no chart of the kind can have; size is the one sample size of an np chart. Its error
// begins with the name of the field.
func (k Kind) CheckCount(c Count, size int) error {
	whole := func(x float64) bool { return x == math.Trunc(x) }
	switch {
	case !(c.Nonconforming >= 0) || !whole(c.Nonconforming) || c.Nonconforming > InspectedMax:
		return fmt.Errorf("nonconforming %v: want a whole number from 0 to %d", c.Nonconforming, int(InspectedMax))
	case !(c.Inspected >= InspectedMin) || c.Inspected > InspectedMax:
		return fmt.Errorf("inspected %v: want at least %g, at most %d", c.Inspected, InspectedMin, int(InspectedMax))
	case k == C && c.Inspected != 1:
		return fmt.Errorf("inspected %v: a c chart counts in one inspection unit, written 1; where more or less is inspected, use a u chart", c.Inspected)
	case k.Items() && !whole(c.Inspected):
		return fmt.Errorf("inspected %v: want a whole number of items", c.Inspected)
	case k.Items() && c.Nonconforming > c.Inspected:
		return fmt.Errorf("nonconforming %v: more than the %v items inspected", c.Nonconforming, c.Inspected)
	case k == NP && c.Inspected != float64(size):
		return fmt.Errorf("inspected %v: an np chart has samples of one size, here %d; where sizes vary, use a p chart", c.Inspected, size)
	}
	return nil
}

// Statistic gives what a chart of counts plots, unrounded.
func (k Kind) Statistic(c Count) float64 {
	if k == P || k == U {
		return c.Nonconforming / c.Inspected
	}
	return c.Nonconforming
}
