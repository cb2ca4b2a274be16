package decimal_test

import (
	"errors"
	"math"
	"math/big"
	"strconv"
	"strings"
	"testing"

	"limitary/internal/decimal"
)

func TestParseReadingReads(t *testing.T) {
	cases := map[string]decimal.Reading{
		"0.30":                              {Value: 0.3, Places: 2},
		"-0.012":                            {Value: -0.012, Places: 3},
		"+5":                                {Value: 5},
		"5.":                                {Value: 5},
		".5":                                {Value: 0.5, Places: 1},
		"007":                               {Value: 7},
		"0":                                 {},
		"0.000":                             {Places: 3},
		"-0.0":                              {Places: 1},
		"-0":                                {},
		"<0.05":                             {Value: 0.05, Bound: decimal.Below, Places: 2},
		"< 0.05":                            {Value: 0.05, Bound: decimal.Below, Places: 2},
		"  >2400\t":                         {Value: 2400, Bound: decimal.Above},
		">-1.5":                             {Value: -1.5, Bound: decimal.Above, Places: 1},
		"<0":                                {Bound: decimal.Below},
		"1.2e-3":                            {Value: 0.0012, Places: 4},
		"1.20E-3":                           {Value: 0.0012, Places: 5},
		"1.2e+3":                            {Value: 1200},
		"1e300":                             {Value: 1e300},
		"0e-5":                              {Places: 5},
		"1.7976931348623157e308":            {Value: math.MaxFloat64},
		"5e-324":                            {Value: 5e-324, Places: 324},
		"12345678901234567":                 {Value: 12345678901234567}, // 17 digits, the limit
		"0.00000000000000001":               {Value: 1e-17, Places: 17}, // leading zeros are not significant
		" " + strings.Repeat("0", 46) + "1": {Value: 1},                 // 48 bytes, the limit
	}
	for text, want := range cases {
		t.Run(text, func(t *testing.T) {
			got, err := decimal.ParseReading(text)
			if err != nil || got != want || math.Signbit(got.Value) != math.Signbit(want.Value) {
				t.Errorf("got %+v, %v; want %+v", got, err, want)
			}
		})
	}
}

func TestParseReadingRefusesAndSaysWhat(t *testing.T) {
	const notNumber = "is not a number; write digits with a point for the decimal, and < or > before a bound"
	const comma = "has a comma; write a point for the decimal and no thousands separator"
	const power = "has a power of ten that is not a whole number from -400 to 400"
	cases := map[string]string{
		"":                                  "is empty",
		"   ":                               "is empty",
		"<":                                 "has no digits",
		"-":                                 "has no digits",
		".":                                 "has no digits",
		"+.e5":                              "has no digits",
		"e5":                                "has no digits",
		"0,30":                              comma,
		"1,234.5":                           comma,
		"abc":                               notNumber,
		"NaN":                               notNumber,
		"inf":                               notNumber,
		"-Inf":                              notNumber,
		"n.d.":                              notNumber,
		"5 mg":                              notNumber,
		"1 000":                             notNumber,
		"1.2.3":                             notNumber,
		"--5":                               notNumber,
		"<<5":                               notNumber,
		"<>5":                               notNumber,
		"≤5":                                notNumber,
		"５":                                 notNumber, // a full-width digit
		"0x1p4":                             notNumber,
		"1_000":                             notNumber,
		"5%":                                notNumber,
		"=1+1":                              notNumber,
		"1e":                                power,
		"1e2.5":                             power,
		"1e5e5":                             power,
		"1e401":                             power,
		"1e-401":                            power,
		"1e309":                             "is larger than 1.8e+308, the largest value that can be held",
		"-2e308":                            "is larger than 1.8e+308, the largest value that can be held",
		"1e-350":                            "is nearer to zero than 4.94e-324, the smallest value that can be held",
		"<1e-350":                           "is nearer to zero than 4.94e-324, the smallest value that can be held",
		"123456789012345678":                "18 significant digits, the limit is 17",
		" " + strings.Repeat("0", 47) + "1": "49 bytes long, the limit is 48",
	}
	for text, want := range cases {
		t.Run(text, func(t *testing.T) {
			got, err := decimal.ParseReading(text)
			var e *decimal.TextError
			if !errors.As(err, &e) || got != (decimal.Reading{}) {
				t.Fatalf("got %+v, %v; want a *TextError", got, err)
			}
			if e.Problem != want {
				t.Errorf("got  %s\nwant %s", e.Problem, want)
			}
			if !strings.HasPrefix(err.Error(), "reading \"") {
				t.Errorf("message %q does not quote the reading", err)
			}
		})
	}
	t.Run("a long text is clipped in the message", func(t *testing.T) {
		_, err := decimal.ParseReading(strings.Repeat("9", 1<<20))
		if err == nil || len(err.Error()) > 200 {
			t.Errorf("got a message of %d bytes", len(err.Error()))
		}
	})
}

// FuzzParseReading holds what any text must give: an error, or the number that big.Rat reads in it.
func FuzzParseReading(f *testing.F) {
	for _, s := range []string{"0.30", "<0.05", "> 2400", "-0.0", "1.2e-3", "1,5", "", "<", "1e309", "1e-350", "5e-324", "0e-400",
		"12345678901234567", "NaN", "0x1p4", "1_0", "\u00a05", "5\x00", "1e5e5", ".e1", "+.5"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		r, err := decimal.ParseReading(text)
		if err != nil {
			var e *decimal.TextError
			if !errors.As(err, &e) || e.Problem == "" || r != (decimal.Reading{}) {
				t.Fatalf("ParseReading(%q): %+v, %v", text, r, err)
			}
			return
		}
		if math.IsNaN(r.Value) || math.IsInf(r.Value, 0) || r.Value == 0 && math.Signbit(r.Value) || r.Places < 0 {
			t.Fatalf("ParseReading(%q): %+v", text, r)
		}
		body := strings.TrimSpace(text)
		wantBound := decimal.Measured
		switch {
		case strings.HasPrefix(body, "<"):
			wantBound = decimal.Below
		case strings.HasPrefix(body, ">"):
			wantBound = decimal.Above
		}
		if wantBound != decimal.Measured {
			body = strings.TrimSpace(body[1:])
		}
		exact, ok := new(big.Rat).SetString(body)
		if !ok {
			t.Fatalf("ParseReading(%q): accepted %q, which is no number to big.Rat", text, body)
		}
		want, _ := exact.Float64()
		if r.Value != want || r.Bound != wantBound {
			t.Fatalf("ParseReading(%q): got %+v, want value %v, bound %d", text, r, want, wantBound)
		}
		if (r.Value == 0) != (exact.Sign() == 0) {
			t.Fatalf("ParseReading(%q): %v for a number that is not zero", text, r.Value)
		}
		// The decimals written are enough to write the number exactly.
		if back, _ := new(big.Rat).SetString(exact.FloatString(r.Places)); back.Cmp(exact) != 0 {
			t.Fatalf("ParseReading(%q): %d places do not hold it", text, r.Places)
		}
		if again, err := decimal.ParseReading(strconv.FormatFloat(r.Value, 'g', -1, 64)); err != nil || again.Value != r.Value {
			t.Fatalf("ParseReading(%q): %v read again gives %+v, %v", text, r.Value, again, err)
		}
	})
}
