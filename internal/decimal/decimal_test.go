package decimal_test

import (
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"

	"limitary/internal/decimal"
)

// same compares to the last bit, so that a negative zero is not a zero.
func same(a, b float64) bool { return math.Float64bits(a) == math.Float64bits(b) }

func mustParse(tb testing.TB, text string) float64 {
	tb.Helper()
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		tb.Fatal(err)
	}
	return x
}

func TestRoundGoesHalfAwayFromZero(t *testing.T) {
	// Texts, because the subject is what a person does with the text; every wanted figure is worked by hand.
	cases := []struct {
		x      string
		places int
		want   string
	}{
		{"0.125", 2, "0.13"}, {"-0.125", 2, "-0.13"},
		{"2.675", 2, "2.68"}, // the float64 lies below 2.675: rounding it in binary gives 2.67
		{"1.005", 2, "1.01"}, // so does this one
		{"8.345", 2, "8.35"}, {"-8.345", 2, "-8.35"},
		{"0.5", 0, "1"}, {"-0.5", 0, "-1"}, {"1.5", 0, "2"}, {"2.5", 0, "3"}, {"-2.5", 0, "-3"},
		{"0.49999999999999994", 0, "0"}, // the largest float64 below a half, which x+0.5 rounds up
		{"0.49999999999999994", 1, "0.5"},
		{"2.6749999999", 2, "2.67"}, {"2.6750000001", 2, "2.68"},
		{"4503599627370497.5", 0, "4503599627370498"}, // half-way at 2^52+1, where float64 still has the half
		{"9007199254740993", 0, "9007199254740992"},   // not a float64; its nearest is even and stays
		{"1e22", 3, "1e22"}, {"-1e300", 15, "-1e300"}, {"1.7976931348623157e308", 2, "1.7976931348623157e308"},
		{"5e-324", 0, "0"}, {"-5e-324", 15, "0"}, {"4e-16", 15, "0"}, {"5e-16", 15, "1e-15"}, {"-5e-16", 15, "-1e-15"},
		{"0.000000000000001", 15, "0.000000000000001"},
		{"0.3", 1, "0.3"}, {"100", 0, "100"}, {"0", 4, "0"},
	}
	for _, c := range cases {
		t.Run(fmt.Sprintf("%s to %d", c.x, c.places), func(t *testing.T) {
			if got, want := decimal.Round(mustParse(t, c.x), c.places), mustParse(t, c.want); !same(got, want) {
				t.Errorf("got %v, want %v", got, want)
			}
		})
	}
}

func TestUnroundedGivesTheValue(t *testing.T) {
	for _, x := range []float64{0.1, 0.1 + 0.2, -2.675, 5e-324, math.MaxFloat64} {
		if got := decimal.Round(x, decimal.Unrounded); !same(got, x) {
			t.Errorf("Round(%v, Unrounded): got %v", x, got)
		}
	}
}

func TestNoResultIsNegativeZero(t *testing.T) {
	negativeZero := math.Copysign(0, -1)
	for places := decimal.Unrounded; places <= decimal.PlacesMax; places++ {
		results := map[string]float64{
			"Round(-0)":           decimal.Round(negativeZero, places),
			"Mean(-0)":            decimal.Mean([]float64{negativeZero}, places),
			"Mean(-0, -0)":        decimal.Mean([]float64{negativeZero, negativeZero}, places),
			"Mean(-1, 1)":         decimal.Mean([]float64{-1, 1}, places),
			"Difference(-0, 0)":   decimal.Difference(negativeZero, 0, places),
			"Difference(0.3,0.3)": decimal.Difference(0.3, 0.3, places),
			"Line(-0, -0, 1)":     decimal.Line(negativeZero, negativeZero, 1, places),
			"Line(-0, -1, 0)":     decimal.Line(negativeZero, -1, 0, places),
			"Line(-0.6, 2, 0.3)":  decimal.Line(-0.6, 2, 0.3, places),
		}
		if places >= 0 {
			results["Round(-tiny)"] = decimal.Round(-5e-324, places)
			results["Mean(-tiny)"] = decimal.Mean([]float64{-1e-20, -3e-20}, places)
		}
		for name, got := range results {
			if !same(got, 0) {
				t.Errorf("%s to %d places: got %v (sign bit %t), want 0", name, places, got, math.Signbit(got))
			}
		}
	}
}

func TestSumsAreExact(t *testing.T) {
	a, b, c := 0.1, 0.2, 0.3 // variables, or the compiler adds them without error
	t.Run("0.1 + 0.2 equals 0.3", func(t *testing.T) {
		if a+b == c {
			t.Fatal("float64 adds 0.1 and 0.2 exactly here; the test shows nothing")
		}
		for places := decimal.Unrounded; places <= decimal.PlacesMax; places++ {
			if got := decimal.Line(a, 2, a, places); places != 0 && !same(got, c) {
				t.Errorf("0.1 + 2·0.1 to %d places: got %v, want 0.3", places, got)
			}
			if got := decimal.Difference(c, b, places); places != 0 && !same(got, a) {
				t.Errorf("0.3 - 0.2 to %d places: got %v, want 0.1", places, got)
			}
		}
	})
	t.Run("the mean of 0.1, 0.2, 0.3 is 0.2", func(t *testing.T) {
		if (a+b+c)/3 == b {
			t.Fatal("float64 gets this mean right; the test shows nothing")
		}
		for _, places := range []int{decimal.Unrounded, 1, 2, 9, 15} {
			if got := decimal.Mean([]float64{a, b, c}, places); !same(got, b) {
				t.Errorf("to %d places: got %v, want 0.2", places, got)
			}
		}
	})
	t.Run("a mean half-way goes away from zero", func(t *testing.T) {
		// 1.01, 1.02: 1.015; 1.001, 1.004, 1.010: 1.005; all worked by hand.
		for _, tc := range []struct {
			xs   []float64
			want float64
		}{{[]float64{1.01, 1.02}, 1.02}, {[]float64{-1.01, -1.02}, -1.02}, {[]float64{1.001, 1.004, 1.010}, 1.01}} {
			if got := decimal.Mean(tc.xs, 2); !same(got, tc.want) {
				t.Errorf("mean of %v: got %v, want %v", tc.xs, got, tc.want)
			}
		}
	})
	t.Run("large terms cancel without loss", func(t *testing.T) {
		if got := decimal.Mean([]float64{1e300, 0.3, -1e300}, 4); !same(got, a) {
			t.Errorf("got %v, want 0.1", got)
		}
		if got := decimal.Mean([]float64{math.MaxFloat64, math.MaxFloat64}, 2); !same(got, math.MaxFloat64) {
			t.Errorf("got %v, want the largest float64: its sum overflows, its mean does not", got)
		}
		if got := decimal.Mean([]float64{math.MaxFloat64, 9, -math.MaxFloat64}, 0); !same(got, 3) {
			t.Errorf("got %v, want 3", got)
		}
	})
}

func TestPlaces(t *testing.T) {
	for x, want := range map[float64]int{0: 0, 100: 0, 0.25: 2, -0.3: 1, 1e22: 0, 1.5e-7: 8, 1234.5678: 4, 5e-324: 324} {
		if got := decimal.Places(x); got != want {
			t.Errorf("Places(%v): got %d, want %d", x, got, want)
		}
	}
}

// drawn gives values of all kinds that rounding meets: short decimals, exact halves, neighbours of halves, any float64.
func drawn(r *rand.Rand, places int) float64 {
	digits := r.Int64N(1 << (1 + r.IntN(50)))
	sign := []string{"", "-"}[r.IntN(2)]
	text := ""
	switch r.IntN(6) {
	case 0: // a decimal of up to 16 digits
		text = fmt.Sprintf("%s%de%d", sign, digits, r.IntN(36)-18)
	case 1: // exactly half-way
		text = fmt.Sprintf("%s%d5e%d", sign, digits/10, -max(places, 0)-1)
	case 2: // beside half-way, by one in the last digit that shows
		text = fmt.Sprintf("%s%d%de%d", sign, digits/1000, 500+r.IntN(3)-1, -max(places, 0)-3)
	case 3: // a neighbour of half-way in float64
		x, _ := strconv.ParseFloat(fmt.Sprintf("%s%d5e%d", sign, digits/10, -max(places, 0)-1), 64)
		return math.Nextafter(x, []float64{math.Inf(1), math.Inf(-1)}[r.IntN(2)])
	case 4: // huge or tiny
		text = fmt.Sprintf("%s%de%d", sign, digits, r.IntN(600)-320)
	default: // any bits
		for {
			if x := math.Float64frombits(r.Uint64()); !math.IsNaN(x) && !math.IsInf(x, 0) {
				return x
			}
		}
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return 0
	}
	return x
}

// TestEveryFunctionAgreesWithTheOracle compares to the last bit. Nearly all draws take the quick path, exact halves and
// huge values the exact one, so it also shows that both paths give the same.
func TestEveryFunctionAgreesWithTheOracle(t *testing.T) {
	const seed = 20260101
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for range 60_000 {
		places := r.IntN(decimal.PlacesMax+2) - 1
		a, b, z := drawn(r, places), drawn(r, places), []float64{0, 0.5, 1, 2, 3, 3.09, -1, -2, -3, 2.5758}[r.IntN(10)]
		if got, want := decimal.Round(a, places), published(t, onPaper(t, a), places); places >= 0 && !same(got, want) {
			t.Fatalf("Round(%v, %d): got %v, want %v", a, places, got, want)
		}
		if r.IntN(8) == 0 { // close neighbours, whose difference cancels
			b = math.Nextafter(a, 0)
		}
		if got, want := decimal.Difference(a, b, places), published(t, new(big.Rat).Sub(onPaper(t, a), onPaper(t, b)), places); !same(got, want) {
			t.Fatalf("Difference(%v, %v, %d): got %v, want %v", a, b, places, got, want)
		}
		if got, want := decimal.Line(a, z, b, places), published(t, paperLine(t, a, z, b), places); !same(got, want) {
			t.Fatalf("Line(%v, %v, %v, %d): got %v, want %v", a, z, b, places, got, want)
		}
		xs := []float64{a, b}
		for range r.IntN(6) {
			xs = append(xs, drawn(r, places))
		}
		if got, want := decimal.Mean(xs, places), published(t, paperMean(t, xs), places); !same(got, want) {
			t.Fatalf("Mean(%v, %d): got %v, want %v", xs, places, got, want)
		}
	}
}

// TestOrdinarySubgroupsAgreeWithTheOracle draws what a laboratory posts: few digits, a common number of decimals, and
// means that are half-way more often than not for even sizes.
func TestOrdinarySubgroupsAgreeWithTheOracle(t *testing.T) {
	const seed = 20260102
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for range 20_000 {
		decimals := r.IntN(5)
		xs := make([]float64, 1+r.IntN(12))
		for i := range xs {
			xs[i] = mustParse(t, fmt.Sprintf("%de-%d", r.IntN(4001)-2000, decimals))
		}
		for places := max(decimals-1, 0); places <= decimals+2; places++ {
			if got, want := decimal.Mean(xs, places), published(t, paperMean(t, xs), places); !same(got, want) {
				t.Fatalf("Mean(%v, %d): got %v, want %v", xs, places, got, want)
			}
		}
	}
}

// TestRoundingKeepsOrderAndRests: published values compare as the exact ones do or become equal, and publishing twice
// changes nothing.
func TestRoundingKeepsOrderAndRests(t *testing.T) {
	const seed = 20260103
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for range 50_000 {
		places := r.IntN(decimal.PlacesMax + 1)
		a, b := drawn(r, places), drawn(r, places)
		ra, rb := decimal.Round(a, places), decimal.Round(b, places)
		if a < b && ra > rb || a > b && ra < rb {
			t.Fatalf("%v and %v to %d places change order: %v, %v", a, b, places, ra, rb)
		}
		if again := decimal.Round(ra, places); math.Abs(ra) < 1e15/math.Pow10(places) && !same(again, ra) {
			t.Fatalf("Round(%v, %d) is %v, and rounded again %v", a, places, ra, again)
		}
		if got := decimal.Round(-a, places); got != -ra {
			t.Fatalf("Round(%v, %d) is %v, but of the opposite %v", a, places, ra, got)
		}
	}
}

func FuzzRoundAgainstTheOracle(f *testing.F) {
	for _, x := range []float64{0.125, 2.675, 1.005, -0.5, 0.49999999999999994, 1e300, 5e-324, 4503599627370497.5} {
		f.Add(x, x/3, 2)
	}
	f.Fuzz(func(t *testing.T, a, b float64, places int) {
		if math.IsNaN(a-b) || math.IsInf(a, 0) || math.IsInf(b, 0) {
			t.Skip("arguments are finite by contract")
		}
		places = ((places%17)+17)%17 - 1
		if got, want := decimal.Mean([]float64{a, b}, places), published(t, paperMean(t, []float64{a, b}), places); !same(got, want) {
			t.Errorf("Mean(%v, %v, %d): got %v, want %v", a, b, places, got, want)
		}
		if got, want := decimal.Line(a, 3, b, places), published(t, paperLine(t, a, 3, b), places); !same(got, want) {
			t.Errorf("Line(%v, 3, %v, %d): got %v, want %v", a, b, places, got, want)
		}
		if places < 0 {
			return
		}
		if got, want := decimal.Round(a, places), published(t, onPaper(t, a), places); !same(got, want) {
			t.Errorf("Round(%v, %d): got %v, want %v", a, places, got, want)
		}
	})
}

func BenchmarkRound(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	xs, sink := make([]float64, 4096), 0.0
	for i := range xs {
		xs[i] = 10 + r.NormFloat64()
	}
	b.Run("quick", func(b *testing.B) {
		b.ReportAllocs()
		for i := range b.N {
			sink += decimal.Round(xs[i%len(xs)], 4)
		}
	})
	b.Run("half-way", func(b *testing.B) {
		for range b.N {
			sink += decimal.Round(2.675, 2)
		}
	})
	b.Run("math.Round as baseline", func(b *testing.B) {
		for i := range b.N {
			sink += math.Round(xs[i%len(xs)]*1e4) / 1e4
		}
	})
	if strings.Contains(fmt.Sprint(sink), "NaN") {
		b.Fatal(sink)
	}
}
