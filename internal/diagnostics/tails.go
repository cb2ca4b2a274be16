package diagnostics

import (
	"fmt"
	"math"
)

// CodeTooFewBeyondTwoSigma is the code of a sample whose tails are missing.
const CodeTooFewBeyondTwoSigma = "TOO_FEW_BEYOND_TWO_SIGMA"

// tailsMin is the number of values from which about one is expected beyond two sigmas.
const tailsMin = 20

// tails asks whether results far from the mean are missing, as where failed controls were measured again and only the
// passing one was posted. The standard deviation of what is left is itself too small (0.88 sigma if all beyond two
// sigmas are gone), so counting what lies beyond two of them finds little: 3.5 % in place of 4.6 %. What is missing for
// certain is length: the range over the standard deviation (H. A. David, H. O. Hartley and E. S. Pearson, Biometrika 41
// (1954) 482-493, from memory), which cannot pass 4/0.88 then, is compared with what normal samples fall below in one
// of a hundred.
func (s *sample) tails() Test {
	t := Test{
		Code: CodeTooFewBeyondTwoSigma, Name: "range over standard deviation", Subject: s.subject, N: s.n, Level: Level,
		CouldMiss: "With fewer than about 150 values missing tails look like chance. One outlier left in hides that others were left out, and results cut at three sigmas leave no trace.",
	}
	t, ok := s.ready(t, tailsMin)
	if !ok {
		return t
	}
	// Rounding moves both ends, and widens the standard deviation (Sheppard's correction, from memory). Half a step more
	// keeps the level.
	ratio := (s.sorted[s.n-1] - s.sorted[0] + s.step/2) / math.Sqrt(1-s.step*s.step/12)
	critical := rangeCritical(s.n)
	t = t.withCritical(ratio, critical, ratio < critical)
	beyond := 0
	for _, z := range s.z {
		if math.Abs(z) > 2 {
			beyond++
		}
	}
	t.text = fmt.Sprintf("The tails are too short: the %d %s span %.2f standard deviations, and 99 of 100 normal samples span more than %.2f; %d lie beyond two, where %.1f are expected.",
		s.n, s.subject, ratio, critical, beyond, float64(s.n)*math.Erfc(math.Sqrt2))
	t.advice = "Ask whether failed controls were measured again and only the passing result kept, and post every result. Limits from cut data are too narrow. Values bounded by their nature look the same."
	return t
}
