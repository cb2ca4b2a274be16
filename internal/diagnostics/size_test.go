package diagnostics_test

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
)

// sizeDesigns of clean data. 3,000 bases each give a rate of 0.01 a standard error of 0.0018.
var sizeDesigns = []struct {
	design
	step   float64
	runs   int
	make   maker
	change func(*limits.Request)
	note   string
}{
	{design{chart.Individuals, 20, 1}, fineStep, 4000, clean, keep, "fine"},
	{design{chart.Individuals, 50, 1}, fineStep, 3000, clean, keep, "fine"},
	{design{chart.Individuals, 200, 1}, fineStep, 1500, clean, keep, "fine"},
	{design{chart.Individuals, 50, 1}, 0.25, 2000, clean, keep, "rounded to 0.25 sigma"},
	{design{chart.Individuals, 200, 1}, 0.375, 1000, clean, keep, "rounded to 0.375 sigma"},
	{design{chart.XbarR, 25, 2}, fineStep, 2000, clean, keep, "fine"},
	{design{chart.XbarR, 25, 3}, fineStep, 2000, clean, keep, "fine"},
	{design{chart.XbarS, 25, 5}, fineStep, 2000, clean, keep, "fine"},
	{design{chart.XbarR, 50, 4}, 0.25, 1000, clean, keep, "rounded to 0.25 sigma"},
	{design{chart.XbarS, 30, 5}, fineStep, 2000, clean, unequal, "2 to 5 readings"},
	{design{chart.RunMeans, 30, 3}, fineStep, 2000, runsDiffer, keep, "runs differ"},
	{design{chart.Individuals, 30, 1}, fineStep, 2000, clean, medianSigma, "median moving range"},
	{design{chart.Individuals, 30, 1}, fineStep, 2000, clean, givenLimits, "centre and sigma given"},
}

func keep(*limits.Request) {}

func unequal(req *limits.Request) {
	for i := range req.Groups {
		req.Groups[i].Readings = req.Groups[i].Readings[:2+i%4]
	}
}

func medianSigma(req *limits.Request) { req.Estimator = limits.MedianMovingRange }

func givenLimits(req *limits.Request) {
	centre, sigma := 50., 2.
	req.Centre, req.Sigma = &centre, &sigma
}

// cautious tests count whole numbers or bound a probability from above.
var cautious = []string{diagnostics.CodeRepeatedStretch, diagnostics.CodeDoubledPosts, diagnostics.CodeSetupSignals, diagnostics.CodeRoundingCoarse}

// Goal: each test reports clean data in one case of a hundred, or less, within four standard errors. On unrounded data
// all that are not cautious must report some, so that none is asleep.
func TestSizeOnCleanData(t *testing.T) {
	for i, d := range sizeDesigns {
		t.Run(fmt.Sprintf("%s, %s", d.design, d.note), func(t *testing.T) {
			t.Parallel()
			r, y := rand.New(rand.NewPCG(uint64(i), 99)), newTally()
			for range d.runs {
				req := requestOf(d.design, d.make(r, d.design), d.step)
				d.change(&req)
				rep := examine(t, req)
				y.take(&rep)
			}
			allowance := fourErrors(diagnostics.Level, y.runs)
			for _, key := range y.order {
				rate := y.rate(key)
				t.Logf("%-48s made %5d of %d, found %.4f", key, y.made[key], y.runs, rate)
				if rate > diagnostics.Level+allowance {
					t.Errorf("%s: size %.4f, want at most %.4f", key, rate, diagnostics.Level+allowance)
				}
				asleep := d.step == fineStep && rate < 0.001
				if d.kind == chart.RunMeans && strings.HasPrefix(key, diagnostics.CodeBetweenTooLarge) {
					continue // runs that differ are what the kind is for, and never too alike
				}
				if asleep && !slices.ContainsFunc(cautious, func(code string) bool { return strings.HasPrefix(key, code) }) {
					t.Errorf("%s: size %.4f, asleep", key, rate)
				}
			}
			t.Logf("any finding: %.4f", float64(y.any)/float64(y.runs))
		})
	}
}
