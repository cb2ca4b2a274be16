package counts_test

import (
	"iter"
	"math"
	"math/big"
	"testing"

	"limitary/internal/counts"
)

// tails are those of 3 and 2 sigma, and odd ones.
var tails = []float64{0.00135, 0.02275, 0.001, 0.025, 1.0 / 3, 0.5, 0.0477, 3.17e-5, 1e-9, 1e-12}

// laws are some 2800, every so many of them made: Poisson means and binomial means from 0.05 to 500, sizes from 1 to 1e5,
// and all p mirrored.
func laws(tb testing.TB, every int) iter.Seq[*oracle] {
	var makers []func() *oracle
	poisson := func(mean float64) {
		makers = append(makers, func() *oracle { return poissonOracle(tb, mean) })
	}
	binomial := func(size, p float64) {
		makers = append(makers, func() *oracle { return binomialOracle(tb, size, p) })
	}
	for mean := 0.05; mean <= 500; mean *= 1.0075 {
		poisson(mean)
	}
	for _, mean := range []float64{1, 2, 3, 4, 5, 9, 10, 16, 25, 50, 99, 100, 101, 250, 500} {
		poisson(mean)
	}
	for _, size := range []float64{1, 2, 3, 4, 5, 7, 10, 20, 50, 100, 211, 500, 1000, 3000, 1e4, 3e4, 1e5} {
		for mean := 0.05; mean <= min(500, size/2); mean *= 1.15 {
			binomial(size, mean/size)
			binomial(size, 1-mean/size)
		}
		if size <= 1000 {
			binomial(size, 0.5)
		}
	}
	return func(yield func(*oracle) bool) {
		for i := 0; i < len(makers); i += every {
			if !yield(makers[i]()) {
				return
			}
		}
	}
}

// checkUpper holds one upper line to its definition.
func checkUpper(t *testing.T, o *oracle, tail float64) {
	t.Helper()
	u, realised, ok := counts.Upper(o.law, tail)
	_, above := o.tails(u)
	switch {
	case above.Cmp(exact(tail)) > 0:
		t.Errorf("%s tail %g: P(X > %g) = %g is more than asked", o.name, tail, u, above)
	case realised > tail || math.Abs(relative(realised, above)) > 1e-12:
		t.Errorf("%s tail %g: realised %g, want %g", o.name, tail, realised, above)
	case ok != (u < o.most):
		t.Errorf("%s tail %g: line %g is there: %t", o.name, tail, u, ok)
	}
	if u > 0 {
		if _, above := o.tails(u - 1); above.Cmp(exact(tail)) <= 0 {
			t.Errorf("%s tail %g: %g is not the least line, P(X > %g) = %g", o.name, tail, u, u-1, above)
		}
	}
}

func checkLower(t *testing.T, o *oracle, tail float64) {
	t.Helper()
	l, realised, ok := counts.Lower(o.law, tail)
	below, _ := o.tails(l - 1)
	switch {
	case below.Cmp(exact(tail)) > 0:
		t.Errorf("%s tail %g: P(X < %g) = %g is more than asked", o.name, tail, l, below)
	case realised > tail || math.Abs(relative(realised, below)) > 1e-12:
		t.Errorf("%s tail %g: realised %g, want %g", o.name, tail, realised, below)
	case ok != (l > 0):
		t.Errorf("%s tail %g: line %g is there: %t", o.name, tail, l, ok)
	case l > o.most:
		t.Errorf("%s tail %g: line %g is no count", o.name, tail, l)
	}
	if next, _ := o.tails(l); next.Cmp(exact(tail)) <= 0 {
		t.Errorf("%s tail %g: %g is not the greatest line, P(X < %g) = %g", o.name, tail, l, l+1, next)
	}
}

func TestLinesMeetTheirDefinition(t *testing.T) {
	for o := range laws(t, 1) {
		for _, tail := range tails {
			checkUpper(t, o, tail)
			checkLower(t, o, tail)
		}
	}
}

// TestTailsAtTheBoundary asks for tails that a count realises, rounded to float64, and for both neighbours.
func TestTailsAtTheBoundary(t *testing.T) {
	asked := 0
	for _, o := range []*oracle{
		poissonOracle(t, 0.05), poissonOracle(t, 3.7), poissonOracle(t, 42), poissonOracle(t, 500), binomialOracle(t, 1, 0.25),
		binomialOracle(t, 12, 0.1), binomialOracle(t, 50, 0.5), binomialOracle(t, 300, 0.97), binomialOracle(t, 1e5, 0.004),
	} {
		for k := 0; k < len(o.above); k += 1 + len(o.above)/150 {
			for _, table := range [][]*big.Float{o.above, o.atMost} {
				tail, _ := table[k].Float64()
				if counts.CheckTail(tail) != nil || tail == counts.TailMin || tail == counts.TailMax {
					continue
				}
				for _, at := range []float64{tail, math.Nextafter(tail, 0), math.Nextafter(tail, 1)} {
					checkUpper(t, o, at)
					checkLower(t, o, at)
					asked += 2
				}
			}
		}
	}
	if asked < 1000 {
		t.Errorf("only %d lines were asked for", asked)
	}
}

// TestExactTies tosses a coin: every tail is a whole number of 2^-n, which float64 holds and a logarithm does not.
func TestExactTies(t *testing.T) {
	for n := 1; n <= 52; n++ {
		law := mustBinomial(t, float64(n), 0.5)
		sum, ways := 0, 1
		for k := 0; ; k++ { // P(X <= k) = P(X >= n-k)
			sum += ways
			ways = ways * (n - k) / (k + 1)
			tail := math.Ldexp(float64(sum), -n)
			if tail > counts.TailMax {
				break
			}
			if tail < counts.TailMin {
				continue
			}
			if u, realised, _ := counts.Upper(law, tail); u != float64(n-k-1) || realised > tail || realised < tail*(1-1e-13) {
				t.Errorf("%d tosses, tail %g: upper line %g realising %g, want %d", n, tail, u, realised, n-k-1)
			}
			if l, realised, _ := counts.Lower(law, tail); l != float64(k+1) || realised > tail || realised < tail*(1-1e-13) {
				t.Errorf("%d tosses, tail %g: lower line %g realising %g, want %d", n, tail, l, realised, k+1)
			}
		}
	}
}

// TestMirroredLines: where 1-p is exact, nonconforming and conforming items have mirrored lines.
func TestMirroredLines(t *testing.T) {
	for _, size := range []float64{1, 2, 9, 64, 1000, 1e5, 1e7} {
		for _, p := range []float64{0, 1.0 / 1024, 1.0 / 64, 0.125, 0.25, 0.375, 0.5} {
			a, b := mustBinomial(t, size, p), mustBinomial(t, size, 1-p)
			for _, tail := range tails {
				u, above, okUpper := counts.Upper(a, tail)
				l, below, okLower := counts.Lower(b, tail)
				if u != size-l || okUpper != okLower || math.Abs(above-below) > 1e-12*above {
					t.Errorf("size %g p %g tail %g: upper %g (%g, %t), mirrored %g (%g, %t)",
						size, p, tail, u, above, okUpper, size-l, below, okLower)
				}
			}
		}
	}
}

// TestPoissonIsTheLimit: a binomial law of mean m and size n differs from the Poisson law by at most m/n in every
// probability (Le Cam's inequality, from memory).
func TestPoissonIsTheLimit(t *testing.T) {
	for _, mean := range []float64{0.05, 1, 7.5, 60, 500} {
		p := mustPoisson(t, mean)
		b := mustBinomial(t, 1e9, mean/1e9)
		for _, tail := range []float64{0.00135, 0.02275} {
			u, _, _ := counts.Upper(p, tail)
			ub, _, _ := counts.Upper(b, tail)
			l, _, _ := counts.Lower(p, tail)
			lb, _, _ := counts.Lower(b, tail)
			if u != ub || l != lb {
				t.Errorf("mean %g tail %g: lines %g %g, of 1e9 items %g %g", mean, tail, l, u, lb, ub)
			}
		}
		for _, size := range []float64{1e3, 1e6, 1e9} {
			b := mustBinomial(t, size, mean/size)
			for k := 0.0; k <= 2*mean+5; k++ {
				if d := math.Abs(counts.Above(b, k) - counts.Above(p, k)); d > 2*mean*mean/size+1e-12 {
					t.Errorf("mean %g size %g: P(X > %g) differs by %g", mean, size, k, d)
				}
			}
		}
	}
}

func TestLinesOfLawsThatAllowOneCount(t *testing.T) {
	for _, tc := range []struct {
		name         string
		law          counts.Law
		upper, lower float64
		hasU, hasL   bool
	}{
		{"zero value", counts.Law{}, 0, 0, true, false},
		{"mean 0", mustPoisson(t, 0), 0, 0, true, false},
		{"p 0", mustBinomial(t, 40, 0), 0, 0, true, false},
		{"p 1", mustBinomial(t, 40, 1), 40, 40, false, true},
		{"one item, p 0", mustBinomial(t, 1, 0), 0, 0, true, false},
		{"one item, p 1", mustBinomial(t, 1, 1), 1, 1, false, true},
		{"one item, often", mustBinomial(t, 1, 0.4), 1, 0, false, false},
		{"one item, hardly ever", mustBinomial(t, 1, 0.001), 0, 0, true, false},
		{"mean of almost nothing", mustPoisson(t, 1e-300), 0, 0, true, false},
		{"p of almost nothing", mustBinomial(t, 1e9, math.SmallestNonzeroFloat64), 0, 0, true, false},
	} {
		u, _, hasU := counts.Upper(tc.law, 0.00135)
		l, _, hasL := counts.Lower(tc.law, 0.00135)
		if u != tc.upper || l != tc.lower || hasU != tc.hasU || hasL != tc.hasL {
			t.Errorf("%s: lines %g (%t) and %g (%t), want %g (%t) and %g (%t)",
				tc.name, l, hasL, u, hasU, tc.lower, tc.hasL, tc.upper, tc.hasU)
		}
	}
	if _, realised, _ := counts.Upper(mustPoisson(t, 1e-200), 0.00135); math.Abs(realised/1e-200-1) > 1e-12 {
		t.Errorf("mean 1e-200 realises %g", realised)
	}
}
