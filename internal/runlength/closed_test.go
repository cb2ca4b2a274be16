package runlength_test

import (
	"fmt"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/runlength"
)

// closed is the tolerance of closed forms: ten digits.
const closed = 1e-10

func TestSinglePointLimitIsGeometric(t *testing.T) {
	for _, shift := range []float64{0, 0.7, -2, 5} {
		for _, ratio := range []float64{1, 1.5, 0.6} {
			row := mustRow(t, runlength.Request{Location: one(beyond(1, 1, 3)), Shifts: []float64{shift}, SigmaRatio: ratio, Horizons: []int{1, 10, 1000}})
			p := phi((-3-shift)/ratio) + phi((-3+shift)/ratio)
			what := fmt.Sprintf("shift %v ratio %v", shift, ratio)
			near(t, what+" ARL", row.ARL, 1/p, closed)
			near(t, what+" SDRL", row.SDRL, math.Sqrt(1-p)/p, 1e-9)
			for i, n := range []int{1, 10, 1000} {
				near(t, fmt.Sprintf("%s within %d", what, n), row.Within[i], -math.Expm1(float64(n)*math.Log1p(-p)), closed)
			}
			median := math.Max(1, math.Ceil(math.Log(0.5)/math.Log1p(-p)))
			if row.Quantiles[1] != median {
				t.Errorf("%s: median %v, want %v", what, row.Quantiles[1], median)
			}
		}
	}
}

// The mean of the waiting time for n in a row is (1-p^n)/((1-p)p^n), its variance (1-(2n+1)(1-p)p^n-p^(2n+1))/((1-p)p^n)²
// (Feller, An Introduction to Probability Theory I, XIII.7; from memory).
func TestRunsHaveFellersMoments(t *testing.T) {
	check := func(what string, row runlength.Row, p float64, n int) {
		t.Helper()
		q, pn := 1-p, math.Pow(p, float64(n))
		near(t, what+" ARL", row.ARL, (1-pn)/(q*pn), closed)
		near(t, what+" SDRL", row.SDRL, math.Sqrt(1-float64(2*n+1)*q*pn-pn*pn*p)/(q*pn), 1e-9)
	}
	for _, shift := range []float64{0, 1} {
		p := phi(1-shift) - phi(-1-shift)
		check("within", mustRow(t, runlength.Request{Location: one(within(15, 1)), Shifts: []float64{shift}}), p, 15)
		s := rules.Spec{Kind: rules.Outside, N: 8, Z: 1, OneSideOK: true}
		check("outside", mustRow(t, runlength.Request{Location: one(s), Shifts: []float64{shift}}), 1-p, 8)
		check("upper side", mustRow(t, runlength.Request{Location: one(on(sameSide(9), rules.UpperOnly)), Shifts: []float64{shift}}), phi(shift), 9)
	}
	for n := 2; n <= 20; n++ { // both sides at shift 0: 2^n - 1
		near(t, fmt.Sprintf("%d same side", n), mustRow(t, runlength.Request{Location: one(sameSide(n))}).ARL, math.Pow(2, float64(n))-1, closed)
	}
}

// The mean is Σ P(no n rising in a row among t points) = Σ a_t/t!, with a_t the permutations of t without such a run.
// That is their exponential generating function 1/Σ_k (x^(kn)/(kn)! - x^(kn+1)/(kn+1)!) at x = 1 (David and Barton,
// Combinatorial Chance, 1962; from memory).
func TestTrendsHaveTheCombinatorialMean(t *testing.T) {
	for n := 2; n <= 9; n++ {
		sum := 0.0
		for k := 0; k*n < 60; k++ {
			sum += 1/math.Gamma(float64(k*n)+1) - 1/math.Gamma(float64(k*n)+2)
		}
		for _, side := range []rules.Sides{rules.UpperOnly, rules.LowerOnly} {
			for _, shift := range []float64{0, 2} { // trends do not see a shift
				row := mustRow(t, runlength.Request{Location: one(on(trend(n), side)), Shifts: []float64{shift}})
				near(t, fmt.Sprintf("trend of %d", n), row.ARL, 1/sum, closed)
			}
		}
	}
}

// An EWMA of weight 1 is the point itself. A CUSUM with next to no interval signals where a point passes the reference
// value.
func TestAveragesAndSumsAtTheirLimits(t *testing.T) {
	for _, asymptotic := range []bool{true, false} {
		s := ewma(1, 3)
		s.Asymptotic = asymptotic
		row := mustRow(t, runlength.Request{Location: one(s), Shifts: []float64{0.5}})
		near(t, "EWMA of weight 1", row.ARL, 1/(phi(-2.5)+phi(-3.5)), 1e-10)
	}
	row := mustRow(t, runlength.Request{Location: one(on(cusum(1, 1e-9, 0), rules.UpperOnly)), Shifts: []float64{0.5}})
	near(t, "CUSUM without an interval", row.ARL, 1/phi(-0.5), 1e-8)
}

// Zone chains a second way: the linear system of mean run lengths by dense elimination.
func TestZoneSetsAgreeWithElimination(t *testing.T) {
	for name, specs := range map[string][]rules.Spec{
		"western-electric-1956": mustSet(t, "western-electric-1956"),
		"nordic without trend":  list(beyond(1, 1, 3), beyond(2, 3, 2), beyond(6, 7, 0)),
		"odd ones":              list(beyond(3, 7, 1.2), outside(5, 0.8), within(6, 1), rules.Spec{Kind: rules.Span, Z: 4}),
	} {
		for _, shift := range []float64{0, 1} {
			matrix, n, err := runlength.Chain(specs, shift)
			if err != nil {
				t.Fatal(err)
			}
			a, b := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
			for i := range n {
				b.SetVec(i, 1)
				for j := range n {
					a.Set(i, j, -matrix[i*n+j])
				}
				a.Set(i, i, 1+a.At(i, i))
			}
			var mean, second mat.VecDense
			if err := mean.SolveVec(a, b); err != nil {
				t.Fatal(err)
			}
			row := mustRow(t, runlength.Request{Location: runlength.Trace{Rules: specs}, Shifts: []float64{shift}})
			near(t, name+" ARL", row.ARL, mean.AtVec(0), 1e-10)
			if math.Abs(row.ARL-mean.AtVec(0)) > row.ErrorBound+1e-11*row.ARL {
				t.Errorf("%s: off by %v, the bound is %v", name, row.ARL-mean.AtVec(0), row.ErrorBound)
			}
			for i := range n { // E N² = 2·(I-Q)⁻¹ m - m
				b.SetVec(i, 2*mean.AtVec(i)-1)
			}
			if err := second.SolveVec(a, b); err != nil {
				t.Fatal(err)
			}
			near(t, name+" SDRL", row.SDRL, math.Sqrt(second.AtVec(0)-mean.AtVec(0)*mean.AtVec(0)), 1e-8)
		}
	}
}

// The mean is the sum of what survives, whichever way the curve is read.
func TestFiguresOfOneCurveAgree(t *testing.T) {
	for name, r := range map[string]runlength.Request{
		"zones": {Location: runlength.Trace{Rules: mustSet(t, "western-electric-1956")}},
		"order": {Location: one(beyond(1, 1, 3), trend(6))},
		"ewma":  {Location: one(ewma(0.2, 2.5))},
		"cusum": {Location: one(cusum(0.5, 3, 1.5)), Shifts: []float64{0.5}},
	} {
		row := mustRow(t, r)
		sum, squares := 0.0, 0.0
		for n := 0; n < 40000; n++ {
			sum += row.Curve.Beyond(n)
			squares += float64(2*n+1) * row.Curve.Beyond(n)
		}
		near(t, name+": sum of survival", sum, row.ARL, 1e-9)
		near(t, name+": SDRL", math.Sqrt(squares-sum*sum), row.SDRL, 1e-7)
		for _, n := range []int{1, 7, 50, 500} {
			near(t, name+": survival and its complement", row.Curve.Within(n)+row.Curve.Beyond(n), 1, 1e-10)
		}
		for _, p := range []float64{0.001, 0.1, 0.5, 0.9, 0.9999} {
			q := int(row.Curve.Quantile(p))
			if row.Curve.Within(q) < p || q > 1 && row.Curve.Within(q-1) >= p {
				t.Errorf("%s: quantile %v is %d, with P(N<=q) %v and P(N<q) %v", name, p, q, row.Curve.Within(q), row.Curve.Within(q-1))
			}
		}
	}
}

func TestMirrorImagesAreAlike(t *testing.T) {
	upper := list(on(beyond(2, 3, 1.5), rules.UpperOnly), on(trend(5), rules.UpperOnly), on(sameSide(6), rules.UpperOnly))
	lower := list(on(beyond(2, 3, 1.5), rules.LowerOnly), on(trend(5), rules.LowerOnly), on(sameSide(6), rules.LowerOnly))
	for _, shift := range []float64{0, 0.8} {
		a := mustRow(t, runlength.Request{Location: runlength.Trace{Rules: upper}, Shifts: []float64{shift}})
		b := mustRow(t, runlength.Request{Location: runlength.Trace{Rules: lower}, Shifts: []float64{-shift}})
		near(t, "mirrored ARL", a.ARL, b.ARL, 1e-11)
	}
}

// A chart of means in process sigmas is one in standard errors at √n times the shift, and shifts of the mean leave the
// dispersion trace alone.
func TestShiftUnits(t *testing.T) {
	r := runlength.Request{Kind: chart.XbarR, SubgroupSize: 4, Location: one(beyond(1, 1, 3)), Dispersion: one(beyond(1, 1, 3)), Shifts: []float64{0.5}, ShiftUnit: runlength.ProcessSigmas}
	a := mustRow(t, r)
	r.Shifts, r.ShiftUnit = []float64{1}, runlength.StandardErrors
	b := mustRow(t, r)
	near(t, "units", a.ARL, b.ARL, 1e-14)
	location := mustRow(t, runlength.Request{Location: one(beyond(1, 1, 3)), Shifts: []float64{1}})
	r.Location, r.Shifts = runlength.Trace{}, []float64{3}
	dispersion := mustRow(t, r)
	p, q := 1/location.ARL, 1/dispersion.ARL
	near(t, "two independent limits", b.ARL, 1/(p+q-p*q), 1e-12)
}
