package diagnostics

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
)

// CodeSpreadDependsOnMean is the code of duplicates whose scatter goes by the mean otherwise than the limits say.
const CodeSpreadDependsOnMean = "SPREAD_DEPENDS_ON_MEAN"

// relativeSpan is the ratio of largest to smallest mean from which scatter that the limits take to grow with the mean is
// looked at: of duplicates of one concentration, the larger means would only look steadier for being divided by.
const relativeSpan = 2

// dependence is Spearman's rank correlation of the standardised ranges with the size of the mean. In clean data every
// order of the ranges is equally likely, whatever their ties, within each part that has its own estimated sigma; so
// ranks are taken within these, the products of their deviations added, and the variance under all orders is exact. The
// distribution is taken as the beta distribution on (-1, 1) with that variance (Pitman 1937, from memory).
//
// A function of the mean that was fitted to the same sets leaves no trend. What it may leave is a bend, and so the
// correlation is then with the distance of the mean's rank from the middle.
func (d *duplicates) dependence(coarse bool) Test {
	t := Test{
		Code: CodeSpreadDependsOnMean, Name: "rank correlation with the mean", Subject: StandardisedRanges, N: len(d.sets), Level: Level,
		CouldMiss: "Scatter that is largest or smallest at middle means, and with few sets, or means close together, all but strong dependence.",
	}
	if d.fitted {
		t.Name = "rank correlation with the mean's distance from the middle"
		t.CouldMiss = "The fitted function follows any trend, so only a bend is looked for; with fewer than about 200 sets only a gross one shows."
	}
	t, ok := d.ready(t, setsMin)
	low, high := d.span()
	switch {
	case !ok:
		return t
	case coarse && !d.oneSigma():
		return t.notMade(Void, "The readings are rounded so coarsely that ranges at low means show the rounding.")
	case !d.oneSigma() && high < relativeSpan*low:
		return t.notMade(NotEnoughData, fmt.Sprintf("The means lie within a factor of %d.", relativeSpan))
	}
	r, variance := d.rankCorrelation()
	if variance == 0 {
		return t.notMade(Void, "The means, or the ranges, are equal.")
	}
	t = t.withP(r, betaP(r, 0, variance))
	t.text, t.advice = d.dependenceText(r)+fmt.Sprintf("; rank correlation %.2f, p = %.2g.", r, *t.PValue), d.dependenceAdvice(r > 0)
	return t
}

func (d *duplicates) span() (low, high float64) {
	low = math.Inf(1)
	for _, s := range d.sets {
		low, high = min(low, s.mean), max(high, s.mean)
	}
	return low, high
}

// rankCorrelation gives Σ(a-ā)(b-b̄), added over the strata, over the largest that it could be, and its variance.
func (d *duplicates) rankCorrelation() (r, variance float64) {
	largest := 0.0
	for _, sets := range d.strata() {
		n := len(sets)
		if n < 2 {
			continue
		}
		means, scatters := make([]float64, n), make([]float64, n)
		for i, s := range sets {
			means[i], scatters[i] = s.mean, scatter(s.squares, s.freedom)
		}
		a, b := centredRanks(means), centredRanks(scatters)
		if d.fitted {
			for i := range a {
				a[i] = math.Abs(a[i])
			}
			a = centredRanks(a)
		}
		ab, aa, bb := 0.0, 0.0, 0.0
		for i := range a {
			ab, aa, bb = ab+a[i]*b[i], aa+a[i]*a[i], bb+b[i]*b[i]
		}
		r += ab
		variance += aa * bb / float64(n-1)
		largest += math.Sqrt(aa * bb)
	}
	if largest == 0 {
		return 0, 0
	}
	return r / largest, variance / (largest * largest)
}

// centredRanks gives the mean ranks less their mean. Values equal to nine digits are equal.
func centredRanks(xs []float64) []float64 {
	order := make([]int, len(xs))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(i, j int) int { return cmp.Compare(xs[i], xs[j]) })
	ranks, middle := make([]float64, len(xs)), float64(len(xs)-1)/2
	for first := 0; first < len(order); {
		next := first + 1
		for next < len(order) && xs[order[next]]-xs[order[first]] <= 1e-9*xs[order[next]] {
			next++
		}
		for _, i := range order[first:next] {
			ranks[i] = float64(first+next-1)/2 - middle
		}
		first = next
	}
	return ranks
}

// dependenceText names the direction, and what it comes to in the thirds of the sets by their means.
func (d *duplicates) dependenceText(r float64) string {
	ordered := slices.Clone(d.sets)
	slices.SortStableFunc(ordered, func(a, b set) int { return cmp.Compare(a.mean, b.mean) })
	third := len(ordered) / 3
	low, middle, high := ordered[:third], ordered[third:len(ordered)-third], ordered[len(ordered)-third:]
	return fmt.Sprintf("The scatter of duplicates %s: in the third of the sets with the lowest means (up to %.4g) it is %.2f times what the limits say, in the middle %.2f times, in the third with the highest (from %.4g) %.2f times",
		d.direction(r), low[third-1].mean, rootMeanSquare(low), rootMeanSquare(middle), high[0].mean, rootMeanSquare(high))
}

func (d *duplicates) direction(r float64) string {
	switch {
	case d.fitted && r > 0:
		return "at the lowest and highest means is larger than the fitted function says"
	case d.fitted:
		return "at middle means is larger than the fitted function says"
	case d.oneSigma() && r > 0:
		return "grows with the mean, while the limits take one sigma for all"
	case d.oneSigma():
		return "falls as the mean grows, while the limits take one sigma for all"
	case r > 0:
		return "grows faster with the mean than the limits say"
	}
	return "grows more slowly with the mean than the limits say"
}

// rootMeanSquare pools the ratios of sets to the limits.
func rootMeanSquare(sets []set) float64 {
	squares, freedom := 0.0, 0.0
	for _, s := range sets {
		squares += float64(s.freedom) * s.ratio * s.ratio
		freedom += float64(s.freedom)
	}
	return math.Sqrt(squares / freedom)
}

// dependenceAdvice says what fits the limits as they are.
func (d *duplicates) dependenceAdvice(up bool) string {
	wrong := " The limits are too wide at low means and too narrow at high ones."
	if !up {
		wrong = " The limits are too narrow at low means and too wide at high ones."
	}
	switch {
	case d.fitted:
		return "Take bands of the mean, each with its own sigma; √(s0² + (b·mean)²) does not describe these results well."
	case d.function():
		return "Fit s0 and b to these results, or take bands of the mean, each with its own sigma." + wrong
	case d.spread != nil && len(d.spread.Bands) > 0:
		return "Take narrower bands where the scatter changes, or one sigma as a function of the mean, √(s0² + (b·mean)²)." + wrong
	case d.kind == chart.RelativeRange && up:
		return "Take bands of the mean, each with its own relative sigma." + wrong
	case d.kind == chart.RelativeRange:
		return "Plot the plain range below a mean where the scatter no longer shrinks, or the ranges with sigma as a function of the mean, √(s0² + (b·mean)²), on a duplicate_range chart." + wrong
	case up:
		return "Give each band of concentration its own sigma, or sigma as a function of the mean, √(s0² + (b·mean)²); where the scatter is in proportion to the mean, use a relative_range chart." + wrong
	}
	return "Give each band of concentration its own sigma, and look for what differs: high results that are diluted, measured longer or averaged, or an upper end of the measuring range." + wrong
}
