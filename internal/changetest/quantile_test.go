package changetest_test

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"

	"limitary/internal/changetest"
	"limitary/internal/limits"
)

func near(got, want, relative float64) bool {
	return math.Abs(got-want) <= relative*math.Max(math.Abs(want), 1e-300)
}

// Student's t has closed forms at one and two degrees of freedom: tan(π(p-1/2)), and (2p-1)/√(2p(1-p)); with none of an
// end it is the normal law, whose 0.975 quantile is 1.959963984540054 (printed in any table, from memory).
func TestTQuantilesInClosedForm(t *testing.T) {
	for _, p := range []float64{0.6, 0.9, 0.975, 0.9995} {
		if got, want := changetest.TQuantile(p, 1), math.Tan(math.Pi*(p-0.5)); !near(got, want, 1e-9) {
			t.Errorf("t(1) at %g: got %.12g, want %.12g", p, got, want)
		}
		if got, want := changetest.TQuantile(p, 2), (2*p-1)/math.Sqrt(2*p*(1-p)); !near(got, want, 1e-9) {
			t.Errorf("t(2) at %g: got %.12g, want %.12g", p, got, want)
		}
	}
	if got := changetest.TQuantile(0.975, math.Inf(1)); !near(got, 1.959963984540054, 1e-12) {
		t.Errorf("normal: got %.15g", got)
	}
}

// The chance beyond a quantile, by integrating the density, gives back the level; fractional degrees of freedom too.
func TestTIntegrates(t *testing.T) {
	for _, v := range []float64{1.3, 2.7, 6.5, 29.9, 250.25} {
		q := changetest.TQuantile(0.975, v)
		above, _ := math.Lgamma((v + 1) / 2)
		below, _ := math.Lgamma(v / 2)
		constant := math.Exp(above-below) / math.Sqrt(v*math.Pi)
		inside := quad.Fixed(func(x float64) float64 { return constant * math.Pow(1+x*x/v, -(v+1)/2) }, 0, q, 400, nil, 0)
		if !near(2*inside, 0.95, 1e-9) {
			t.Errorf("t(%g): the density within ±%g integrates to %.12g, want 0.95", v, q, 2*inside)
		}
		if p := changetest.TTwoSided(-q, v); !near(p, 0.05, 1e-9) {
			t.Errorf("t(%g): got a two-sided p of %.12g at its own quantile, want 0.05", v, p)
		}
	}
}

// With two degrees of freedom above, F has the quantile (v/2)((1-p)^(-2/v) - 1); with two below, ((p^(-2/v)) - 1)·v/2
// inverted; with one above it is t².
func TestFQuantilesInClosedForm(t *testing.T) {
	for _, v := range []float64{1.5, 4, 11.7, 90} {
		for _, p := range []float64{0.025, 0.5, 0.975} {
			want := v / 2 * (math.Pow(1-p, -2/v) - 1)
			if got := changetest.FQuantile(p, 2, v); !near(got, want, 1e-8) {
				t.Errorf("F(2, %g) at %g: got %.12g, want %.12g", v, p, got, want)
			}
			want = 1 / (v / 2 * (math.Pow(p, -2/v) - 1))
			if got := changetest.FQuantile(p, v, 2); !near(got, want, 1e-8) {
				t.Errorf("F(%g, 2) at %g: got %.12g, want %.12g", v, p, got, want)
			}
		}
		root := changetest.TQuantile(0.975, v)
		if got := changetest.FQuantile(0.95, 1, v); !near(got, root*root, 1e-8) {
			t.Errorf("F(1, %g): got %.12g, want t², %.12g", v, got, root*root)
		}
	}
}

// The density of F, integrated over the logarithm of the ratio, gives back the level; so does the mirrored upper tail.
func TestFIntegrates(t *testing.T) {
	for _, v := range [][2]float64{{3.3, 8.1}, {15.6, 24.4}, {61, 30.5}, {124, 700}} {
		a, b := v[0], v[1]
		la, _ := math.Lgamma(a / 2)
		lb, _ := math.Lgamma(b / 2)
		lc, _ := math.Lgamma((a + b) / 2)
		density := func(u float64) float64 { // of ln F
			return math.Exp(lc - la - lb + a/2*(math.Log(a/b)+u) - (a+b)/2*math.Log1p(a/b*math.Exp(u)))
		}
		low, high := changetest.FQuantile(0.025, a, b), changetest.FQuantile(0.975, a, b)
		if got := quad.Fixed(density, math.Log(low), math.Log(high), 400, nil, 0); !near(got, 0.95, 1e-8) {
			t.Errorf("F(%g, %g): the density between the quantiles integrates to %.12g, want 0.95", a, b, got)
		}
		for _, f := range []float64{low, high} {
			if p := changetest.FTwoSided(f, a, b); !near(p, 0.05, 1e-7) {
				t.Errorf("F(%g, %g): got a two-sided p of %.12g at its own quantile %g, want 0.05", a, b, p, f)
			}
		}
	}
}

// χ² with two degrees of freedom is exponential: the limit of F(2, v), in both directions.
func TestFHasItsLimits(t *testing.T) {
	end := math.Inf(1)
	for _, p := range []float64{0.025, 0.975} {
		if got, want := changetest.FQuantile(p, 2, end), -math.Log1p(-p); !near(got, want, 1e-9) {
			t.Errorf("F(2, ∞) at %g: got %.12g, want %.12g", p, got, want)
		}
		if got, want := changetest.FQuantile(p, end, 2), -1/math.Log(p); !near(got, want, 1e-9) {
			t.Errorf("F(∞, 2) at %g: got %.12g, want %.12g", p, got, want)
		}
		if got, want := changetest.FQuantile(p, 30, 9e6), changetest.FQuantile(p, 30, end); !near(got, want, 1e-5) {
			t.Errorf("F(30, 9e6) at %g: got %.12g, want nearly %.12g", p, got, want)
		}
		if got := changetest.FQuantile(p, end, end); got != 1 {
			t.Errorf("F(∞, ∞): got %g, want 1", got)
		}
	}
	if got, want := changetest.FTwoSided(3, 2, end), 2*math.Exp(-3); !near(got, want, 1e-9) {
		t.Errorf("F(2, ∞) beyond 3, twice: got %.12g, want %.12g", got, want)
	}
}

// Γ(z+1) = zΓ(z) makes chiMean(v)·chiMean(v+1) = √(v/(v+1)), also where the series takes over; whole degrees of freedom
// are c4 of one reading more, and 1 has √(2/π).
func TestChiMean(t *testing.T) {
	for _, v := range []float64{0.5, 1, 2.25, 17.3, 150, 299.5, 300, 5000} {
		if got, want := changetest.ChiMean(v)*changetest.ChiMean(v+1), math.Sqrt(v/(v+1)); !near(got, want, 1e-11) {
			t.Errorf("chiMean(%g)·chiMean(%g): got %.14g, want %.14g", v, v+1, got, want)
		}
	}
	for _, n := range []int{2, 3, 10, 100} {
		if c4, _ := limits.C4(n); !near(changetest.ChiMean(float64(n-1)), c4, 1e-12) {
			t.Errorf("chiMean(%d): got %.14g, want c4 %.14g", n-1, changetest.ChiMean(float64(n-1)), c4)
		}
	}
	if !near(changetest.ChiMean(1), math.Sqrt(2/math.Pi), 1e-13) {
		t.Errorf("chiMean(1): got %.14g", changetest.ChiMean(1))
	}
}

// Welch's degrees of freedom lie between the smaller of the two and their sum, which they reach where variance goes with
// freedom; with one variance gone they are the other's.
func TestWelchFreedom(t *testing.T) {
	for _, c := range []struct{ now, nowFreedom, old, oldFreedom, want float64 }{
		{1. / 10, 9, 1. / 10, 9, 18},
		{2, 7, 0, 1, 7},
		{0, 3, 2, 11, 11},
		{3, 30, 1, math.Inf(1), 30 * 16. / 9},
		{4, 8, 2, 4, 36 / (16./8 + 4./4)},
	} {
		if got := changetest.WelchFreedom(c.now, c.nowFreedom, c.old, c.oldFreedom); !near(got, c.want, 1e-12) {
			t.Errorf("%+v: got %g", c, got)
		}
	}
	for i := range 50 {
		x := float64(i+1) / 10
		got := changetest.WelchFreedom(x, 12, 1, 7)
		if got < 7-1e-9 || got > 19+1e-9 {
			t.Errorf("variances %g and 1: got %g, want 7 to 19", x, got)
		}
	}
}
