package plot_test

import (
	"bytes"
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/plot"
)

// go test ./internal/plot -look DIR writes the invented charts there, to be looked at.
var look = flag.String("look", "", "write the charts of the tests to this folder")

var safety = []string{
	"Limits from 60 results of the set-up phase, sigma from the mean moving range; invented data, Fellmark Water.",
	"A signal is statistical evidence about the measuring process, not a compliance, release or safety decision. A clear standing does not mean that the result is right.",
}

func at(v float64) *plot.Line { return &plot.Line{Value: v} }

func five(centre, sigma float64) *plot.Lines {
	return &plot.Lines{Centre: at(centre), LowerAction: at(centre - 3*sigma), LowerWarning: at(centre - 2*sigma),
		UpperWarning: at(centre + 2*sigma), UpperAction: at(centre + 3*sigma)}
}

func above(centre, sigma float64) *plot.Lines {
	return &plot.Lines{Centre: at(centre), UpperAction: at(centre + 3*sigma)}
}

// individuals invents a chart of n single values and their moving ranges, with hits beyond the lines.
func individuals(n int, centre, sigma float64, decimals int, seed uint64) plot.Chart {
	rng := rand.New(rand.NewPCG(seed, 7))
	location := &plot.Trace{Name: "Single value", Decimals: decimals}
	dispersion := &plot.Trace{Name: "Moving range", Decimals: decimals}
	l, d := five(centre, sigma), above(1.128*sigma, 0.853*sigma)
	last := math.NaN()
	start := time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)
	for i := range n {
		v := centre + sigma*rng.NormFloat64()
		p := plot.Point{Statistic: v, Lines: l, Label: start.AddDate(0, 0, i).Format(time.DateOnly)}
		q := plot.Point{Label: p.Label, Lines: d, Missing: true}
		switch {
		case v > centre+3*sigma:
			p.Hits = append(p.Hits, plot.Hit{Rule: "nelson-1984/1", Consequence: plot.Stop, Side: plot.Upper})
		case v < centre-3*sigma:
			p.Hits = append(p.Hits, plot.Hit{Rule: "nelson-1984/1", Consequence: plot.Stop, Side: plot.Lower})
		case math.Abs(v-centre) > 2*sigma:
			side := plot.Upper
			if v < centre {
				side = plot.Lower
			}
			p.Hits = append(p.Hits, plot.Hit{Rule: "beyond-warning", Consequence: plot.Look, Side: side})
		}
		if i > 0 {
			q.Missing, q.Statistic = false, math.Abs(v-last)
			if q.Statistic > 3.687*sigma {
				q.Hits = append(q.Hits, plot.Hit{Rule: "shewhart-1931/1", Consequence: plot.Act, Side: plot.Upper})
			}
		}
		last = v
		location.Points, dispersion.Points = append(location.Points, p), append(dispersion.Points, q)
	}
	return plot.Chart{Title: "Nitrate check standard, mid level", Subtitle: "Fellmark Water, Harwick, ion chromatograph 2, lot F-07",
		Unit: "mg/L", Location: location, Dispersion: dispersion, Notes: safety}
}

// eventful has one of everything.
func eventful() plot.Chart {
	c := individuals(100, 10, 0.25, 3, 11)
	l, d := c.Location.Points, c.Dispersion.Points
	set := func(i int, v float64, hits ...plot.Hit) { l[i].Statistic, l[i].Hits = v, hits }
	set(17, 10.93, plot.Hit{Rule: "nelson-1984/1", Consequence: plot.Stop, Side: plot.Upper}, plot.Hit{Rule: "nelson-1984/5", Consequence: plot.Act, Side: plot.Upper})
	set(33, 9.12, plot.Hit{Rule: "nelson-1984/1", Consequence: plot.Stop, Side: plot.Lower})
	for i := range 4 {
		set(40+i, 10.3+0.02*float64(i))
	}
	set(44, 10.42, plot.Hit{Rule: "nelson-1984/6", Consequence: plot.Act, Side: plot.Upper})
	set(45, 10.45, plot.Hit{Rule: "nelson-1984/6", Consequence: plot.Act, Side: plot.Upper})
	set(70, 10.55, plot.Hit{Rule: "nelson-1984/8", Consequence: plot.Look, Side: plot.None})
	l[8] = plot.Point{Label: l[8].Label, Missing: true, Lines: l[8].Lines}
	d[8].Missing, d[9].Missing = true, true
	l[18].Repeat, l[18].Statistic = true, 10.1
	d[18] = plot.Point{Missing: true, Lines: d[18].Lines}
	l[25].NotJudged, l[25].Bound, l[25].Statistic = true, decimal.Below, 10.2
	l[52].Bound, l[52].Statistic = decimal.Above, 10.7
	l[33].Excluded = true
	l[60].Excluded = true
	// From point 57 a new lot with its own lines; the upper action line is capped by the method.
	fresh, freshRange := five(10.15, 0.2), above(0.2256, 0.1706)
	fresh.UpperAction = &plot.Line{Value: 10.7, Basis: chart.MethodCriterion}
	for i := 57; i < 100; i++ {
		l[i].Lines, d[i].Lines = fresh, freshRange
	}
	l[57].BreakBefore, d[57].BreakBefore = true, true
	d[57].Missing = true
	return c
}

// stepping has lines that follow the size of each subgroup.
func stepping() plot.Chart {
	rng := rand.New(rand.NewPCG(3, 7))
	location, dispersion := &plot.Trace{Name: "Subgroup mean", Decimals: 1}, &plot.Trace{Name: "Subgroup standard deviation", Decimals: 1}
	for range 25 {
		n := float64(2 + rng.IntN(5))
		s := 79.0
		location.Points = append(location.Points, plot.Point{Statistic: 299852.4 + s/math.Sqrt(n)*rng.NormFloat64(), Lines: five(299852.4, s/math.Sqrt(n))})
		dispersion.Points = append(dispersion.Points, plot.Point{Statistic: s * math.Abs(1+0.3*rng.NormFloat64()), Lines: above(s, 0.7*s/math.Sqrt(n))})
	}
	return plot.Chart{Title: "Subgroups of unequal size", Unit: "km/s", Location: location, Dispersion: dispersion}
}

func demos() map[string]plot.Chart {
	big := individuals(100_000, 10, 0.25, 3, 5)
	flat := individuals(12, 5, 0, 2, 1)
	for i := range flat.Location.Points {
		flat.Location.Points[i].Hits = nil
		flat.Location.Points[i].Lines, flat.Dispersion.Points[i].Lines = nil, nil
	}
	tiny := individuals(30, 4.2e-9, 3e-11, 12, 2)
	huge := individuals(30, 6.02e23, 2e21, 0, 3)
	close5 := individuals(40, 100, 0.001, 4, 4)
	close5.Location.Points[20].Statistic = 104
	close5.Location.Points[20].Hits = []plot.Hit{{Rule: "shewhart-1931/1", Consequence: plot.Stop, Side: plot.Upper}}
	return map[string]plot.Chart{
		"eventful": eventful(), "one": individuals(1, 10, 0.25, 3, 1), "two": individuals(2, 10, 0.25, 3, 1),
		"hundred": individuals(100, 10, 0.25, 3, 9), "hundred-thousand": big, "flat": flat, "tiny": tiny, "huge": huge,
		"lines-close-together": close5, "stepping": stepping(),
		"location-only": {Title: "One trace", Unit: "NTU", Location: individuals(60, 0.5, 0.1, 2, 8).Location, Notes: safety},
		"empty":         {Title: "No results yet", Location: &plot.Trace{Name: "Single value"}, Dispersion: &plot.Trace{Name: "Moving range"}},
	}
}

func mustWrite(tb testing.TB, c plot.Chart) []byte {
	tb.Helper()
	var b bytes.Buffer
	if err := plot.Write(&b, c); err != nil {
		tb.Fatal(err)
	}
	return b.Bytes()
}

func TestEveryDemoIsWellFormedAndTheSameTwice(t *testing.T) {
	for name, c := range demos() {
		t.Run(name, func(t *testing.T) {
			first := mustWrite(t, c)
			if !bytes.Equal(first, mustWrite(t, c)) {
				t.Error("got other bytes the second time")
			}
			checkPicture(t, first, c)
			if *look != "" {
				if err := os.WriteFile(filepath.Join(*look, name+".svg"), first, 0o600); err != nil {
					t.Fatal(err)
				}
				fmt.Println(name, len(first), "bytes")
			}
		})
	}
}
