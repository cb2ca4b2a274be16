package resultfile_test

import (
	"encoding/csv"
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

// benchFile writes a million rows in the given form and gives the file's name and size.
func benchFile(b *testing.B, header, format string) (string, int64) {
	b.Helper()
	rng := rand.New(rand.NewPCG(1, 2))
	text := append([]byte(header), '\n')
	for i := range benchRows {
		text = fmt.Appendf(text, format, i, 10+rng.NormFloat64())
	}
	name := filepath.Join(b.TempDir(), "results.csv")
	if err := os.WriteFile(name, text, 0o600); err != nil {
		b.Fatal(err)
	}
	return name, int64(len(text))
}

// BenchmarkRead reads a million rows of two columns beside reading the bytes of the same file, and beside
// encoding/csv with strconv in its fastest use; the ratios of the times are reported.
func BenchmarkRead(b *testing.B) {
	for _, form := range []struct{ name, header, format string }{
		{"plain", "id,nitrate", "%d,%.3f\n"},
		{"quoted", "id,nitrate", "\"%d\",\"%.3f\"\n"},
	} {
		b.Run(form.name, func(b *testing.B) {
			name, size := benchFile(b, form.header, form.format)
			b.SetBytes(size)
			b.ReportAllocs()
			var ours, bytesAlone, library time.Duration
			for b.Loop() {
				bytesAlone += timed(b, name, func(f *os.File) error {
					// A buffer of its own keeps io.Copy from handing the file over unread.
					_, err := io.CopyBuffer(struct{ io.Writer }{io.Discard}, struct{ io.Reader }{f}, make([]byte, 1<<20))
					return err
				})
				ours += timed(b, name, func(f *os.File) error {
					t, err := resultfile.Read(f, resultfile.Options{Values: []string{"nitrate"}})
					if err == nil && t.Len() != benchRows {
						err = fmt.Errorf("got %d rows, want %d", t.Len(), benchRows)
					}
					return err
				})
				library += timed(b, name, readWithLibrary)
			}
			b.ReportMetric(float64(ours)/float64(library), "times-encoding/csv")
			b.ReportMetric(float64(ours)/float64(bytesAlone), "times-bytes-alone")
			b.ReportMetric(float64(ours.Nanoseconds())/float64(b.N)/benchRows, "ns/row")
		})
	}
}

func readWithLibrary(f *os.File) error {
	r := csv.NewReader(f)
	r.ReuseRecord = true
	values := make([]float64, 0, benchRows)
	_, err := r.Read()
	for err == nil {
		var record []string
		if record, err = r.Read(); err == nil {
			v, bad := strconv.ParseFloat(record[1], 64)
			if bad != nil {
				return bad
			}
			values = append(values, v)
		}
	}
	if err != io.EOF || len(values) != benchRows {
		return fmt.Errorf("got %d rows, %w", len(values), err)
	}
	return nil
}

func timed(b *testing.B, name string, work func(*os.File) error) time.Duration {
	b.Helper()
	f, err := os.Open(name)
	if err != nil {
		b.Fatal(err)
	}
	defer f.Close()
	start := time.Now()
	if err := work(f); err != nil {
		b.Fatal(err)
	}
	return time.Since(start)
}
