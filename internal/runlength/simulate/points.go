package simulate

import (
	"math"
	"math/rand/v2"

	"limitary/internal/runlength/data"
)

// Values are points of one trace: Before and After the change, correlated with their predecessor where Correlation is
// not 0, rounded where Step is not. With MovingRanges the dispersion trace is that of neighbours.
type Values struct {
	// Before is the distribution in control, After that of the run.
	Before, After data.Distribution
	// MeanBefore and MeanAfter are needed for correlated points, which vary about them.
	MeanBefore, MeanAfter float64
	Correlation, Step     float64
	// MovingRanges has centre and sigma of a moving range in sigmas of the values; nil for no dispersion trace.
	MovingRanges *[2]float64

	last  float64
	noise float64
	mean  float64
	from  data.Distribution
	has   bool
}

// Reset starts a new segment.
func (v *Values) Reset(inControl bool) {
	v.has = false
	v.from, v.mean = v.After, v.MeanAfter
	if inControl {
		v.from, v.mean = v.Before, v.MeanBefore
	}
}

// Shift changes the distribution.
func (v *Values) Shift() { v.from, v.mean = v.After, v.MeanAfter }

// Fill gives the next points.
func (v *Values) Fill(r *rand.Rand, location, dispersion []float64) (missing int) {
	fresh := math.Sqrt(1 - v.Correlation*v.Correlation)
	n := 0
	for i := range location {
		x := v.from.Draw(r)
		if v.Correlation != 0 {
			if noise := x - v.mean; v.has {
				v.noise = v.Correlation*v.noise + fresh*noise
			} else {
				v.noise = noise
			}
			x = v.mean + v.noise
		}
		if v.Step > 0 {
			x = math.Round(x/v.Step) * v.Step
		}
		location[i] = x
		if v.MovingRanges != nil {
			if v.has {
				dispersion[n] = (math.Abs(x-v.last) - v.MovingRanges[0]) / v.MovingRanges[1]
				n++
			} else {
				missing++
			}
		}
		v.last, v.has = x, true
	}
	return missing
}

// Subgroups are points of a chart of means with ranges or standard deviations, made from readings.
type Subgroups struct {
	// Before and After are distributions of a reading in process sigmas from the centre.
	Before, After data.Distribution
	Size          int
	// Ranges plots ranges, else standard deviations; Centre and Sigma of that statistic in process sigmas.
	Ranges        bool
	Centre, Sigma float64
	// Step and Correlation are those of the means, in their standard errors.
	Step, Correlation     float64
	MeanBefore, MeanAfter float64

	from  data.Distribution
	mean  float64
	noise float64
	has   bool
}

// Reset starts a new segment.
func (s *Subgroups) Reset(inControl bool) {
	s.has = false
	s.from, s.mean = s.After, s.MeanAfter
	if inControl {
		s.from, s.mean = s.Before, s.MeanBefore
	}
}

// Shift changes the distribution.
func (s *Subgroups) Shift() { s.from, s.mean = s.After, s.MeanAfter }

// Fill gives the next points.
func (s *Subgroups) Fill(r *rand.Rand, location, dispersion []float64) (missing int) {
	root := math.Sqrt(float64(s.Size))
	fresh := math.Sqrt(1 - s.Correlation*s.Correlation)
	for i := range location {
		mean, spread := s.subgroup(r)
		x := root * mean
		if s.Correlation != 0 {
			if noise := x - s.mean; s.has {
				s.noise = s.Correlation*s.noise + fresh*noise
			} else {
				s.noise = noise
			}
			x = s.mean + s.noise
		}
		if s.Step > 0 {
			x = math.Round(x/s.Step) * s.Step
		}
		location[i], dispersion[i] = x, (spread-s.Centre)/s.Sigma
		s.has = true
	}
	return 0
}

// subgroup gives mean and range or standard deviation of one subgroup, the latter by Welford's update.
func (s *Subgroups) subgroup(r *rand.Rand) (mean, spread float64) {
	lo, hi, squares := math.Inf(1), math.Inf(-1), 0.0
	for n := range s.Size {
		x := s.from.Draw(r)
		lo, hi = min(lo, x), max(hi, x)
		d := x - mean
		mean += d / float64(n+1)
		squares += d * (x - mean)
	}
	if s.Ranges {
		return mean, hi - lo
	}
	return mean, math.Sqrt(squares / float64(s.Size-1))
}
