package limits_test

import (
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"strconv"
	"sync"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
	"limitary/testdata"
)

// factors gives the factors of n in the order of the columns of constants.csv.
func factors(t testing.TB, n int) [14]float64 {
	t.Helper()
	f, err := limits.Factors(n)
	if err != nil {
		t.Fatal(err)
	}
	return [14]float64{f.RangeMean, f.RangeSigma, f.SMean, f.A, f.A2, f.A3, f.B3, f.B4, f.B5, f.B6, f.D1, f.D2, f.D3, f.D4}
}

func constants(t testing.TB) [][]string {
	t.Helper()
	file, err := testdata.Files.Open("constants.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != 28 {
		t.Fatalf("constants.csv: got %d rows, want a header and 27 sizes", len(rows))
	}
	return rows
}

// Source: multiple-precision integration (computed), testdata/constants.csv.
func TestFactorsEqualMultiplePrecisionValues(t *testing.T) {
	rows := constants(t)
	for _, row := range rows[1:] {
		n, _ := strconv.Atoi(row[0])
		for i, got := range factors(t, n) {
			want, err := strconv.ParseFloat(row[i+1], 64)
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(got-want) > 1e-12*math.Abs(want) {
				t.Errorf("%s(%d): got %.16g, want %.16g", rows[0][i+1], n, got, want)
			}
		}
	}
}

// Closed forms of the expected largest of n standard normal values for n up to 5 and of c4 (from memory; the figures they
// give agree with the tables).
func TestFactorsEqualClosedForms(t *testing.T) {
	root := math.Sqrt(math.Pi)
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"d2(2)", factors(t, 2)[0], 2 / root},
		{"d3(2)", factors(t, 2)[1], math.Sqrt(2 - 4/math.Pi)},
		{"c4(2)", factors(t, 2)[2], math.Sqrt(2 / math.Pi)},
		{"d2(3)", factors(t, 3)[0], 3 / root},
		{"d3(3)", factors(t, 3)[1], math.Sqrt(2 + (3*math.Sqrt(3)-9)/math.Pi)},
		{"c4(3)", factors(t, 3)[2], root / 2},
		{"d2(4)", factors(t, 4)[0], 12 / (math.Pi * root) * math.Atan(math.Sqrt2)},
		{"d2(5)", factors(t, 5)[0], 5/(2*root) + 15/(math.Pi*root)*math.Asin(1./3)},
	} {
		if math.Abs(c.got-c.want) > 4e-15 {
			t.Errorf("%s: got %.17g, want %.17g", c.name, c.got, c.want)
		}
	}
}

// Γ(x+1) = xΓ(x) makes the product of two neighbouring c4 a plain root.
func TestNeighbouringC4(t *testing.T) {
	for n := 2; n < chart.SubgroupSizeMax; n++ {
		got, want := factors(t, n)[2]*factors(t, n+1)[2], math.Sqrt(float64(n-1)/float64(n))
		if math.Abs(got-want) > 4e-15 {
			t.Errorf("c4(%d)·c4(%d): got %.17g, want %.17g", n, n+1, got, want)
		}
	}
}

// The second method for sizes the file does not list: Simpson's rule on E(R) = ∫ P(R>r) dr and E(R²) = ∫ 2r·P(R>r) dr,
// with P itself by Simpson's rule. It loses digits in E(R²) - E(R)², hence 1e-10.
func TestRangeFactorsBySimpsonsRule(t *testing.T) {
	below := func(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }
	density := func(x float64) float64 { return math.Exp(-x*x/2) / math.Sqrt(2*math.Pi) }
	simpson := func(a, b float64, steps int, f func(float64) float64) float64 {
		h, sum := (b-a)/float64(steps), f(a)+f(b)
		for i := 1; i < steps; i++ {
			sum += float64(2+2*(i%2)) * f(a+h*float64(i))
		}
		return sum * h / 3
	}
	for _, n := range []int{12, 26, 41, 77, 99} {
		exceeds := func(r float64) float64 {
			return 1 - float64(n)*simpson(-9, 9, 240, func(x float64) float64 {
				return density(x) * math.Pow(below(x+r)-below(x), float64(n-1))
			})
		}
		mean := simpson(0, 14, 400, exceeds)
		square := simpson(0, 14, 400, func(r float64) float64 { return 2 * r * exceeds(r) })
		f := factors(t, n)
		if math.Abs(f[0]-mean) > 1e-10 || math.Abs(f[1]-math.Sqrt(square-mean*mean)) > 1e-9 {
			t.Errorf("n = %d: got d2 %.12g, d3 %.12g, want %.12g, %.12g", n, f[0], f[1], mean, math.Sqrt(square-mean*mean))
		}
	}
}

func TestFactorsAreRefusedOutsideTheirRange(t *testing.T) {
	for _, n := range []int{-1, 0, 1, chart.SubgroupSizeMax + 1, math.MaxInt} {
		for name, f := range map[string]func(int) (float64, error){"D2": limits.D2, "D3": limits.D3, "C4": limits.C4} {
			got, err := f(n)
			var refused *limits.Error
			if !errors.As(err, &refused) || refused.Field != "n" || got != 0 {
				t.Errorf("%s(%d): got %g, %v, want an Error of field n", name, n, got, err)
			}
		}
	}
	if _, err := limits.Factors(chart.SubgroupSizeMax); err != nil {
		t.Errorf("largest size: got %v, want no error", err)
	}
}

func TestFactorsAreTheSameFromManyGoroutines(t *testing.T) {
	var group sync.WaitGroup
	results := make([][]string, 8)
	for i := range results {
		group.Go(func() {
			for n := 2; n <= chart.SubgroupSizeMax; n++ {
				f, err := limits.Factors(n)
				results[i] = append(results[i], fmt.Sprint(f, err))
			}
		})
	}
	group.Wait()
	for i, r := range results {
		for j := range r {
			if r[j] != results[0][j] {
				t.Fatalf("goroutine %d, n = %d: got %s, want %s", i, j+2, r[j], results[0][j])
			}
		}
	}
}

func TestAt(t *testing.T) {
	const sigma = 2.5
	for _, c := range []struct {
		kind chart.Kind
		n    int
		want limits.Scale
		ok   bool
	}{
		{chart.Individuals, 1, limits.Scale{sigma, sigma * factors(t, 2)[0], sigma * factors(t, 2)[1]}, true},
		{chart.Individuals, 2, limits.Scale{}, false},
		{chart.XbarR, 4, limits.Scale{sigma / 2, sigma * factors(t, 4)[0], sigma * factors(t, 4)[1]}, true},
		{chart.XbarR, 1, limits.Scale{LocationSigma: sigma}, true},
		{chart.XbarS, 4, limits.Scale{sigma / 2, sigma * 0.921317731923561278, sigma * math.Sqrt(1-0.921317731923561278*0.921317731923561278)}, true},
		{chart.XbarS, 1, limits.Scale{LocationSigma: sigma}, true},
		{chart.XbarR, 0, limits.Scale{}, false},
		{chart.XbarR, chart.SubgroupSizeMax + 1, limits.Scale{}, false},
		{chart.Given, 3, limits.Scale{}, false},
	} {
		t.Run(fmt.Sprintf("%s of %d", c.kind, c.n), func(t *testing.T) {
			got, ok := limits.At(c.kind, sigma, c.n)
			near := func(a, b float64) bool { return math.Abs(a-b) <= 1e-14*math.Abs(b) }
			if ok != c.ok || !near(got.LocationSigma, c.want.LocationSigma) ||
				!near(got.DispersionCentre, c.want.DispersionCentre) || !near(got.DispersionSigma, c.want.DispersionSigma) {
				t.Errorf("got %+v, %v, want %+v, %v", got, ok, c.want, c.ok)
			}
		})
	}
}

// BenchmarkAt shows what a point of another size costs the judge, beside a square root and a division.
func BenchmarkAt(b *testing.B) {
	sink := 0.0
	limits.At(chart.XbarR, 1, 5)
	for b.Loop() {
		s, _ := limits.At(chart.XbarR, 1.25, 5)
		sink += s.LocationSigma
	}
	_ = sink
}
