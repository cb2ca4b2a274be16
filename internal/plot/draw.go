package plot

import (
	"bytes"
	"fmt"
	"hash/fnv"
	"math"
	"slices"
	"strconv"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Sizes in pixels.
const (
	pageWidth        = 1000.0
	pageMargin       = 18.0
	locationHeight   = 280.0
	dispersionHeight = 180.0
	aloneHeight      = 330.0
)

func sortByValue(labels []lineLabel) {
	slices.SortStableFunc(labels, func(a, b lineLabel) int {
		switch {
		case a.value > b.value:
			return -1
		case a.value < b.value:
			return 1
		}
		return 0
	})
}

// draw writes the whole picture. The heights are known only at the end, so the body is drawn first.
func (c Chart) draw(out *bytes.Buffer) {
	body := &canvas{}
	y := pageMargin + 14
	if c.Title != "" {
		body.text(pageMargin, y, style{size: 17, colour: inkColour, bold: true}, clipped(c.Title, 90))
		y += 20
	}
	if c.Subtitle != "" {
		body.text(pageMargin, y, style{size: 12, colour: quietColour}, clipped(c.Subtitle, 140))
		y += 18
	}
	panels := c.panels(y + 14)
	for _, p := range panels {
		body.panel(p, c.Unit)
		y = p.scale.bottom
	}
	y = body.axis(panels, y)
	y = body.key(panels, y+30)
	y = body.foot(c, panels, y+8)

	mark := fnv.New32a()
	mark.Write(body.Bytes())
	id := fmt.Sprintf("c%08x", mark.Sum32())
	title := c.Title
	if title == "" {
		title = "Control chart"
	}
	fmt.Fprintf(out, `<svg xmlns="http://www.w3.org/2000/svg" width="%s" height="%s" viewBox="0 0 %s %s" role="img" aria-labelledby="%s-t %s-d" font-family="'Helvetica Neue', Arial, 'Liberation Sans', 'DejaVu Sans', sans-serif">`+"\n",
		num(pageWidth), num(y), num(pageWidth), num(y), id, id)
	fmt.Fprintf(out, "<title id=\"%s-t\">%s</title>\n<desc id=\"%s-d\">%s</desc>\n", id, clean(title), id, clean(c.description()))
	fmt.Fprintf(out, `<rect width="%s" height="%s" fill="#ffffff"/>`+"\n", num(pageWidth), num(y))
	out.Write(body.Bytes())
	out.WriteString("</svg>\n")
}

// panels lays the traces out below top, with common left and right edges.
func (c Chart) panels(top float64) []panel {
	heights := [...]float64{locationHeight, dispersionHeight}
	if c.Location == nil || c.Dispersion == nil {
		heights = [...]float64{aloneHeight, aloneHeight}
	}
	var panels []panel
	left, right := 30.0, 20.0
	for role, t := range c.traces() {
		if t == nil {
			continue
		}
		p := t.lay(chart.Role(role), 0, pageWidth, top, top+heights[role])
		for _, k := range p.scale.ticks() {
			left = math.Max(left, width(k.label, 11)+10)
		}
		for _, l := range p.labels {
			right = math.Max(right, width(l.text, 11)+14)
		}
		panels = append(panels, p)
		top += heights[role] + 34
	}
	for i := range panels {
		panels[i].left, panels[i].right = pageMargin+left, pageWidth-8-math.Min(right, 300)
	}
	return panels
}

// labelRunesMax bounds a label below the axis; a time with an offset has 25 characters.
const labelRunesMax = 25

// axis writes labels below the last panel, as many as have room, and gives the height reached.
func (c *canvas) axis(panels []panel, y float64) float64 {
	p := panels[0]
	n := len(p.Points)
	if n == 0 {
		return y
	}
	widest, named := width(strconv.Itoa(n), 11), false
	for i := range p.Points {
		if label := p.Points[i].Label; label != "" {
			named = true
			widest = math.Max(widest, width(clipped(label, labelRunesMax), 11))
		}
	}
	step := niceCount((widest + 16) / ((p.right - p.left) / float64(n)))
	// Bare numbers fall on round ones, names begin with the first.
	first := step - 1
	if named || n < step {
		first = 0
	}
	for i := first; i < n; i += step {
		label := clipped(p.Points[i].Label, labelRunesMax)
		if label == "" {
			label = strconv.Itoa(i + 1)
		}
		for _, q := range panels {
			c.line(q.x(i), q.scale.bottom, q.x(i), q.scale.bottom+4, `stroke="`+quietColour+`" stroke-width="0.8"`)
		}
		half := width(label, 11) / 2
		x := math.Max(math.Min(p.x(i), pageWidth-6-half), 6+half)
		c.text(x, y+17, style{size: 11, colour: quietColour, anchor: "middle"}, label)
	}
	return y + 17
}

// niceCount gives the least of 1, 2, 5 times a power of ten that is no less than x.
func niceCount(x float64) int {
	for power := 1; ; power *= 10 {
		for _, m := range []int{1, 2, 5} {
			if float64(m*power) >= x {
				return m * power
			}
		}
	}
}

// entry is one item of the key.
type entry struct {
	text string
	draw func(x, y float64)
}

// key explains what the picture holds, and gives the height reached.
func (c *canvas) key(panels []panel, y float64) float64 {
	x := pageMargin
	for _, e := range c.entries(panels) {
		w := 30 + width(e.text, 11) + 14
		if x+w > pageWidth-pageMargin && x > pageMargin {
			x, y = pageMargin, y+20
		}
		e.draw(x+12, y-4)
		c.WriteByte('\n')
		c.text(x+28, y, style{size: 11, colour: inkColour}, e.text)
		x += w
	}
	return y + 8
}

// entries are the markers and lines that occur.
func (c *canvas) entries(panels []panel) []entry {
	s := survey(panels)
	var all []entry
	for _, m := range []mark{markStop, markAct, markLook, markPlain, markNotJudged, markRepeat, markMissing} {
		if s.marks[m] {
			all = append(all, entry{markNames[m], func(x, y float64) { c.marker(m, x, y, 1) }})
		}
	}
	add := func(present bool, text string, draw func(x, y float64)) {
		if present {
			all = append(all, entry{text, draw})
		}
	}
	dot := func(x, y float64) { c.marker(markPlain, x, y, 1) }
	add(s.excluded, "left out of the estimate", func(x, y float64) { c.ring(x, y); dot(x, y) })
	add(s.below, "less-than result", func(x, y float64) { dot(x, y-6); c.arrow(decimal.Below, x, y-6) })
	add(s.above, "greater-than result", func(x, y float64) { dot(x, y+6); c.arrow(decimal.Above, x, y+6) })
	stroke := func(attributes string) func(x, y float64) {
		return func(x, y float64) { c.line(x-12, y, x+12, y, attributes) }
	}
	add(s.lines[2], "centre line", stroke(centreStroke))
	add(s.lines[0] || s.lines[4], "action line", stroke(actionStroke))
	add(s.lines[1] || s.lines[3], "warning line", stroke(warningStroke))
	add(s.bridged, "across results missing or not judged", stroke(bridgeStroke))
	add(s.broken, "new segment", func(x, y float64) { c.line(x, y-8, x, y+8, breakStroke) })
	return all
}

// surveyed says what occurs in a chart.
type surveyed struct {
	marks                                   [marks]bool
	lines                                   [5]bool
	excluded, below, above, broken, bridged bool
}

func survey(panels []panel) (s surveyed) {
	for _, p := range panels {
		_, dotted := p.strokes()
		s.bridged = s.bridged || len(dotted) > 0
		for i := range p.Points {
			q := &p.Points[i]
			s.marks[markOf(q)] = true
			s.excluded = s.excluded || q.Excluded && !q.Missing
			s.below = s.below || q.Bound == decimal.Below && !q.Missing
			s.above = s.above || q.Bound == decimal.Above && !q.Missing
			s.broken = s.broken || i > 0 && q.BreakBefore
			if i > 0 && q.Lines == p.Points[i-1].Lines {
				continue
			}
			for k, l := range q.Lines.all() {
				s.lines[k] = s.lines[k] || l != nil
			}
		}
	}
	return s
}

// rulesShownMax bounds the rules listed at the foot.
const rulesShownMax = 12

// foot writes the rules that completed and the notes, and gives the height of the page.
func (c *canvas) foot(of Chart, panels []panel, y float64) float64 {
	write := func(text string, colour string) {
		for _, line := range wrap(text, 11, pageWidth-2*pageMargin) {
			y += 16
			c.text(pageMargin, y, style{size: 11, colour: colour}, line)
		}
	}
	if rules := of.tally(); len(rules) > 0 {
		texts := make([]string, 0, rulesShownMax+1)
		for i, r := range rules {
			if i == rulesShownMax {
				texts = append(texts, fmt.Sprintf("and %d more", len(rules)-i))
				break
			}
			texts = append(texts, fmt.Sprintf("%s %s at %s (%s)", r.consequence, clipped(r.rule, 60), plural(r.points, "point"), clipped(r.trace, 40)))
		}
		write("Rules completed: "+strings.Join(texts, "; ")+".", inkColour)
	}
	for _, p := range panels {
		if _, vary := p.lineLabels(); vary {
			write("The lines change along the chart; the values beside them are those at the last point.", quietColour)
			break
		}
	}
	for _, note := range of.Notes {
		write(note, quietColour)
	}
	return y + pageMargin
}

// description says in words what the picture shows, for those who cannot see it.
func (c Chart) description() string {
	var b strings.Builder
	for _, t := range c.traces() {
		if t == nil {
			continue
		}
		missing, unjudged, hits := 0, 0, 0
		for i := range t.Points {
			p := &t.Points[i]
			switch {
			case p.Missing:
				missing++
			case p.NotJudged:
				unjudged++
			}
			if len(p.Hits) > 0 {
				hits++
			}
		}
		fmt.Fprintf(&b, "%s: %s, %d without a result, %d not judged, %d where a rule completed.", t.Name, plural(len(t.Points), "point"), missing, unjudged, hits)
		labels, _ := t.lineLabels()
		for i, l := range labels {
			if i == 0 {
				b.WriteString(" Lines:")
			} else {
				b.WriteByte(',')
			}
			b.WriteString(" " + l.text)
			if i == len(labels)-1 {
				b.WriteByte('.')
			}
		}
		b.WriteByte(' ')
	}
	for _, r := range c.tally() {
		fmt.Fprintf(&b, "%s %s at %s (%s). ", r.consequence, r.rule, plural(r.points, "point"), r.trace)
	}
	return strings.TrimSpace(b.String())
}
