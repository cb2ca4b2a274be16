package counts_test

import (
	"testing"

	"limitary/internal/counts"
)

// BenchmarkLines computes both action lines of one sample, as a judge does for every point whose size differs.
func BenchmarkLines(b *testing.B) {
	for _, tc := range []struct {
		name string
		law  counts.Law
	}{
		{"Poisson-4", mustPoisson(b, 4)},
		{"Poisson-500", mustPoisson(b, 500)},
		{"binomial-50-0.05", mustBinomial(b, 50, 0.05)},
		{"binomial-1e5-0.005", mustBinomial(b, 1e5, 0.005)},
		{"binomial-1e5-0.5", mustBinomial(b, 1e5, 0.5)},
		{"binomial-1e9-0.5", mustBinomial(b, 1e9, 0.5)},
	} {
		b.Run(tc.name, func(b *testing.B) {
			sum := 0.0
			for b.Loop() {
				u, _, _ := counts.Upper(tc.law, 0.00135)
				l, _, _ := counts.Lower(tc.law, 0.00135)
				sum += u + l
			}
			if sum <= 0 {
				b.Fatal("no lines")
			}
		})
	}
}
