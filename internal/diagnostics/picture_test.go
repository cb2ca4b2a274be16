package diagnostics_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
)

// Goal: a grid made from known whole numbers is found again, at any scale that decimals can hold.
func TestGridIsFoundAgain(t *testing.T) {
	for _, tc := range []struct {
		readings []float64
		step     float64
		whole    []int64
	}{
		{[]float64{0.1, 0.2, 0.4}, 0.1, []int64{0, 1, 3}},
		{[]float64{-0.3, 0, 0.3}, 0.3, []int64{0, 1, 2}},
		{[]float64{10000000.1, 10000000.3}, 0.2, []int64{0, 1}},
		{[]float64{5, 10, 25}, 5, []int64{0, 1, 4}},
		{[]float64{1e100, 1.5e100, 3e100}, 5e99, []int64{0, 1, 4}},
		{[]float64{1e-300, 3e-300}, 2e-300, []int64{0, 1}},
		{[]float64{0.25, 0.5, 1}, 0.25, []int64{0, 1, 3}},
		{[]float64{7, 7, 7}, 0, nil},
		{[]float64{7}, 0, nil},
		{nil, 0, nil},
		{[]float64{1e100, 1}, 0, nil}, // no common whole numbers
	} {
		step, whole := diagnostics.GridOf(tc.readings)
		if step != tc.step || !slices.Equal(whole, tc.whole) {
			t.Errorf("%v: step %v, whole %v; want %v, %v", tc.readings, step, whole, tc.step, tc.whole)
		}
	}
}

// Every value is counted once, in the bin it lies in, and edges lie half way between possible values.
func TestHistogramOfRoundedValues(t *testing.T) {
	r := rand.New(rand.NewPCG(10, 2))
	for _, n := range []int{2, 9, 60, 5000} {
		for _, per := range []float64{2, 10, 1000} {
			values := make([]float64, n)
			for i := range values {
				values[i] = math.Round(r.NormFloat64()*per) / 100
			}
			values[0] = 20 // far out
			h := diagnostics.HistogramOf(values)
			total := 0
			for i, count := range h.Counts {
				total += count
				got := 0
				for _, x := range values {
					if low := h.Lower + float64(i)*h.Width; x > low && x < low+h.Width {
						got++
					}
				}
				if got != count {
					t.Errorf("n = %d, %v: bin %d has %d, want %d", n, per, i, count, got)
				}
			}
			if total != n || len(h.Counts) > diagnostics.BinsMax || h.Counts[0] == 0 || h.Counts[len(h.Counts)-1] == 0 {
				t.Errorf("n = %d, %v: %d values in %d bins, first %d, last %d", n, per, total, len(h.Counts), h.Counts[0], h.Counts[len(h.Counts)-1])
			}
			if steps := h.Width / h.Step; math.Abs(steps-math.Round(steps)) > 1e-9 || steps < 0.5 {
				t.Errorf("a bin has %v steps", steps)
			}
		}
	}
}

func TestHistogramFollowsTheNamedRule(t *testing.T) {
	values := make([]float64, 1000)
	for i := range values { // quantiles of the normal law: interquartile range 1.349
		values[i] = math.Round(1e6*distuv.UnitNormal.Quantile((float64(i)+0.5)/1000)) / 1e6
	}
	h := diagnostics.HistogramOf(values)
	if want := 2 * 1.34898 / 10; h.Rule != diagnostics.FreedmanDiaconis || math.Abs(h.Width-want) > 0.002 {
		t.Errorf("%s, width %v, want %v", h.Rule, h.Width, want)
	}
	for i := range values {
		values[i] = 0
	}
	values[3], values[4] = 1, -1
	if h := diagnostics.HistogramOf(values); h.Rule != diagnostics.Scott || h.Step != 1 || !slices.Equal(h.Counts, []int{1, 998, 1}) {
		t.Errorf("half of the values equal: %+v", h)
	}
}

func TestNormalPlot(t *testing.T) {
	d := design{chart.Individuals, 9, 1}
	xs := []float64{4, 1, 2, 9, 3, 7, 5, 8, 6}
	rep := examine(t, requestOf(d, xs, 1))
	for i, p := range rep.Values.NormalPlot {
		want := distuv.UnitNormal.Quantile((float64(i) + 0.625) / 9.25)
		if math.Abs(p.Quantile-want) > 1e-9 || math.Abs(p.Value-(52+2*float64(i))) > 1e-9 {
			t.Errorf("point %d: %+v, want value %d at %.4f", i, p, 52+2*i, want)
		}
	}
	r := rand.New(rand.NewPCG(1, 2))
	d.groups = 20_000
	rep = examine(t, requestOf(d, clean(r, d), fineStep))
	plot := rep.Values.NormalPlot
	ordered := slices.IsSortedFunc(plot, func(a, b diagnostics.NormalPoint) int {
		if a.Quantile < b.Quantile && a.Value <= b.Value {
			return -1
		}
		return 1
	})
	if len(plot) != diagnostics.NormalPointsMax || !ordered {
		t.Errorf("%d points, in order: %t", len(plot), ordered)
	}
	if first, last := plot[0].Quantile, plot[len(plot)-1].Quantile; math.Abs(first+last) > 1e-9 || first > -4 {
		t.Errorf("the ends are at %v and %v", first, last)
	}
}
