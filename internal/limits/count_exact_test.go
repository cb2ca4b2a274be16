package limits_test

import (
	"fmt"
	"math"
	"math/big"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
)

const bigBits = 240

func bigOf(x float64) *big.Float { return new(big.Float).SetPrec(bigBits).SetFloat64(x) }

// cumulative gives P(X <= k) for k = 0, 1, ... of a binomial law, or a Poisson law where size is 0, from the definition:
// weights by their ratio to the one before, summed in extended precision and divided by their total. It ends where what is
// left is below 1e-40 of it.
func cumulative(size, p, mean float64) []*big.Float {
	success, failure := bigOf(p), bigOf(1)
	failure.Sub(failure, success)
	if size == 0 {
		success, failure = bigOf(mean), bigOf(1)
	}
	weight, total := bigOf(1), bigOf(1)
	sums := []*big.Float{bigOf(1)}
	for k := 0.0; size == 0 || k < size; k++ {
		weight.Mul(weight, success).Quo(weight, failure).Quo(weight, bigOf(k+1))
		if size > 0 {
			weight.Mul(weight, bigOf(size-k))
		}
		total.Add(total, weight)
		sums = append(sums, new(big.Float).Copy(total))
		if k > mean && weight.Sign() > 0 && weight.MantExp(nil) < total.MantExp(nil)-140 {
			break
		}
	}
	for _, s := range sums {
		s.Quo(s, total)
	}
	return sums
}

// exactLines are the lines by their definition: lower -1 and upper size where there is none.
func exactLines(sums []*big.Float, size, tail float64) (lower, upper int) {
	above := bigOf(1)
	above.Sub(above, bigOf(tail))
	upper = 0
	for upper < len(sums)-1 && sums[upper].Cmp(above) < 0 {
		upper++
	}
	lower = -1
	for k := 1; k < len(sums) && sums[k-1].Cmp(bigOf(tail)) <= 0; k++ {
		lower = k
	}
	return lower, upper
}

type exactCase struct {
	kind       chart.Kind
	size, mean float64
}

func exactCases() (cases []exactCase) {
	for _, mean := range []float64{0.001, 0.05, 0.7, 3.7, 8.9, 40, 500} {
		cases = append(cases, exactCase{chart.C, 1, mean})
		for _, units := range []float64{0.25, 12.5, 3000} {
			cases = append(cases, exactCase{chart.U, units, mean})
		}
		for _, items := range []float64{1, 6, 50, 1000, 1e5} {
			if mean < items && (mean < 100 || items > 1000) {
				cases = append(cases, exactCase{chart.P, items, mean}, exactCase{chart.NP, items, mean})
				if items < 1e5 { // seen from the other end the sums are long
					cases = append(cases, exactCase{chart.P, items, items - mean})
				}
			}
		}
	}
	return cases
}

func (c exactCase) compute(t *testing.T) limits.Result {
	req := limits.Request{Kind: c.kind, Groups: samplesOf(c.size, 0), Counts: limits.CountOptions{Method: chart.Exact}, Centre: ptr(c.mean)}
	if c.kind == chart.NP {
		req.SubgroupSize = int(c.size)
	}
	if c.kind == chart.P || c.kind == chart.U {
		req.Centre = ptr(c.mean / c.size)
	}
	if d := decimal.Places(*req.Centre); d > 12 {
		req.Centre = ptr(decimal.Round(*req.Centre, 12))
	}
	return mustCompute(t, req)
}

// law gives the cumulative probabilities at the published centre, and the greatest count.
func (c exactCase) law(centre float64) (sums []*big.Float, most int) {
	switch c.kind {
	case chart.P:
		return cumulative(c.size, centre, centre*c.size), int(c.size)
	case chart.NP:
		return cumulative(c.size, centre/c.size, centre), int(c.size)
	case chart.U:
		return cumulative(0, 0, centre*c.size), math.MaxInt32
	}
	return cumulative(0, 0, centre), math.MaxInt32
}

// A count is judged beyond exactly where the definition says, at all counts around the lines, and the line and its
// realised tail are printed as the definition has them.
func TestExactLinesAgainstSums(t *testing.T) {
	for _, c := range exactCases() {
		t.Run(fmt.Sprintf("%s of %g, %g expected", c.kind, c.size, c.mean), func(t *testing.T) {
			res := c.compute(t)
			j := judgeOf(t, res)
			sums, most := c.law(*res.Location.Centre)
			la, ua := exactLines(sums, c.size, chart.ActionTail)
			lw, uw := exactLines(sums, c.size, chart.WarningTail)
			for _, around := range []int{0, la, lw, uw, ua, most} {
				for k := max(0, around-3); k <= min(around+3, most); k++ {
					if around == math.MaxInt32 {
						continue
					}
					action, warning := beyond(j, float64(k), c.size)
					if action != side(k, la, ua) || warning != side(k, lw, uw) {
						t.Errorf("a count of %d: got %d, %d, want %d, %d of action lines %d to %d, warning lines %d to %d", k, action, warning, side(k, la, ua), side(k, lw, uw), la, ua, lw, uw)
					}
				}
			}
			checkExactLine(t, c, res, res.Location.UpperAction, ua, ua == most, 1-tailOf(sums, ua), chart.ActionTail)
			checkExactLine(t, c, res, res.Location.UpperWarning, uw, uw == most, 1-tailOf(sums, uw), chart.WarningTail)
			checkExactLine(t, c, res, res.Location.LowerAction, la, la < 0, tailOf(sums, la-1), chart.ActionTail)
			checkExactLine(t, c, res, res.Location.LowerWarning, lw, lw < 0, tailOf(sums, lw-1), chart.WarningTail)
		})
	}
}

func side(k, lower, upper int) int {
	switch {
	case k > upper:
		return 1
	case k < lower:
		return -1
	}
	return 0
}

func tailOf(sums []*big.Float, k int) float64 {
	if k < 0 {
		return 0
	}
	p, _ := sums[min(k, len(sums)-1)].Float64()
	return p
}

func checkExactLine(t *testing.T, c exactCase, res limits.Result, line chart.Line, want int, none bool, tail, asked float64) {
	t.Helper()
	if none {
		if line != (chart.Line{Basis: chart.Absent}) {
			t.Errorf("got %+v, want no line", line)
		}
		return
	}
	value := decimal.Round(c.kind.Statistic(chart.Count{Nonconforming: float64(want), Inspected: c.size}), res.PublishedDecimals)
	if line.Value != value || line.Basis != chart.TailProbability || math.Abs(line.Tail-tail) > 1e-9*asked || line.Tail > asked {
		t.Errorf("got %+v, want %g with %.12g beyond, at most %g", line, value, tail, asked)
	}
}

// Realised tails of both methods, at the smallest, the published and the largest size, against the counts that the judge
// finds beyond and their probabilities from the definition.
func TestTailsAreThoseOfTheJudge(t *testing.T) {
	for _, method := range []chart.CountMethod{chart.Normal, chart.Exact} {
		for _, c := range []struct {
			kind   chart.Kind
			centre float64
			sizes  []float64
		}{
			{chart.P, 0.04, []float64{50, 210, 400}},
			{chart.U, 2.5, []float64{0.5, 2.75, 5}},
			{chart.C, 5.5, []float64{1}},
		} {
			req := limits.Request{Kind: c.kind, Centre: &c.centre, Counts: limits.CountOptions{Method: method}}
			for _, size := range []float64{c.sizes[0], c.sizes[len(c.sizes)-1]} {
				req.Groups = append(req.Groups, counted(2, size))
			}
			if c.kind == chart.P {
				req.Groups = append(req.Groups, counted(2, 180)) // makes the mean 210
			}
			res := mustCompute(t, req)
			checkTails(t, res, c.sizes)
		}
	}
}

func checkTails(t *testing.T, res limits.Result, sizes []float64) {
	t.Helper()
	j := judgeOf(t, res)
	seen := map[float64]bool{}
	for _, tail := range res.Tails {
		seen[tail.Size] = true
		sums, most := exactCase{res.Kind, tail.Size, 0}.law(*res.Location.Centre)
		want, before := 0.0, 0.0
		for k := 0; k < len(sums) && k <= most; k++ {
			p := tailOf(sums, k)
			action, warning := beyond(j, float64(k), tail.Size)
			lines := map[string]bool{"lowerAction": action < 0, "upperAction": action > 0, "lowerWarning": warning < 0, "upperWarning": warning > 0}
			if lines[tail.Line] {
				want += p - before
			}
			before = p
		}
		if math.Abs(tail.Probability-want) > 1e-12 {
			t.Errorf("%s, %s, %s of %g: got %.12g beyond, the judge finds %.12g", res.Kind, res.Model.CountMethod, tail.Line, tail.Size, tail.Probability, want)
		}
		if res.Model.CountMethod == chart.Exact && tail.Probability > tail.Nominal {
			t.Errorf("%s of %g: %g beyond the exact line, more than %g", tail.Line, tail.Size, tail.Probability, tail.Nominal)
		}
	}
	for _, size := range sizes {
		if !seen[size] {
			t.Errorf("%s: no tail at size %g among %v", res.Kind, size, res.Tails)
		}
	}
}

// Beyond counts.MeanMax the line is the normal one, and nothing jumps there.
func TestExactLineOfEnormousCounts(t *testing.T) {
	for _, z := range []float64{-3, -2, 2, 3} {
		beyond, want := limits.ExactCountLine(chart.U, 2000, 1e6, z), 2000+z*math.Sqrt(2000/1e6)
		if beyond != want {
			t.Errorf("z %g: got %.12g for a mean of 2e9, want %.12g", z, beyond, want)
		}
		// The skewness of a Poisson count moves its quantiles by (z²-1)/6 of a count, and lines are whole.
		exact, normal := limits.ExactCountLine(chart.U, 1e9, 1, z), 1e9+z*math.Sqrt(1e9)
		if math.Abs(exact-normal) > 4 || exact != math.Trunc(exact) {
			t.Errorf("z %g: got %.12g for a mean of 1e9, the normal line is %.12g", z, exact, normal)
		}
	}
}
