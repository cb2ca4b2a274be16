package validation

import (
	"context"
	"fmt"
	"math"
	"strings"

	"limitary/internal/limits"
)

const (
	factorsFile = "constants.csv"
	// factorDigits is the relative tolerance of computed factors.
	factorDigits = 1e-12
	// misprintUnits is what a printed factor may be off, in units of its last digit, where the file lists it as not the
	// rounding of the exact one: tables were built from rounded d2 and d3.
	misprintUnits = 2
)

// factorColumns are the factors by their trade names.
var factorColumns = []struct {
	name string
	of   func(limits.ChartFactors) float64
}{
	{"d2", func(f limits.ChartFactors) float64 { return f.RangeMean }},
	{"d3", func(f limits.ChartFactors) float64 { return f.RangeSigma }},
	{"c4", func(f limits.ChartFactors) float64 { return f.SMean }},
	{"A", func(f limits.ChartFactors) float64 { return f.A }},
	{"A2", func(f limits.ChartFactors) float64 { return f.A2 }},
	{"A3", func(f limits.ChartFactors) float64 { return f.A3 }},
	{"B3", func(f limits.ChartFactors) float64 { return f.B3 }},
	{"B4", func(f limits.ChartFactors) float64 { return f.B4 }},
	{"B5", func(f limits.ChartFactors) float64 { return f.B5 }},
	{"B6", func(f limits.ChartFactors) float64 { return f.B6 }},
	{"D1", func(f limits.ChartFactors) float64 { return f.D1 }},
	{"D2", func(f limits.ChartFactors) float64 { return f.D2 }},
	{"D3", func(f limits.ChartFactors) float64 { return f.D3 }},
	{"D4", func(f limits.ChartFactors) float64 { return f.D4 }},
}

func computedFactors(context.Context) ([]Check, error) {
	return factorChecks(func(t table, row int, name string) (Check, bool, error) {
		want, err := t.number(row, name)
		return Check{
			Source: "multiple-precision integration", Want: want, Tolerance: factorDigits * math.Abs(want),
		}, true, err
	})
}

func printedFactors(context.Context) ([]Check, error) {
	return factorChecks(func(t table, row int, name string) (Check, bool, error) {
		text, err := t.text(row, name+"_published")
		if err != nil || text == "" {
			return Check{}, false, err // tables end at 25
		}
		print, err := parseFigure(text)
		if err != nil {
			return Check{}, false, err
		}
		c := Check{Source: "factor tables in print", Want: print.value, Printed: true, Tolerance: print.halfUnit()}
		c.Note, err = misprint(t, row, name)
		if c.Note != "" {
			c.Tolerance = misprintUnits * print.unit * binarySlack
		}
		return c, true, err
	})
}

// misprint gives what the file notes about a printed factor that is not the rounding of the exact one.
func misprint(t table, row int, name string) (string, error) {
	notes, err := t.text(row, "published_values_that_differ_from_rounded_computed")
	for note := range strings.SplitSeq(notes, "; ") {
		if strings.HasPrefix(note, name+": ") {
			return note, err
		}
	}
	return "", err
}

// factorChecks makes a check of every factor in the file for which reference has one.
func factorChecks(reference func(t table, row int, name string) (Check, bool, error)) ([]Check, error) {
	t, err := readTable(factorsFile)
	if err != nil {
		return nil, err
	}
	var checks []Check
	for row := range t.rows {
		n, err := t.number(row, "n")
		if err != nil {
			return checks, err
		}
		factors, err := limits.Factors(int(n))
		if err != nil {
			return checks, err
		}
		for _, column := range factorColumns {
			c, ok, err := reference(t, row, column.name)
			if err != nil {
				return checks, err
			}
			if ok {
				c.Name = fmt.Sprintf("%s(%d)", column.name, int(n))
				checks = append(checks, c.Compare(column.of(factors)))
			}
		}
	}
	return checks, nil
}
