package diagnostics_test

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"limitary/internal/diagnostics"
	"limitary/testdata"
)

// reference reads the worked example and the p-values at critical values.
func reference(tb testing.TB) (values []float64, published map[string]float64, ps map[string]float64) {
	tb.Helper()
	raw, err := testdata.Files.ReadFile("worked-examples.json")
	if err != nil {
		tb.Fatal(err)
	}
	var file struct {
		P        map[string]float64 `json:"ad_p_at_critical"`
		Examples []struct {
			ID     string
			Data   json.RawMessage
			Checks []struct {
				Quantity   string
				Recomputed float64
			}
		}
	}
	if err := json.Unmarshal(raw, &file); err != nil {
		tb.Fatal(err)
	}
	for _, e := range file.Examples {
		if e.ID != "anderson-darling-chicks" {
			continue
		}
		var data struct{ X []float64 }
		if err := json.Unmarshal(e.Data, &data); err != nil {
			tb.Fatal(err)
		}
		published = map[string]float64{}
		for _, c := range e.Checks {
			published[c.Quantity] = c.Recomputed
		}
		values = data.X
	}
	return values, published, file.P
}

func TestAndersonDarlingOfThePublishedExample(t *testing.T) {
	values, published, ps := reference(t)
	want, ok := published["A2 case 3"]
	if !ok || len(values) != 20 {
		t.Fatalf("the example has %d values and A² %v", len(values), want)
	}
	_, sorted := diagnostics.Standardise(values)
	adjusted, p := diagnostics.AndersonDarling(sorted)
	factor := 1 + 0.75/20 + 2.25/400
	if got := adjusted / factor; math.Abs(got-want) > 1e-9 {
		t.Errorf("A² is %.12f, want %.12f", got, want)
	}
	if p < 0.8 || p > 0.9 { // 0.214·1.043 lies in the second branch, far from every critical value
		t.Errorf("p is %v", p)
	}
	if len(ps) != 4 {
		t.Fatalf("%d p-values, want 4", len(ps))
	}
	for text, want := range ps {
		a, err := strconv.ParseFloat(text, 64)
		if err != nil {
			t.Fatal(err)
		}
		if got := diagnostics.AndersonDarlingP(a); math.Abs(got-want) > 1e-12 {
			t.Errorf("p at %v is %.15f, want %.15f", a, got, want)
		}
	}
}

// The definition: A² = n∫(F_n - F)²/(F(1-F)) dF, integrated between the values.
func TestAndersonDarlingAgainstItsDefinition(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 1))
	for _, n := range []int{8, 13, 40} {
		values := make([]float64, n)
		for i := range values {
			values[i] = math.Exp(r.NormFloat64())
		}
		_, z := diagnostics.Standardise(values)
		total, edges := 0.0, []float64{0}
		for _, x := range z {
			edges = append(edges, distuv.UnitNormal.CDF(x))
		}
		edges = append(edges, 1)
		for k := range n + 1 { // F_n is k/n between edges k and k+1
			f := float64(k) / float64(n)
			// (f-u)²/(u(1-u)) = -1 + f²/u + (1-f)²/(1-u) has the integral below.
			part := func(u float64) float64 {
				v := -u
				if f > 0 {
					v += f * f * math.Log(u)
				}
				if f < 1 {
					v -= (1 - f) * (1 - f) * math.Log1p(-u)
				}
				return v
			}
			total += part(edges[k+1]) - part(edges[k])
		}
		want := total * float64(n)
		size := float64(n)
		got, _ := diagnostics.AndersonDarling(z)
		if got /= 1 + 0.75/size + 2.25/(size*size); math.Abs(got-want) > 1e-10*(1+want) {
			t.Errorf("n = %d: A² is %.12f, by its definition %.12f", n, got, want)
		}
	}
}

func TestAndersonDarlingPFallsFromOneToNone(t *testing.T) {
	last := 1.0
	for a := 0.0; a < 400; a += 0.01 {
		p := diagnostics.AndersonDarlingP(a)
		if !(p >= 0 && p <= 1) || p > last+0.001 { // branches join within 0.001
			t.Fatalf("p(%v) = %v after %v", a, p, last)
		}
		last = p
	}
}

func TestLogNormalBelow(t *testing.T) {
	// Both sides of the change of method, and ln Φ(-40) = -804.6084420137538 (computed with 50 digits).
	if d := diagnostics.LogNormalBelow(-29.999999999) - diagnostics.LogNormalBelow(-30.000000001); math.Abs(d-30.033*2e-9) > 1e-9 {
		t.Errorf("a step of %v at the change of method", d)
	}
	if got := diagnostics.LogNormalBelow(-40); math.Abs(got+804.6084420137538) > 1e-9 {
		t.Errorf("ln Φ(-40) = %.12f", got)
	}
}

// Goal: skewness and its p-value against the plain formula and against simulation in both tails.
func TestSkewnessAgainstSimulation(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	const runs = 20_000
	for _, n := range []int{8, 25} {
		below := map[float64]int{0.01: 0, 0.1: 0, 0.5: 0}
		for range runs {
			values := make([]float64, n)
			for i := range values {
				values[i] = r.NormFloat64()
			}
			z, _ := diagnostics.Standardise(values)
			b, p := diagnostics.SkewnessP(z)
			for level := range below {
				if p < level {
					below[level]++
				}
			}
			cubes := 0.0
			for _, x := range z {
				cubes += x * x * x
			}
			size := float64(n)
			if want := cubes / size / math.Pow((size-1)/size, 1.5); math.Abs(b-want) > 1e-9 {
				t.Fatalf("√b1 = %v, want %v", b, want)
			}
		}
		for level, count := range below {
			if rate := float64(count) / runs; math.Abs(rate-level) > 0.1*level+fourErrors(level, runs) {
				t.Errorf("n = %d: p is below %v in %.4f", n, level, rate)
			}
		}
	}
}

// Every split by hand: sums of squares about both means.
func TestBestSplitAgainstEverySplit(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 3))
	squares := func(xs []float64) float64 {
		mean, total := 0.0, 0.0
		for _, x := range xs {
			mean += x / float64(len(xs))
		}
		for _, x := range xs {
			total += (x - mean) * (x - mean)
		}
		return total
	}
	for trial := range 300 {
		n := 10 + r.IntN(25)
		values := make([]float64, n)
		for i := range values {
			values[i] = r.NormFloat64()
			if trial%2 == 0 {
				values[i] = math.Round(2 * values[i]) // ties, which no split may part
			}
		}
		values[0], values[1] = 5, -5
		_, z := diagnostics.Standardise(values)
		least, want := max(2, (n+9)/10), 0.0
		for k := least; k <= n-least; k++ {
			if z[k-1] != z[k] {
				want = max(want, 1-(squares(z[:k])+squares(z[k:]))/squares(z))
			}
		}
		if got, _ := diagnostics.BestSplit(z); math.Abs(got-want) > 1e-12 {
			t.Fatalf("the best of %v explains %v, want %v", z, got, want)
		}
	}
}

// Spread values stay in order, within half a step of where they were, and follow the normal law they were rounded from.
func TestSpread(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 9))
	const step = 0.5
	values := make([]float64, 2000)
	for i := range values {
		values[i] = step * math.Round(r.NormFloat64()/step)
	}
	out := diagnostics.Spread(values, step)
	if !slices.IsSorted(out) {
		t.Fatal("not in order")
	}
	_, sorted := diagnostics.Standardise(values)
	for i, x := range out {
		if math.Abs(x-sorted[i]) > step/2*1.03+0.02*math.Abs(x) {
			t.Fatalf("%v moved to %v", sorted[i], x)
		}
	}
	for _, z := range []float64{-2, -1.1, -0.3, 0, 0.6, 1.7} { // within four standard errors of the normal law
		i, _ := slices.BinarySearch(out, z)
		want := distuv.UnitNormal.CDF(z)
		if got := float64(i) / 2000; math.Abs(got-want) > fourErrors(want, 2000) {
			t.Errorf("%.4f lie below %v, want %.4f", got, z, want)
		}
	}
}
