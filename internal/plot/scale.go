package plot

import (
	"math"
	"strconv"
	"strings"
)

// scale maps values to heights. Values are first divided by 10^power, so that the largest and the smallest float64 alike
// are handled near 1, and their span stays finite.
type scale struct {
	power       int
	low, high   float64 // of the axis, divided by 10^power
	step        float64
	places      int // decimals of the tick labels
	top, bottom float64
}

// Values with a magnitude in this range are written as they are; others get a common power of ten.
const (
	plainMin = 1e-4
	plainMax = 1e9
)

// tickGapMin is the least distance of two marks, in pixels.
const tickGapMin = 24

// newScale makes an axis for the values from least to greatest, drawn between top and bottom.
func newScale(least, greatest, top, bottom float64) scale {
	s := scale{top: top, bottom: bottom}
	if size := math.Max(math.Abs(least), math.Abs(greatest)); size != 0 && (size < plainMin || size >= plainMax) {
		s.power = 3 * int(math.Floor(float64(powerOf(size))/3))
	}
	low, high := s.reduce(least), s.reduce(greatest)
	size := math.Max(math.Abs(low), math.Abs(high))
	// A span below a few units in the last place cannot be drawn to scale; one value alone has none.
	if high-low <= size*1e-13 {
		half := size * 0.01
		if size == 0 {
			half = 1
		}
		low, high = low-half, high+half
	}
	pad := (high - low) * 0.09
	s.low, s.high = low-pad, high+pad
	if low >= 0 && s.low < 0 {
		s.low = 0
	}
	s.step, s.places = niceStep((s.high - s.low) / (math.Max(bottom-top, 1) / tickGapMin))
	return s
}

// powerOf gives the power of ten at or just below x > 0. The logarithm of the smallest numbers is not to be trusted on
// every machine, so they are enlarged first.
func powerOf(x float64) int {
	if x < 1e-300 {
		return int(math.Floor(math.Log10(x*1e300))) - 300
	}
	return int(math.Floor(math.Log10(x)))
}

// reduce divides by 10^power in steps that neither overflow nor vanish.
func (s *scale) reduce(v float64) float64 {
	for p := s.power; p != 0; {
		part := max(min(p, 300), -300)
		v *= math.Pow10(-part)
		p -= part
	}
	return v
}

// y gives the height of a value.
func (s *scale) y(v float64) float64 {
	return s.bottom - (s.reduce(v)-s.low)/(s.high-s.low)*(s.bottom-s.top)
}

// niceStep gives the least of 1, 2, 5 times a power of ten that is no less than step, and its decimals.
func niceStep(step float64) (nice float64, places int) {
	power := powerOf(step)
	for _, m := range []float64{1, 2, 5, 10} {
		if nice = m * math.Pow10(power); nice >= step*(1-1e-9) {
			if m == 10 {
				power++
			}
			break
		}
	}
	return nice, max(-power, 0)
}

// tick is one mark of an axis.
type tick struct {
	at    float64
	label string
}

// ticks gives the marks of the axis, from the bottom up.
func (s *scale) ticks() []tick {
	var marks []tick
	for k := math.Ceil(s.low/s.step - 1e-9); k*s.step <= s.high+s.step*1e-9 && len(marks) < 50; k++ {
		v := k * s.step
		label := strconv.FormatFloat(v+0, 'f', s.places, 64)
		if k == 0 {
			label = "0"
		}
		at := s.bottom - (v-s.low)/(s.high-s.low)*(s.bottom-s.top)
		marks = append(marks, tick{at, minus(label)})
	}
	return marks
}

// caption names the unit and the common power of ten.
func (s *scale) caption(unit string) string {
	if s.power == 0 {
		return unit
	}
	return strings.TrimSpace("×10" + superscript(s.power) + " " + unit)
}

// value writes the value of a line with its decimals, or with a power of ten where that would be long.
func value(v float64, decimals int) string {
	text := strconv.FormatFloat(v, 'f', decimals, 64)
	if len(text) <= 14 && (v == 0 || strings.Trim(text, "-0.") != "") {
		return minus(text)
	}
	mantissa, power, _ := strings.Cut(strconv.FormatFloat(v, 'e', 5, 64), "e")
	p, _ := strconv.Atoi(power)
	return minus(mantissa) + "×10" + superscript(p)
}

// minus writes the minus sign of print for the hyphen, and none for a zero.
func minus(number string) string {
	if strings.HasPrefix(number, "-") {
		if strings.Trim(number, "-0.") == "" {
			return number[1:]
		}
		return "\u2212" + number[1:]
	}
	return number
}

func superscript(n int) string {
	return strings.NewReplacer("-", "⁻", "0", "⁰", "1", "¹", "2", "²", "3", "³", "4", "⁴", "5", "⁵", "6", "⁶", "7", "⁷", "8", "⁸",
		"9", "⁹").Replace(strconv.Itoa(n))
}
