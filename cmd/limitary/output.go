package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"limitary/internal/plot"
)

// writeJSON writes a message of the contract as the service would: zero values included, absent numbers left out. The
// same message gives the same bytes.
func writeJSON(w io.Writer, m proto.Message) error {
	raw, err := protojson.MarshalOptions{EmitDefaultValues: true}.Marshal(m)
	if err != nil {
		return err
	}
	var out bytes.Buffer // protojson varies its spaces from build to build, on purpose
	if err := json.Indent(&out, raw, "", "  "); err != nil {
		return err
	}
	out.WriteByte('\n')
	_, err = w.Write(out.Bytes())
	return err
}

// checkPlotPath refuses a path that a picture should not be written to.
func checkPlotPath(path, input string) error {
	if path == "" {
		return nil
	}
	if !strings.EqualFold(filepath.Ext(path), ".svg") {
		return fmt.Errorf("--plot %q: the picture is written as SVG; name a file that ends in .svg", path)
	}
	there, err := os.Stat(path)
	if err != nil {
		return nil // a new file, or one that writing will tell about
	}
	if read, err := os.Stat(input); err == nil && os.SameFile(there, read) {
		return fmt.Errorf("--plot %q: is the file of results itself", path)
	}
	return nil
}

// writePlot writes the picture whole or not at all.
func writePlot(path string, c plot.Chart) error {
	file, err := os.CreateTemp(filepath.Dir(path), ".plot-*")
	if err != nil {
		return fmt.Errorf("--plot: %w", err)
	}
	defer os.Remove(file.Name())
	err = plot.Write(file, c)
	if err == nil {
		err = file.Chmod(0o644)
	}
	if closed := file.Close(); err == nil {
		err = closed
	}
	if err == nil {
		err = os.Rename(file.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("--plot %s: %w", path, err)
	}
	return nil
}

// progress shows how far long reading has come, where a person is watching.
type progress struct {
	env  *environment
	what string
	size int64
	last string
}

func newProgress(env *environment, what string, size int64) *progress {
	return &progress{env: env, what: what, size: size}
}

func (p *progress) show(rows, bytes int64) {
	if !p.env.Interactive {
		return
	}
	text := fmt.Sprintf("%s: %d rows, %.1f MB", p.what, rows, float64(bytes)/1e6)
	if p.size > 0 {
		text += fmt.Sprintf(" of %.1f MB (%d %%)", float64(p.size)/1e6, 100*bytes/p.size)
	}
	fmt.Fprintf(p.env.Stderr, "\r%-*s", len(p.last), text)
	p.last = text
}

// clear takes the progress off the screen, so that what follows stands alone.
func (p *progress) clear() {
	if p.last != "" {
		fmt.Fprintf(p.env.Stderr, "\r%s\r", strings.Repeat(" ", len(p.last)))
	}
}

// numberFlag is a number that may be absent.
type numberFlag struct{ value *float64 }

func (n *numberFlag) String() string {
	if n == nil || n.value == nil {
		return ""
	}
	return strconv.FormatFloat(*n.value, 'g', -1, 64)
}

func (n *numberFlag) Set(s string) error {
	x, err := parseNumber(s)
	if err == nil {
		n.value = &x
	}
	return err
}

func parseNumber(s string) (float64, error) {
	x, err := strconv.ParseFloat(strings.TrimSpace(s), 64)
	switch {
	case err == nil && x-x == 0:
		return x, nil
	case strings.Contains(s, ",") && !strings.Contains(s, "."):
		return 0, fmt.Errorf("want a number with a decimal point, %s", strings.Replace(s, ",", ".", 1))
	}
	return 0, fmt.Errorf("want a finite number")
}

// countFlag is a whole number that may be absent.
type countFlag struct{ value *int }

func (n *countFlag) String() string {
	if n == nil || n.value == nil {
		return ""
	}
	return strconv.Itoa(*n.value)
}

func (n *countFlag) Set(s string) error {
	x, err := strconv.Atoi(strings.TrimSpace(s))
	if err != nil || x < 0 {
		return fmt.Errorf("want a whole number from 0")
	}
	n.value = &x
	return nil
}
