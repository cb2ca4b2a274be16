package main

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"
	"time"
)

const kindsDir = "../../testdata/kinds/"

// kindFile writes one invented file of control results; its README tells what each is.
type kindFile struct {
	name   string
	stream uint64
	write  func(out *bytes.Buffer, r *rand.Rand)
}

const kindsSeed = 20260601

func kindFiles() []kindFile {
	return []kindFile{
		{"plates-failed.csv", 1, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "week,failed,plates")
			for i := range 40 {
				n, p := 300+r.IntN(300), 0.04
				if i >= 36 {
					p = 0.09
				}
				fmt.Fprintf(out, "%s,%d,%d\n", week(i), binomial(r, n, p), n)
			}
		}},
		{"batches-of-50.csv", 2, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "batch,failed")
			for i := range 40 {
				fmt.Fprintf(out, "B%02d,%d\n", i+1, binomial(r, 50, 0.06))
			}
		}},
		{"blank-colonies.csv", 3, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "plated,colonies")
			for i := range 60 {
				fmt.Fprintf(out, "%s,%d\n", date(i), poisson(r, 3.4))
			}
		}},
		{"filter-colonies.csv", 4, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "plated,colonies,volume_100_mL")
			for i := range 50 {
				volume := []float64{1, 2, 2.5}[r.IntN(3)]
				rate := max(1, 24+4*r.NormFloat64()) // the suspension varies from day to day
				fmt.Fprintf(out, "%s,%d,%g\n", date(i), poisson(r, rate*volume), volume)
			}
		}},
		{"nitrate-runs.csv", 5, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "run,measured,nitrate_mg_per_L")
			for i := range 30 {
				level := 25 + 0.30*r.NormFloat64()
				for range 4 {
					fmt.Fprintf(out, "R%02d,%s,%.2f\n", i+1, date(i), level+0.20*r.NormFloat64())
				}
			}
		}},
		{"nitrate-duplicates.csv", 6, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "sample,a_mg_per_L,b_mg_per_L")
			for i := range 60 {
				level := []float64{2, 18, 60}[i%3] * math.Exp(0.2*r.NormFloat64())
				sigma := math.Hypot(0.05, 0.02*level)
				fmt.Fprintf(out, "S%03d,%.2f,%.2f\n", i+1, level+sigma*r.NormFloat64(), level+sigma*r.NormFloat64())
			}
		}},
		{"turbidity.csv", 7, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "measured,turbidity_NTU")
			for i := range 60 {
				fmt.Fprintf(out, "%s,%.3f\n", date(i), 0.42*math.Exp(0.35*r.NormFloat64()))
			}
		}},
		{"lead-levels.csv", 8, func(out *bytes.Buffer, r *rand.Rand) {
			fmt.Fprintln(out, "measured,material,lead_ug_per_L")
			for i := range 60 {
				level := leadLevels[i%3]
				fmt.Fprintf(out, "%s,%s,%.3f\n", date(i), level.material, level.reference+level.sigma*r.NormFloat64())
			}
		}},
		{"nitrate-2025.csv", 9, func(out *bytes.Buffer, r *rand.Rand) { nitrateYear(out, r, 10) }},
		{"nitrate-2026.csv", 10, func(out *bytes.Buffer, r *rand.Rand) { nitrateYear(out, r, 10.3) }},
	}
}

var leadLevels = []struct {
	material         string
	reference, sigma float64
}{{"low", 2.5, 0.1}, {"mid", 10, 0.3}, {"high", 40, 1}}

func nitrateYear(out *bytes.Buffer, r *rand.Rand, centre float64) {
	fmt.Fprintln(out, "nitrate_mg_per_L")
	for range 120 {
		fmt.Fprintf(out, "%.2f\n", centre+0.2*r.NormFloat64())
	}
}

func date(day int) string {
	return time.Date(2026, 1, 5, 0, 0, 0, 0, time.UTC).AddDate(0, 0, day).Format(time.DateOnly)
}

func week(i int) string { return date(7 * i) }

func binomial(r *rand.Rand, n int, p float64) (k int) {
	for range n {
		if r.Float64() < p {
			k++
		}
	}
	return k
}

// poisson counts unit-rate arrivals.
func poisson(r *rand.Rand, mean float64) (k int) {
	for at := r.ExpFloat64(); at < mean; at += r.ExpFloat64() {
		k++
	}
	return k
}

// The example files are what their README says: written by the code above and nothing else. With WRITE_KINDS=1 in the
// environment the files are written.
func TestKindFilesAreAsGenerated(t *testing.T) {
	for _, f := range kindFiles() {
		var want bytes.Buffer
		f.write(&want, rand.New(rand.NewPCG(kindsSeed, f.stream)))
		path := filepath.Join(kindsDir, f.name)
		if os.Getenv("WRITE_KINDS") == "1" {
			if err := os.WriteFile(path, want.Bytes(), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		got, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(got, want.Bytes()) {
			t.Errorf("%s is not what seed %d, stream %d gives", f.name, uint64(kindsSeed), f.stream)
		}
	}
}
