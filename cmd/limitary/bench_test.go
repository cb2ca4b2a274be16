package main

import (
	"bufio"
	"bytes"
	"context"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"time"

	"limitary/internal/resultfile"
)

const benchRows = 1_000_000

// writeBenchFile writes results of a process in control, with three decimals, and gives the path.
func writeBenchFile(b *testing.B) string {
	b.Helper()
	rng := rand.New(rand.NewPCG(20260302, 7))
	var text bytes.Buffer
	text.WriteString("nitrate_mg_per_L\n")
	for range benchRows {
		fmt.Fprintf(&text, "%.3f\n", 10+0.25*rng.NormFloat64())
	}
	path := filepath.Join(b.TempDir(), "results.csv")
	if err := os.WriteFile(path, text.Bytes(), 0o600); err != nil {
		b.Fatal(err)
	}
	return path
}

// shortest gives the shortest of seven runs of each, taken by turns: what the machine's other work adds is not ours.
func shortest(b *testing.B, runs ...func() error) []time.Duration {
	b.Helper()
	best := make([]time.Duration, len(runs))
	for round := range 7 {
		for i, each := range runs {
			start := time.Now()
			if err := each(); err != nil {
				b.Fatal(err)
			}
			if took := time.Since(start); round == 0 || took < best[i] {
				best[i] = took
			}
		}
	}
	return best
}

// BenchmarkJudgeCSV judges a million rows by all eight rules of the 1984 set, from the file to the report, beside
// reading the same file alone: its bytes, its lines as numbers by the standard library, and its table.
func BenchmarkJudgeCSV(b *testing.B) {
	path := writeBenchFile(b)
	env := &environment{Stdout: io.Discard, Stderr: io.Discard, Now: time.Now}
	args := []string{"judge", "--centre", "10", "--sigma", "0.25", "--rules", "nelson-1984", path}
	judge := func() error {
		if code := run(context.Background(), env, args); code != exitOK {
			return fmt.Errorf("exit code %d", code)
		}
		return nil
	}
	for b.Loop() {
		if err := judge(); err != nil {
			b.Fatal(err)
		}
	}
	took := shortest(b, judge, func() error { _, err := os.ReadFile(path); return err },
		func() error { return scanNumbers(path) }, func() error { return readOnly(path) })
	judged, readBytes, readNumbers, readTable := took[0], took[1], took[2], took[3]
	b.ReportMetric(float64(judged)/benchRows, "ns/row")
	b.ReportMetric(float64(judged)/float64(readBytes), "x_bytes")
	b.ReportMetric(float64(judged)/float64(readNumbers), "x_lines_as_numbers")
	b.ReportMetric(float64(judged)/float64(readTable), "x_table_alone")
}

func readOnly(path string) error {
	file, err := os.Open(path)
	if err != nil {
		return err
	}
	defer file.Close()
	_, err = resultfile.Read(file, resultfile.Options{})
	return err
}

// scanNumbers reads the lines of a file as numbers with nothing but the standard library.
func scanNumbers(path string) error {
	file, err := os.Open(path)
	if err != nil {
		return err
	}
	defer file.Close()
	lines := bufio.NewScanner(file)
	lines.Scan()
	values := make([]float64, 0, benchRows)
	for lines.Scan() {
		x, err := strconv.ParseFloat(lines.Text(), 64)
		if err != nil {
			return err
		}
		values = append(values, x)
	}
	if len(values) != benchRows {
		return fmt.Errorf("%d values", len(values))
	}
	return lines.Err()
}
