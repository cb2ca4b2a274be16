package plot

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Colours, dark enough to print; nothing is told by colour alone.
const (
	inkColour     = "#1c2733"
	quietColour   = "#5b6875"
	denseColour   = "#8794a1"
	gridColour    = "#e3e7ea"
	centreColour  = "#2f6b57"
	warningColour = "#96690f"
	actionColour  = "#7d2248"
	lookColour    = "#245f8f"
	actColour     = "#b04a00"
	stopColour    = "#8c0f2d"
)

// canvas writes SVG elements.
type canvas struct{ bytes.Buffer }

// num writes a length in pixels to a hundredth.
func num(x float64) string {
	x = math.Round(x*100) / 100
	if !finite(x) || x == 0 {
		return "0" // the callers give finite numbers; no other text may stand in an attribute
	}
	return strconv.FormatFloat(x, 'f', -1, 64)
}

// clean makes any text safe to stand in the picture: markup escaped, what XML cannot hold replaced, and the invisible
// marks that turn the direction of the text around taken out.
func clean(text string) string {
	text = strings.Map(func(r rune) rune {
		switch {
		case r == '\n' || r == '\t' || r == '\r':
			return ' '
		case unicode.Is(unicode.Bidi_Control, r) || unicode.IsControl(r):
			return unicode.ReplacementChar
		}
		return r
	}, strings.ToValidUTF8(text, "\uFFFD"))
	var b strings.Builder
	_ = xml.EscapeText(&b, []byte(text)) // a Builder does not fail
	return b.String()
}

// clipped shortens a text to a number of characters.
func clipped(text string, runes int) string {
	if utf8.RuneCountInString(text) <= runes {
		return text
	}
	return string([]rune(text)[:runes-1]) + "…"
}

// width estimates the width of a text, on the wide side for the common sans-serif fonts.
func width(text string, size float64) float64 {
	w := 0.0
	for _, r := range text {
		switch {
		case strings.ContainsRune("iljtf.,:;'|!()[] ⁻¹", r):
			w += 0.36
		case r >= 0x2E80: // ideographs and the like
			w += 1.05
		case unicode.IsUpper(r) || strings.ContainsRune("mw×%", r):
			w += 0.76
		default:
			w += 0.62
		}
	}
	return w * size
}

// style is how a text stands.
type style struct {
	size         float64
	colour       string
	anchor       string // start, middle or end
	bold, haloed bool
}

func (c *canvas) text(x, y float64, s style, text string) {
	fmt.Fprintf(c, `<text x="%s" y="%s" font-size="%s" fill="%s"`, num(x), num(y), num(s.size), s.colour)
	if s.anchor != "" && s.anchor != "start" {
		fmt.Fprintf(c, ` text-anchor="%s"`, s.anchor)
	}
	if s.bold {
		c.WriteString(` font-weight="bold"`)
	}
	if s.haloed {
		c.WriteString(` stroke="#ffffff" stroke-width="3" stroke-linejoin="round" paint-order="stroke"`)
	}
	fmt.Fprintf(c, ">%s</text>\n", clean(text))
}

func (c *canvas) line(x1, y1, x2, y2 float64, attributes string) {
	fmt.Fprintf(c, `<line x1="%s" y1="%s" x2="%s" y2="%s" %s/>`+"\n", num(x1), num(y1), num(x2), num(y2), attributes)
}

// vertex is one corner of a path; move begins a new stroke.
type vertex struct {
	x, y float64
	move bool
}

// path draws strokes; of the corners in one half pixel it keeps first, least, greatest and last.
func (c *canvas) path(vs []vertex, attributes string) {
	if len(vs) == 0 {
		return
	}
	c.WriteString(`<path d="`)
	for i := 0; i < len(vs); {
		j := i + 1
		for j < len(vs) && !vs[j].move && math.Floor(2*vs[j].x) == math.Floor(2*vs[i].x) {
			j++
		}
		for _, v := range corners(vs[i:j]) {
			command := byte('L')
			if v.move {
				command = 'M'
			}
			c.WriteByte(command)
			c.WriteString(num(v.x))
			c.WriteByte(' ')
			c.WriteString(num(v.y))
		}
		i = j
	}
	fmt.Fprintf(c, `" fill="none" %s/>`+"\n", attributes)
}

// corners gives first, least, greatest and last of vs, in their order.
func corners(vs []vertex) []vertex {
	if len(vs) <= 4 {
		return vs
	}
	least, greatest := 0, 0
	for i, v := range vs {
		if v.y < vs[least].y {
			least = i
		}
		if v.y > vs[greatest].y {
			greatest = i
		}
	}
	var kept []vertex
	last := -1
	for _, i := range []int{0, min(least, greatest), max(least, greatest), len(vs) - 1} {
		if i > last {
			kept = append(kept, vs[i])
			last = i
		}
	}
	return kept
}
