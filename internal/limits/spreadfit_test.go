package limits_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

const trueS0, trueB = 0.3, 0.05

func byFunction(mean float64) float64 { return math.Hypot(trueS0, trueB*mean) }

// spanned are means at which s0 and b show: √(s0² + (b·mean)²) goes from 0.3 to 2.
var spanned = []float64{0.5, 2, 4, 8, 12, 20, 40}

func functionRequest(groups []limits.Group) limits.Request {
	return limits.Request{Kind: chart.DuplicateRange, SubgroupSize: 3, Groups: groups, PublishedDecimals: ptr(9), Duplicates: limits.DuplicateOptions{Function: true}}
}

// minusTwiceLog is the deviance from the density of the readings of each set about their own mean, written out.
func minusTwiceLog(groups []limits.Group, s0, b float64) (sum float64) {
	for _, g := range groups {
		mean := 0.0
		for _, x := range g.Readings {
			mean += x / float64(len(g.Readings))
		}
		s, freedom := plainDeviation(g.Readings), float64(len(g.Readings)-1)
		variance := s0*s0 + b*b*mean*mean
		sum += freedom * (math.Log(variance) + s*s/variance)
	}
	return sum
}

// No other s0 and b are likelier: neither far off, on a grid from nothing to four times as much, nor near by.
func TestFunctionOfTheMeanIsTheLikeliest(t *testing.T) {
	for seed := range uint64(6) {
		r := rand.New(rand.NewPCG(seed, 47))
		groups := append(pairs(r, 20, 2, byFunction, spanned...), pairs(r, 15, 3, byFunction, spanned...)...)
		res, err := limits.Compute(functionRequest(groups))
		if err != nil {
			t.Fatalf("seed %d,47: %v", seed, err)
		}
		s0, b := res.Parts[0].Sigma, res.Parts[1].Sigma
		lowest := minusTwiceLog(groups, s0, b)
		for i := range 81 {
			for j := range 81 {
				far := minusTwiceLog(groups, 4*trueS0*(float64(i)+1e-6)/80, 4*trueB*float64(j)/80)
				close := minusTwiceLog(groups, s0*(1+float64(i-40)*1e-5), b*(1+float64(j-40)*1e-5))
				if far < lowest-1e-9 || close < lowest-1e-9 {
					t.Fatalf("seed %d,47: s0 %g, b %g with %.9f; there is %.9f", seed, s0, b, lowest, min(far, close))
				}
			}
		}
		if got, want := res.ProcessSigma, math.Hypot(res.Model.Spread.S0, res.Model.Spread.B*middleMean(groups)); math.Abs(got-want) > 1e-9 {
			t.Errorf("seed %d,47: process sigma %g, want that at the median mean, %g", seed, got, want)
		}
	}
}

// middleMean is the median of the sizes of the means, by counting.
func middleMean(groups []limits.Group) float64 {
	for _, g := range groups {
		mine, below, above := mean(g), 0, 0
		for _, h := range groups {
			switch other := mean(h); {
			case other < mine:
				below++
			case other > mine:
				above++
			}
		}
		if below == above {
			return mine
		}
	}
	return math.NaN()
}

func mean(g limits.Group) (m float64) {
	for _, x := range g.Readings {
		m += x
	}
	return math.Abs(m / float64(len(g.Readings)))
}

func TestFunctionOfTheMeanScalesAndShuffles(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 48))
	req := functionRequest(pairs(r, 40, 3, byFunction, spanned...))
	before := mustCompute(t, req)
	scaled := mustCompute(t, mapReadings(req, func(x float64) float64 { return -100 * x }))
	if !near(scaled.Parts[0].Sigma, 100*before.Parts[0].Sigma, 1e-8) || !near(scaled.Parts[1].Sigma, before.Parts[1].Sigma, 1e-8) || !near(scaled.Parts[0].DegreesOfFreedom, before.Parts[0].DegreesOfFreedom, 1e-7) {
		t.Errorf("scaled: got %+v, want a hundredfold s0 and the b of %+v", scaled.Parts, before.Parts)
	}
	shuffled := mapReadings(req, func(x float64) float64 { return x })
	r.Shuffle(len(shuffled.Groups), func(a, b int) {
		shuffled.Groups[a], shuffled.Groups[b] = shuffled.Groups[b], shuffled.Groups[a]
	})
	if after := mustCompute(t, shuffled); !near(after.Parts[0].Sigma, before.Parts[0].Sigma, 1e-9) || !near(after.Parts[1].Sigma, before.Parts[1].Sigma, 1e-9) {
		t.Errorf("shuffled: got %+v, want %+v", after.Parts, before.Parts)
	}
}

// From many sets the fit comes to the true figures, with the variance it states; from few, s0 and b are somewhat small, as
// the doc comment says.
func TestFunctionOfTheMeanIsConsistent(t *testing.T) {
	for _, c := range []struct {
		sets, runs int
		bias       float64 // allowed of s0 and b, relative
	}{{35, 400, 0.06}, {280, 200, 0.01}, {2800, 40, 0.001}} {
		r := rand.New(rand.NewPCG(uint64(c.sets), 49))
		var n float64
		var sum, squares, stated, held [2]float64
		for range c.runs {
			res, err := limits.Compute(functionRequest(pairs(r, c.sets, 2, byFunction, spanned...)))
			if err != nil {
				continue // a fit with s0 of zero is refused; that must stay rare
			}
			n++
			for i, want := range [2]float64{trueS0, trueB} {
				p := res.Parts[i]
				x := p.Sigma/want - 1
				sum[i], squares[i], stated[i] = sum[i]+x, squares[i]+x*x, stated[i]+1/(2*p.DegreesOfFreedom)
				if p.Interval != nil && p.Interval.Lower <= want && want <= p.Interval.Upper {
					held[i]++
				}
			}
		}
		if n < 0.98*float64(c.runs) {
			t.Errorf("seed %d,49: %g of %d fits were accepted", c.sets, n, c.runs)
		}
		for i, name := range []string{"s0", "b"} {
			bias, error := sum[i]/n, math.Sqrt(squares[i]/n/n)
			t.Logf("%d sets, %s: relative bias %.4f ± %.4f, deviation %.4f, stated %.4f, held %.3f", c.sets, name, bias, error, math.Sqrt(squares[i]/n), math.Sqrt(stated[i]/n), held[i]/n)
			if bias > 4*error || bias < -c.bias-4*error {
				t.Errorf("seed %d,49, %d sets: %s is off by a relative %.4f, want %.3f to 0 within %.4f", c.sets, c.sets, name, bias, -c.bias, 4*error)
			}
			if got := held[i] / n; got < 0.93-4*math.Sqrt(0.95*0.05/n) {
				t.Errorf("seed %d,49, %d sets: the interval of %s held in %.3f of cases", c.sets, c.sets, name, got)
			}
		}
	}
}

// Without growth there is one sigma, the pooled root mean square, and b is zero.
func TestFunctionWithoutGrowth(t *testing.T) {
	var groups []limits.Group
	squares := 0.0
	for i := range 12 { // scatter that falls with the mean
		d := 1 / float64(1+i)
		groups = append(groups, limits.Group{Readings: []float64{float64(2+i) + d, float64(2+i) - d}})
		squares += 2 * d * d
	}
	res := mustCompute(t, functionRequest(groups))
	if want := math.Sqrt(squares / 12); !near(res.Parts[0].Sigma, want, 1e-12) || res.Parts[1].Sigma != 0 || res.Model.Spread.B != 0 || res.Parts[0].DegreesOfFreedom != 12 {
		t.Errorf("got %+v, want %g and no growth", res.Parts, want)
	}
	if in := res.Parts[1].Interval; in.Lower != 0 || in.Upper <= 0 || in.Upper > 0.2 {
		t.Errorf("got growth in %+v, want from 0 to little", in)
	}
	judgeBy(t, res)
}
