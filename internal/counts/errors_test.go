package counts_test

import (
	"errors"
	"math"
	"strings"
	"testing"

	"limitary/internal/counts"
)

var nan, inf = math.NaN(), math.Inf(1)

func TestRefusals(t *testing.T) {
	good := []counts.Sample{{Count: 3, Inspected: 50}, {Count: 5, Inspected: 50}}
	with := func(s counts.Sample) []counts.Sample { return []counts.Sample{good[0], s} }
	between := func(family counts.Family, samples []counts.Sample) error {
		_, err := counts.Between(family, samples)
		_, errDispersion := counts.Dispersion(family, samples)
		_, _, errStandardised := counts.Standardised(family, samples)
		if (err == nil) != (errDispersion == nil) || (err == nil) != (errStandardised == nil) {
			t.Errorf("%v, %v and %v disagree", err, errDispersion, errStandardised)
		}
		return err
	}
	laney := func(z []float64, breaks []bool) error { _, _, err := counts.Laney(z, breaks); return err }
	binomial := func(size, p float64) error { _, err := counts.Binomial(size, p); return err }
	poisson := func(mean float64) error { _, err := counts.Poisson(mean); return err }
	proportion := func(x, n float64) error { _, err := counts.ProportionInterval(x, n); return err }
	rate := func(x, n float64) error { _, err := counts.RateInterval(x, n); return err }
	component, err := counts.Between(counts.Nonconforming, good)
	if err != nil {
		t.Fatal(err)
	}
	unequal := func(c counts.Component, samples []counts.Sample) error {
		_, err := counts.SizesTooUnequal(c, samples)
		return err
	}
	for _, tc := range []struct {
		err   error
		field string // empty: accepted
		value string
	}{
		{binomial(1, 0), "", ""}, {binomial(1e9, 1), "", ""},
		{binomial(0, 0.5), "size", "0"}, {binomial(1e9+1, 0.5), "size", "1.000000001e+09"}, {binomial(2.5, 0.5), "size", "2.5"},
		{binomial(nan, 0.5), "size", "NaN"}, {binomial(inf, 0.5), "size", "+Inf"}, {binomial(-3, 0.5), "size", "-3"},
		{binomial(5, -1e-300), "p", "-1e-300"}, {binomial(5, 1.0000000000000002), "p", "1.0000000000000002"}, {binomial(5, nan), "p", "NaN"},
		{poisson(0), "", ""}, {poisson(1e9), "", ""},
		{poisson(-0.1), "mean", "-0.1"}, {poisson(1.000001e9), "mean", "1.000001e+09"}, {poisson(nan), "mean", "NaN"},
		{counts.CheckTail(0.00135), "", ""}, {counts.CheckTail(counts.TailMin), "", ""}, {counts.CheckTail(0.5), "", ""},
		{counts.CheckTail(0), "tail", "0"}, {counts.CheckTail(0.51), "tail", "0.51"}, {counts.CheckTail(nan), "tail", "NaN"},
		{between(counts.Nonconforming, good), "", ""}, {between(counts.Nonconformities, good), "", ""},
		{between(counts.Nonconforming, nil), "samples", "0"}, {between(counts.Nonconforming, good[:1]), "samples", "1"},
		{between(counts.Nonconforming, make([]counts.Sample, counts.SamplesMax+1)), "samples", "100001"},
		{between(2, good), "family", "2"},
		{between(counts.Nonconforming, with(counts.Sample{Count: 51, Inspected: 50})), "samples[1].count", "51"},
		{between(counts.Nonconforming, with(counts.Sample{Count: 50, Inspected: 50})), "", ""},
		{between(counts.Nonconforming, with(counts.Sample{Count: 1, Inspected: 50.5})), "samples[1].inspected", "50.5"},
		{between(counts.Nonconforming, with(counts.Sample{})), "samples[1].inspected", "0"},
		{between(counts.Nonconforming, with(counts.Sample{Count: nan, Inspected: 9})), "samples[1].count", "NaN"},
		{between(counts.Nonconformities, with(counts.Sample{Count: 51, Inspected: 0.5})), "", ""},
		{between(counts.Nonconformities, with(counts.Sample{Count: 0.5, Inspected: 0.5})), "samples[1].count", "0.5"},
		{between(counts.Nonconformities, with(counts.Sample{Count: 1, Inspected: inf})), "samples[1].inspected", "+Inf"},
		{between(counts.Nonconformities, with(counts.Sample{Count: -1, Inspected: 1})), "samples[1].count", "-1"},
		{between(counts.Nonconformities, []counts.Sample{{Inspected: 1}, {Inspected: 2}}), "samples", "0"},
		{between(counts.Nonconforming, []counts.Sample{{Count: 4, Inspected: 4}, {Count: 2, Inspected: 2}}), "samples", "1"},
		{unequal(component, nil), "samples", "0"}, {unequal(counts.Component{}, good), "samples", "2"},
		{unequal(component, with(counts.Sample{Inspected: nan})), "samples[1].inspected", "NaN"},
		{laney([]float64{1, 2}, []bool{false}), "breakBefore", "1"}, {laney([]float64{1, nan}, nil), "z[1]", "NaN"},
		{laney([]float64{-inf, 1}, nil), "z[0]", "-Inf"},
		{proportion(3, 0), "inspected", "0"}, {proportion(4, 3), "nonconforming", "4"}, {proportion(1, 1e12+1), "inspected", "1.000000000001e+12"},
		{proportion(0.5, 3), "nonconforming", "0.5"}, {rate(3, 0), "inspected", "0"}, {rate(-1, 2), "nonconformities", "-1"},
		{rate(nan, 2), "nonconformities", "NaN"}, {rate(1, nan), "inspected", "NaN"},
	} {
		if tc.field == "" {
			if tc.err != nil {
				t.Errorf("refused: %v", tc.err)
			}
			continue
		}
		var refusal *counts.Error
		if !errors.As(tc.err, &refusal) || refusal.Field != tc.field || refusal.Value != tc.value {
			t.Errorf("got %v, want a refusal of %s %s", tc.err, tc.field, tc.value)
		} else if text := tc.err.Error(); !strings.HasPrefix(text, tc.field+": "+tc.value+": ") {
			t.Errorf("text %q", text)
		}
	}
}

func TestLinesOfARefusedTail(t *testing.T) {
	law := mustPoisson(t, 5)
	for _, tail := range []float64{0, -1, 0.6, 1e-13, nan, inf} {
		u, above, okUpper := counts.Upper(law, tail)
		l, below, okLower := counts.Lower(law, tail)
		if okUpper || okLower || !math.IsNaN(u+above) || !math.IsNaN(l+below) {
			t.Errorf("tail %g: %g %g %t, %g %g %t", tail, u, above, okUpper, l, below, okLower)
		}
	}
}
