package plot

import (
	"fmt"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// panel is one trace laid out.
type panel struct {
	*Trace
	scale       scale
	left, right float64
	labels      []lineLabel
}

// lay gives the panel of a trace between the given edges.
func (t *Trace) lay(role chart.Role, left, right, top, bottom float64) panel {
	least, greatest := math.Inf(1), math.Inf(-1)
	take := func(v float64) { least, greatest = math.Min(least, v), math.Max(greatest, v) }
	for i := range t.Points {
		p := &t.Points[i]
		if !p.Missing {
			take(p.Statistic)
		}
		if i > 0 && p.Lines == t.Points[i-1].Lines {
			continue
		}
		for _, l := range p.Lines.all() {
			if l != nil {
				take(l.Value)
			}
		}
	}
	switch {
	case least > greatest:
		least, greatest = 0, 1
	case role == chart.Dispersion:
		take(0) // no scatter at all is where its scale begins
		if greatest == 0 {
			greatest = 1
		}
	}
	labels, _ := t.lineLabels()
	return panel{t, newScale(least, greatest, top, bottom), left, right, labels}
}

// x gives the middle of the place of point i; edge its left edge.
func (p *panel) x(i int) float64 { return p.edge(float64(i) + 0.5) }

func (p *panel) edge(i float64) float64 {
	return p.left + i/float64(len(p.Points))*(p.right-p.left)
}

// y gives the height of point i.
func (p *panel) y(i int) float64 {
	if p.Points[i].Missing {
		return p.scale.bottom - 6
	}
	return p.scale.y(p.Points[i].Statistic)
}

func (c *canvas) panel(p panel, unit string) {
	fmt.Fprintf(c, "<g>\n")
	name := clipped(p.Name, 60)
	if caption := p.scale.caption(clipped(unit, 40)); caption != "" {
		name += " (" + caption + ")"
	}
	c.text(p.left, p.scale.top-8, style{size: 12.5, colour: inkColour, bold: true}, name)
	c.frame(p)
	if len(p.Points) == 0 {
		c.text((p.left+p.right)/2, (p.scale.top+p.scale.bottom)/2, style{size: 13, colour: quietColour, anchor: "middle"}, "no results")
	}
	if p.dense() {
		c.connect(p, denseStroke) // below the lines, which it would cover
	}
	c.lines(p)
	c.breaks(p)
	if !p.dense() {
		c.connect(p, pointStroke)
	}
	c.points(p)
	c.lineEnds(p)
	c.WriteString("</g>\n")
}

// dense says that the points are too many for a dot each.
func (p *panel) dense() bool { return len(p.Points) > PointsDrawnMax }

func (c *canvas) frame(p panel) {
	s := p.scale
	if len(p.Points) > 0 {
		for _, t := range s.ticks() {
			c.line(p.left, t.at, p.right, t.at, `stroke="`+gridColour+`"`)
			c.text(p.left-7, t.at+3.8, style{size: 11, colour: quietColour, anchor: "end"}, t.label)
		}
	}
	fmt.Fprintf(c, `<rect x="%s" y="%s" width="%s" height="%s" fill="none" stroke="%s" stroke-width="0.8"/>`+"\n",
		num(p.left), num(s.top), num(p.right-p.left), num(s.bottom-s.top), quietColour)
}

// lines draws the five lines, stepping where they change and stopping at breaks.
func (c *canvas) lines(p panel) {
	for k, kind := range lineKinds {
		var vs []vertex
		var before *Line
		for i := range p.Points {
			l := p.Points[i].Lines.all()[k]
			joined := before != nil && !p.Points[i].BreakBefore
			switch {
			case l == nil:
			case joined && before.Value == l.Value:
				vs[len(vs)-1].x = p.edge(float64(i + 1))
			default:
				y := p.scale.y(l.Value)
				from := p.edge(float64(i))
				if i > 0 && p.Points[i].BreakBefore {
					from += gapHalf(p)
				}
				vs = append(vs, vertex{from, y, !joined}, vertex{p.edge(float64(i + 1)), y, false})
			}
			if l != nil && i+1 < len(p.Points) && p.Points[i+1].BreakBefore {
				vs[len(vs)-1].x -= gapHalf(p)
			}
			before = l
		}
		c.path(vs, kind.attributes)
	}
}

// gapHalf is half the gap that a break leaves in the lines.
func gapHalf(p panel) float64 {
	return math.Min(4, 0.25*(p.right-p.left)/float64(len(p.Points)))
}

// breaks draws a vertical mark before each segment but the first; marks closer than two pixels fall together.
func (c *canvas) breaks(p panel) {
	last := math.Inf(-1)
	for i := range p.Points {
		if x := p.edge(float64(i)); i > 0 && p.Points[i].BreakBefore && x-last >= 2 {
			c.line(x, p.scale.top, x, p.scale.bottom, breakStroke)
			last = x
		}
	}
}

const (
	breakStroke  = `stroke="` + inkColour + `" stroke-width="1.4" stroke-dasharray="1.5 3.5"`
	pointStroke  = `stroke="` + inkColour + `" stroke-width="1" stroke-linejoin="round"`
	denseStroke  = `stroke="` + denseColour + `" stroke-width="0.7" stroke-linejoin="round"`
	bridgeStroke = `stroke="` + inkColour + `" stroke-width="0.9" stroke-dasharray="1 3"`
)

// strokes gives the connecting line: solid from point to point, dotted across results that are missing or not judged.
func (p *panel) strokes() (solid, dotted []vertex) {
	before, broken, passed := -1, false, false
	for i := range p.Points {
		q := &p.Points[i]
		broken = broken || q.BreakBefore
		if !q.onLine() {
			passed = passed || q.Missing || q.NotJudged
			continue
		}
		at := vertex{p.x(i), p.y(i), before < 0 || broken || passed}
		if passed && before >= 0 && !broken {
			dotted = append(dotted, vertex{p.x(before), p.y(before), true}, vertex{at.x, at.y, false})
		}
		solid = append(solid, at)
		before, broken, passed = i, false, false
	}
	return solid, dotted
}

func (c *canvas) connect(p panel, stroke string) {
	solid, dotted := p.strokes()
	c.path(solid, stroke)
	c.path(dotted, bridgeStroke)
}

// points draws the markers, the worst last, so that nothing covers them.
func (c *canvas) points(p panel) {
	keep := p.kept()
	var taken []box
	var byWorst [Stop + 1][]int
	for i := range p.Points {
		q := &p.Points[i]
		if w := q.worst(); w > 0 {
			byWorst[w] = append(byWorst[w], i)
			taken = append(taken, box{p.x(i) - 7, p.y(i) - 7, p.x(i) + 7, p.y(i) + 7})
		} else if keep[i] {
			c.extras(p, i)
			c.marker(markOf(q), p.x(i), p.y(i), 1)
			c.WriteByte('\n')
		}
	}
	size := 1.0
	if len(taken) > hitLabelsMax {
		size = 0.6
	}
	for _, hits := range byWorst {
		for _, i := range hits {
			fmt.Fprintf(c, `<g class="hit"><title>%s</title>`, clean(p.hitText(i)))
			c.extras(p, i)
			c.marker(markOf(&p.Points[i]), p.x(i), p.y(i), size)
			c.WriteString("</g>\n")
		}
	}
	if size < 1 {
		return
	}
	for w := Stop; w >= Look; w-- {
		for _, i := range byWorst[w] {
			taken = c.hitLabel(p, i, taken)
		}
	}
}

// hitLabelsMax is the number of hits up to which they have labels, where there is room, and markers of full size.
const hitLabelsMax = 300

// extras draws what may come with any marker.
func (c *canvas) extras(p panel, i int) {
	q := &p.Points[i]
	if q.Excluded && !q.Missing {
		c.ring(p.x(i), p.y(i))
	}
	if q.Bound != decimal.Measured && !q.Missing {
		c.arrow(q.Bound, p.x(i), p.y(i))
	}
}

// hitLabel writes the rules of point i above or below its marker, or nowhere where there is no room.
func (c *canvas) hitLabel(p panel, i int, taken []box) []box {
	q := &p.Points[i]
	text := q.shortRules()
	x, y, half := p.x(i), p.y(i), width(text, 10)/2
	above, below := y-10, y+17
	tries := []float64{above, below}
	if q.Hits[0].Side == Lower {
		tries = []float64{below, above}
	}
	for _, base := range tries {
		b := box{x - half, base - 8, x + half, base + 1}
		if b.x1 < p.left || b.x2 > p.right || b.y1 < p.scale.top || b.y2 > p.scale.bottom || b.hits(taken) {
			continue
		}
		c.text(x, base, style{size: 10, colour: inkColour, anchor: "middle", bold: true, haloed: true}, text)
		return append(taken, b)
	}
	return taken
}

// kept says which markers are drawn. Up to PointsDrawnMax points that is all of them. Beyond, of all points of one look
// in half a pixel the least and the greatest stay, and of the dots on the connecting line, which shows them, only the
// least and the greatest of the trace.
func (p *panel) kept() []bool {
	keep := make([]bool, len(p.Points))
	type ends struct{ least, greatest int }
	looks := make(map[int]ends)
	flush := func() {
		for look, e := range looks {
			keep[e.least], keep[e.greatest] = true, true
			delete(looks, look)
		}
	}
	column, least, greatest := math.Inf(-1), -1, -1
	for i := range p.Points {
		if !p.dense() {
			keep[i] = true
			continue
		}
		q := &p.Points[i]
		if !q.Missing {
			if least < 0 || q.Statistic < p.Points[least].Statistic {
				least = i
			}
			if greatest < 0 || q.Statistic > p.Points[greatest].Statistic {
				greatest = i
			}
		}
		if at := math.Floor(2 * p.x(i)); at != column {
			flush()
			column = at
		}
		look := p.look(i)
		if look == 0 {
			continue
		}
		e, seen := looks[look]
		if !seen {
			e = ends{i, i}
		}
		if q.Statistic < p.Points[e.least].Statistic {
			e.least = i
		}
		if q.Statistic > p.Points[e.greatest].Statistic {
			e.greatest = i
		}
		looks[look] = e
	}
	flush()
	if least >= 0 {
		keep[least], keep[greatest] = true, true
	}
	return keep
}

// look numbers what a point looks like; 0 is a dot that the connecting line shows as well.
func (p *panel) look(i int) int {
	q := &p.Points[i]
	look := 4 * int(markOf(q))
	if q.Excluded {
		look++
	}
	if q.Bound != decimal.Measured {
		look += 2
	}
	if look == 0 && !p.connected(i-1, i) && !p.connected(i, i+1) {
		return 4 * int(marks) // alone
	}
	return look
}

// connected says whether the line runs from point i to its neighbour j.
func (p *panel) connected(i, j int) bool {
	return i >= 0 && j < len(p.Points) && p.Points[i].onLine() && p.Points[j].onLine() && !p.Points[j].BreakBefore
}

// lineEnds writes the values of the lines beside their ends.
func (c *canvas) lineEnds(p panel) {
	ordered := p.labels // from the upper action line down; lines set apart from sigma may lie in another order
	sortByValue(ordered)
	ys := make([]float64, len(ordered))
	for i, l := range ordered {
		ys[i] = p.scale.y(l.value)
	}
	for i, y := range spread(ys, 13.5, p.scale.top+2, p.scale.bottom-2) {
		c.path([]vertex{{p.right, ys[i], true}, {p.right + 9, y, false}}, `stroke="`+ordered[i].colour+`" stroke-width="0.7"`)
		c.text(p.right+12, y+3.8, style{size: 11, colour: ordered[i].colour}, ordered[i].text)
	}
}
