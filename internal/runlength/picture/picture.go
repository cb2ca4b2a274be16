// Package picture draws run-length distributions: as bars of text for a terminal, and as SVG.
//
// Both show P(signal within n points) against n on a scale of 1, 2, 5, 10 and so on, because run lengths in control and
// after a shift differ by factors of hundreds. Nothing is told by colour alone, and every text is escaped.
package picture

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// Distribution is one curve.
type Distribution struct {
	// Label says which it is, such as "shift 1".
	Label string
	// Within gives P(signal within n points).
	Within func(n int) float64
}

const (
	// whole is the probability from which a curve has arrived at 1.
	whole = 0.995
	// longest bounds the axis, in points.
	longest = 1_000_000_000
)

// ticks gives 1, 2, 5, 10, ... up to where all distributions have arrived, or the longest.
func ticks(all []Distribution) (list []int) {
	for decade := 1; ; decade *= 10 {
		for _, m := range []int{1, 2, 5} {
			n := m * decade
			list = append(list, n)
			arrived := true
			for _, d := range all {
				arrived = arrived && d.Within(n) >= whole
			}
			if arrived && len(list) > 3 || n >= longest {
				return list
			}
		}
	}
}

// barWidth is the number of characters of a full bar.
const barWidth = 40

// Bars writes each distribution as bars of text, one a tick.
func Bars(w io.Writer, all []Distribution) error {
	var b bytes.Buffer
	for i, d := range all {
		if i > 0 {
			b.WriteByte('\n')
		}
		fmt.Fprintf(&b, "%s: signal within n points\n", printable(d.Label))
		for _, n := range ticks(all[i : i+1]) {
			p := d.Within(n)
			fmt.Fprintf(&b, "%11d |%-*s| %s\n", n, barWidth, strings.Repeat("#", int(math.Round(barWidth*p))), percent(p))
		}
	}
	_, err := w.Write(b.Bytes())
	return err
}

// percent writes a probability so that neither 0 nor 100 is said of what is not.
func percent(p float64) string {
	switch {
	case p > 0 && p < 0.0005:
		return "<0.1 %"
	case p < 1 && p > 0.9995:
		return ">99.9 %"
	}
	return strconv.FormatFloat(100*p, 'f', 1, 64) + " %"
}

func printable(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return '?'
		}
		return r
	}, s)
}

// Sizes of the SVG in pixels.
const (
	width, height             = 720.0, 420.0
	left, right, top, bottom  = 64.0, 24.0, 76.0, 64.0
	plotWidth, plotHeight     = width - left - right, height - top - bottom
	ink, quiet, grid          = "#1c2733", "#5b6875", "#e3e7ea"
	samplesPerPixel, fontName = 0.5, "sans-serif"
)

// strokes tell curves apart by colour and by dashes.
var strokes = []struct{ colour, dashes string }{
	{"#2f6b57", ""}, {"#7d2248", "8 3"}, {"#245f8f", "3 3"}, {"#96690f", "10 3 2 3"}, {"#8c0f2d", "2 5"}, {"#5b6875", "14 4"},
}

// CurvesMax is the number of distributions that one picture can keep apart.
const CurvesMax = 6

// SVG writes the distributions, at most CurvesMax, as curves over one logarithmic axis.
func SVG(w io.Writer, title, subtitle string, all []Distribution) error {
	if len(all) == 0 || len(all) > CurvesMax {
		return fmt.Errorf("picture: %d distributions: want 1 to %d", len(all), CurvesMax)
	}
	axis := ticks(all)
	last := float64(axis[len(axis)-1])
	x := func(n float64) float64 { return left + plotWidth*math.Log(n)/math.Log(last) }
	y := func(p float64) float64 { return top + plotHeight*(1-p) }
	var b bytes.Buffer
	fmt.Fprintf(&b, `<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 %g %g" width="%g" height="%g" font-family="%s" role="img">`+"\n", width, height, width, height, fontName)
	fmt.Fprintf(&b, "<title>%s</title>\n<rect width=\"%g\" height=\"%g\" fill=\"#ffffff\"/>\n", escaped(title), width, height)
	text(&b, left, 26, 16, ink, "start", title)
	text(&b, left, 46, 12, quiet, "start", clipped(subtitle))
	for _, p := range []float64{0, 0.25, 0.5, 0.75, 1} {
		line(&b, left, y(p), width-right, y(p), grid, 1)
		text(&b, left-8, y(p)+4, 11, quiet, "end", percent(p))
	}
	for _, n := range axis {
		line(&b, x(float64(n)), top, x(float64(n)), height-bottom, grid, 1)
		if len(axis) <= 14 || strings.HasPrefix(strconv.Itoa(n), "1") {
			text(&b, x(float64(n)), height-bottom+16, 11, quiet, "middle", strconv.Itoa(n))
		}
	}
	line(&b, left, height-bottom, width-right, height-bottom, ink, 1.2)
	text(&b, left+plotWidth/2, height-bottom+34, 12, ink, "middle", "points")
	text(&b, left, top-10, 12, ink, "start", "probability of a signal within so many points")
	for i, d := range all {
		curve(&b, d, last, x, y, i)
	}
	legend(&b, all)
	b.WriteString("</svg>\n")
	_, err := w.Write(b.Bytes())
	return err
}

// curve draws the steps of one distribution, one every other pixel where they are closer.
func curve(b *bytes.Buffer, d Distribution, last float64, x, y func(float64) float64, stroke int) {
	b.WriteString(`<path d="`)
	steps := int(plotWidth * samplesPerPixel)
	previous := 0
	for i := range steps + 1 {
		n := int(math.Round(math.Pow(last, float64(i)/float64(steps))))
		if n == previous {
			continue
		}
		command := "L"
		if previous == 0 {
			command = "M"
		}
		previous = n
		fmt.Fprintf(b, "%s%.2f %.2f", command, x(float64(n)), y(d.Within(n)))
	}
	fmt.Fprintf(b, `" fill="none" stroke="%s" stroke-width="2"%s/>`+"\n", strokes[stroke].colour, dashed(stroke))
}

func dashed(stroke int) string {
	if strokes[stroke].dashes == "" {
		return ""
	}
	return fmt.Sprintf(` stroke-dasharray="%s"`, strokes[stroke].dashes)
}

func legend(b *bytes.Buffer, all []Distribution) {
	at, below := left, height-12.0
	for i, d := range all {
		fmt.Fprintf(b, `<line x1="%.2f" y1="%.2f" x2="%.2f" y2="%.2f" stroke="%s" stroke-width="2"%s/>`+"\n", at, below-4, at+26, below-4, strokes[i].colour, dashed(i))
		text(b, at+31, below, 11, ink, "start", d.Label)
		at += plotWidth / float64(len(all))
	}
}

func line(b *bytes.Buffer, x1, y1, x2, y2 float64, colour string, thick float64) {
	fmt.Fprintf(b, `<line x1="%.2f" y1="%.2f" x2="%.2f" y2="%.2f" stroke="%s" stroke-width="%g"/>`+"\n", x1, y1, x2, y2, colour, thick)
}

func text(b *bytes.Buffer, x, y, size float64, colour, anchor, s string) {
	fmt.Fprintf(b, `<text x="%.2f" y="%.2f" font-size="%g" fill="%s" text-anchor="%s">%s</text>`+"\n", x, y, size, colour, anchor, escaped(s))
}

// subtitleRunes is about what fits across the picture.
const subtitleRunes = 100

func clipped(s string) string {
	if r := []rune(s); len(r) > subtitleRunes {
		return string(r[:subtitleRunes-1]) + "…"
	}
	return s
}

func escaped(s string) string {
	var b strings.Builder
	_ = xml.EscapeText(&b, []byte(printable(strings.ToValidUTF8(s, "?")))) // a Builder does not fail
	return b.String()
}
