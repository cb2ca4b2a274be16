package main

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"

	pb "limitary/api/limitary/v1"
)

// Counts and pairs of two years, as sums that the estimates are taken from by hand.
const (
	countsBefore, countsAfter = "3,5,4,2,6,4,3,5,4,4,3,6", "5,7,6,4,8,6,5,7,6,6,5,8"
)

func countFile(t *testing.T, counts string) string {
	t.Helper()
	return fileWith(t, "n,x\n50,"+strings.ReplaceAll(counts, ",", "\n50,")+"\n")
}

// pairFile has twenty-four pairs around growing means, that differ by a percentage of the mean.
func pairFile(t *testing.T, percent float64) string {
	t.Helper()
	text := "a,b\n"
	for i := range 24 {
		mean, half := 20+2*float64(i), percent/200*(0.6+0.4*float64(i%3))
		text += fmt.Sprintf("%.6f,%.6f\n", mean*(1-half), mean*(1+half))
	}
	return fileWith(t, text)
}

// What compute writes for any kind is what --in-force takes, and the report says what the one figure is.
func TestInForceOfEveryKind(t *testing.T) {
	before, after := countFile(t, countsBefore), countFile(t, countsAfter)
	narrow, wide := pairFile(t, 4), pairFile(t, 6)
	const mean, shift = 49. / 12, 2. // of twelve counts each
	for _, c := range []struct {
		flags    string
		old, now string
		want     float64 // the estimate; NaN where only its side is known
		figure   string
	}{
		{"--kind c --value x", before, after, shift / math.Sqrt(mean), "the centre"},
		{"--kind np --size 50 --value x --inspected n", before, after, shift / math.Sqrt(mean*(1-mean/50)), "the centre"},
		{"--kind p --value x --inspected n", before, after, shift / math.Sqrt(mean*(1-mean/50)), "the centre"},
		{"--kind u --value x --inspected n --extra between", before, after, shift / math.Sqrt(mean), "the centre"},
		{"--kind relative_range --value a,b", narrow, wide, 1.5, "the spread"},
		{"--kind relative_range --value a,b --absolute-below 45", narrow, wide, 1.5, "the spread"},
		{"--kind duplicate_range --value a,b --bands 0,44", narrow, wide, 1.5, "the spread"},
		{"--kind duplicate_range --value a,b --spread-function --spread-at-zero 0.1 --spread-growth 0.02", narrow, wide, math.NaN(), "the spread"},
	} {
		t.Run(c.flags, func(t *testing.T) {
			flags := strings.Fields(c.flags)
			inForce := fileWith(t, mustRun(t, "", append([]string{"compute", "--json", c.old}, flags...)...))
			args := append([]string{"compute", c.now, "--in-force", inForce}, flags...)
			var got pb.ComputeLimitsResponse
			if err := protojson.Unmarshal([]byte(mustRun(t, "", append(args, "--json")...)), &got); err != nil {
				t.Fatal(err)
			}
			figure, other := got.ChangeTest.GetCentre(), got.ChangeTest.GetSpread()
			if c.figure == "the spread" {
				figure, other = other, figure
			}
			if figure.GetLower() >= figure.GetUpper() || other != nil || !math.IsNaN(c.want) && math.Abs(figure.GetEstimate()-c.want) > 0.002 {
				t.Errorf("got %v and %v, want an estimate of %g and no other figure", figure, other, c.want)
			}
			text := strings.Join(strings.Fields(mustRun(t, "", args...)), " ")
			if !strings.Contains(text, "The one figure is "+c.figure) || !strings.Contains(text, "Limits in force, results.csv: ") {
				t.Errorf("got\n%s", text)
			}
		})
	}
}
