package curve_test

import (
	"context"
	"errors"
	"math"
	"testing"

	"limitary/internal/runlength/curve"
	"limitary/internal/runlength/effort"
)

func near(t *testing.T, what string, got, want, relative float64) {
	t.Helper()
	if !(math.Abs(got-want) <= relative*math.Abs(want)) {
		t.Errorf("%s: got %.15g, want %.15g", what, got, want)
	}
}

func TestGeometricInClosedForm(t *testing.T) {
	for _, p := range []float64{0.5, 0.0027, 1e-12, 1e-24} {
		c := curve.Geometric(p)
		near(t, "mean", c.Mean(), 1/p, 1e-14)
		near(t, "deviation", c.SD(), math.Sqrt(1-p)/p, 1e-12)
		for _, n := range []int{1, 2, 1000} {
			near(t, "within", c.Within(n), -math.Expm1(float64(n)*math.Log1p(-p)), 1e-14)
			near(t, "at", c.At(n), p*math.Exp(float64(n-1)*math.Log1p(-p)), 1e-12)
		}
		near(t, "median", c.Quantile(0.5), math.Ceil(math.Log(0.5)/math.Log1p(-p)), 1e-9)
	}
}

func TestIndependentCurvesMultiply(t *testing.T) {
	table := curve.Curve{Survive: []float64{1, 0.9, 0.6}, Signalled: []float64{0, 0.1, 0.4}, Hazard: 0.25}
	c := curve.Independent(table, curve.Geometric(0.1))
	for n := range 12 {
		near(t, "survival", c.Beyond(n), table.Beyond(n)*math.Pow(0.9, float64(n)), 1e-14)
		near(t, "complement", c.Within(n)+c.Beyond(n), 1, 1e-14)
	}
	sum := 0.0
	for n := range 2000 {
		sum += c.Beyond(n)
	}
	near(t, "mean", c.Mean(), sum, 1e-13)
}

// two is a chain of two states with known eigenvalues: from the first half of it stays and half moves on; from the second
// a part p signals.
type two struct{ a, b, olda, oldb, p float64 }

func (c *two) Advance() (float64, float64) {
	c.olda, c.oldb = c.a, c.b
	c.a, c.b = c.olda/2, c.olda/2+(1-c.p)*c.oldb
	return c.p * c.oldb, 0
}
func (c *two) Mass() float64 { return c.a + c.b }
func (c *two) Change(f float64) float64 {
	return math.Abs(c.a-f*c.olda) + math.Abs(c.b-f*c.oldb)
}
func (c *two) Cost() int64 { return 4 }

func TestFollowSumsTheTail(t *testing.T) {
	for _, p := range []float64{0.3, 1e-3, 1e-9} {
		c, err := curve.Follow(&two{a: 1, p: p}, 2, effort.New(context.Background(), 0))
		if err != nil {
			t.Fatal(err)
		}
		near(t, "mean", c.Mean(), 2+1/p, 1e-11) // two points in the first state, then a geometric number
		near(t, "deviation", c.SD(), math.Sqrt(2+(1-p)/(p*p)), 1e-9)
		if off := math.Abs(c.Mean()/(2+1/p) - 1); off > c.RelativeError {
			t.Errorf("p %v: off by %v, the bound is %v", p, off, c.RelativeError)
		}
	}
	if _, err := curve.Follow(&two{a: 1}, 2, effort.New(context.Background(), 0)); !errors.Is(err, curve.ErrNeverSignals) {
		t.Errorf("without a signal: %v, want ErrNeverSignals", err)
	}
}
