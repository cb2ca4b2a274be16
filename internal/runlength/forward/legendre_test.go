package forward_test

import (
	"math"
	"testing"

	"limitary/internal/runlength/forward"
)

// n nodes integrate every power below 2n exactly, whatever n.
func TestNodesIntegratePowers(t *testing.T) {
	for n := 1; n <= 60; n++ {
		ts, ws := forward.Nodes(n)
		for power := 0; power < 2*n; power++ {
			sum := 0.0
			for i, x := range ts {
				sum += ws[i] * math.Pow(x, float64(power))
			}
			want := 0.0
			if power%2 == 0 {
				want = 2 / float64(power+1)
			}
			if math.Abs(sum-want) > 1e-13 {
				t.Errorf("%d nodes, power %d: %v, want %v", n, power, sum, want)
			}
		}
	}
}

// A projection gives back the polynomial it was made of.
func TestProjectRecoversPolynomials(t *testing.T) {
	m := forward.Project(6, 1, 10, func(x float64, into []float64) { into[0] = 3 - x + 2*x*x*x })
	p := make([]float64, 6)
	for _, x := range []float64{-1, -0.3, 0.8} {
		forward.Legendre(x, p)
		got := 0.0
		for n, v := range p {
			got += m.Data[n] * v
		}
		if want := 3 - x + 2*x*x*x; math.Abs(got-want) > 1e-13 {
			t.Errorf("at %v: %v, want %v", x, got, want)
		}
	}
}
