package changetest_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/limits"
)

// autoregression draws n values of mean 0 and standard deviation 1 with lag-1 correlation rho.
func autoregression(r *rand.Rand, rho float64, n int) []float64 {
	xs := make([]float64, n)
	x := r.NormFloat64()
	for i := range xs {
		xs[i], x = x, rho*x+math.Sqrt(1-rho*rho)*r.NormFloat64()
	}
	return xs
}

// meanVariance is that of the mean of k such values, by adding up all covariances.
func meanVariance(rho float64, k int) float64 {
	sum := float64(k)
	for lag := 1; lag < k; lag++ {
		sum += 2 * float64(k-lag) * math.Pow(rho, float64(lag))
	}
	return sum / float64(k) / float64(k)
}

// The corrected correlation is nearly unbiased where the plain one falls short by (1+3ρ)/n.
func TestCorrelationIsCorrected(t *testing.T) {
	const rho, n, runs = 0.5, 40, 1000
	r := rand.New(rand.NewPCG(6, 6))
	plain, used, squares := 0.0, 0.0, 0.0
	for range runs {
		c := mustCompare(t, changetest.Request{InForce: standard(), Groups: groupsOf(autoregression(r, rho, n), 1, 0, 1), Looks: 1}).Correlation
		plain, used, squares = plain+c.Lag1/runs, used+c.Used/runs, squares+c.Used*c.Used/runs
		if want := n * (1 - c.Used) / (1 + c.Used); !near(c.EffectiveForCentre, want, 1e-12) || c.EffectiveForCentre > n || c.Pairs != n-1 {
			t.Fatalf("got %+v, want %g effective results for the centre", c, want)
		}
		if q := c.Used * c.Used; !near(c.EffectiveForSpread, n*(1-q)/(1+q), 1e-12) {
			t.Fatalf("got %+v, want %g effective results for the spread", c, n*(1-q)/(1+q))
		}
	}
	chance := 4 * math.Sqrt((squares-used*used)/runs)
	atMost(t, "distance of the plain correlation from its expectation", math.Abs(plain-rho+(1+3*rho)/n), 0.01+chance)
	atMost(t, "distance of the corrected one from the truth", math.Abs(used-rho), 0.012+chance)
}

// What each side's mean is taken to vary by is the sum of all covariances. The old sigma is what its estimator gives of
// such results: σ√(1-ρ) by moving ranges; by the overall sigma, and on the new side, the root of k(σ²-Var x̄)/(k-1),
// which the readings here are scaled to have exactly. τ stands for a finite sum that falls short of it, by 2.3 % here at
// ρ = 0.5, so the variances may be too large by that and never too small.
func TestMeansVaryAsTheirCovariancesAddUp(t *testing.T) {
	for _, rho := range []float64{0, 0.2, 0.5} {
		const k = 60
		truth := meanVariance(rho, k)
		expected := math.Sqrt(k * (1 - truth) / (k - 1))
		xs := laws[0].draw(rand.New(rand.NewPCG(13, 13)), k)
		for i, s := 0, deviation(xs); i < k; i++ {
			xs[i] *= expected / s
		}
		for estimator, sigma := range map[limits.Estimator]float64{limits.MeanMovingRange: math.Sqrt(1 - rho), limits.Overall: expected} {
			f := standard()
			f.Groups, f.Readings, f.Estimator, f.Sigma, f.DegreesOfFreedom = k, k, estimator, 1, 1e9
			now, old := changetest.VarianceOfMeans(f, xs, rho)
			for _, got := range []float64{now, old * sigma * sigma} {
				if got < 0.9999*truth || got > 1.025*truth {
					t.Errorf("ρ %g, %s: got variances %.5f and %.5f, want %.5f", rho, estimator, now, old*sigma*sigma, truth)
				}
			}
		}
	}
}

// The logarithm of τ = n over the effective number varies by 4/((1-ρ²)·pairs), and the degrees of freedom of the test
// pay for it: against a target they are 2 over that plus 2/ν of the scatter, ν = (n-1)(1-r²)/(1+r²); those of
// the overall sigma are ν/φ, and the old ones go down alike.
func TestUncertaintyOfTheCorrelationIsPaidFor(t *testing.T) {
	const rho, n, runs = 0.4, 300, 700
	r := rand.New(rand.NewPCG(14, 14))
	f := standard()
	f.CentreTarget, f.Estimator = true, limits.Overall
	sum, squares := 0.0, 0.0
	for range runs {
		res := mustCompare(t, changetest.Request{InForce: f, Groups: groupsOf(autoregression(r, rho, n), 1, 0, 1), Looks: 1})
		x := math.Log(n / res.Correlation.EffectiveForCentre)
		sum, squares = sum+x, squares+x*x
		q := res.Correlation.Used * res.Correlation.Used
		want := 2 / (2/((n-1)*(1-q)/(1+q)) + 4/((1-q)*(n-1)))
		if got := res.Centre.Test.Freedom; !near(got, want, 1e-9) {
			t.Fatalf("seed 14,14: got %.6f degrees of freedom, want %.6f", got, want)
		}
		spread, factor := res.Spread.Test, (1-q)/(1+q)/res.Tails
		if !near(spread.Freedom, (n-1)*factor, 1e-9) || !near(spread.FreedomBelow, f.DegreesOfFreedom*factor, 1e-9) {
			t.Fatalf("seed 14,14: got %+v, want %.6f and %.6f degrees of freedom", spread, (n-1)*factor, f.DegreesOfFreedom*factor)
		}
	}
	got, want := squares/runs-sum*sum/runs/runs, 4/((1-rho*rho)*(n-1))
	// A variance from that many runs has a relative standard error of √(2/runs); 0.1 is for the first order.
	if !near(got, want, 4*math.Sqrt(2./runs)+0.1) {
		t.Errorf("seed 14,14: got a variance of ln τ of %.5f, want %.5f", got, want)
	}
}
