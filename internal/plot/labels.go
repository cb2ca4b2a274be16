package plot

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"limitary/internal/chart"
)

// lineKinds say how the lines of Lines.all are named and drawn.
var lineKinds = [5]struct{ name, attributes, colour string }{
	{"upper action", actionStroke, actionColour},
	{"upper warning", warningStroke, warningColour},
	{"centre", centreStroke, centreColour},
	{"lower warning", warningStroke, warningColour},
	{"lower action", actionStroke, actionColour},
}

const (
	actionStroke  = `stroke="` + actionColour + `" stroke-width="1.6"`
	warningStroke = `stroke="` + warningColour + `" stroke-width="1.2" stroke-dasharray="6 4"`
	centreStroke  = `stroke="` + centreColour + `" stroke-width="1.2" stroke-dasharray="14 3 2 3"`
)

// lineLabel is the text beside the end of a line.
type lineLabel struct {
	text, colour string
	value        float64
}

// lineLabels gives the labels of the lines at the last point that has any, and whether lines differ before it.
func (t *Trace) lineLabels() (labels []lineLabel, vary bool) {
	last := -1
	for i := len(t.Points) - 1; i >= 0 && last < 0; i-- {
		if t.Points[i].Lines.all() != [5]*Line{} {
			last = i
		}
	}
	if last < 0 {
		return nil, false
	}
	end := t.Points[last].Lines
	for k, l := range end.all() {
		if l != nil {
			text := lineKinds[k].name + " " + value(l.Value, t.Decimals) + basisNote(l.Basis)
			labels = append(labels, lineLabel{text, lineKinds[k].colour, l.Value})
		}
	}
	for i := range t.Points[:last] {
		if p := &t.Points[i]; p.Lines != end && !sameLines(p.Lines.all(), end.all()) {
			vary = true
			break
		}
	}
	return labels, vary
}

func sameLines(a, b [5]*Line) bool {
	for k := range a {
		if (a[k] == nil) != (b[k] == nil) || a[k] != nil && a[k].Value != b[k].Value {
			return false
		}
	}
	return true
}

func basisNote(b chart.Basis) string {
	switch b {
	case chart.MethodCriterion:
		return " (method)"
	case chart.Target:
		return " (target)"
	case chart.TailProbability:
		return " (probability)"
	}
	return ""
}

// spread moves heights, from top to bottom, as little as possible in squares so that neighbours lie gap apart and all
// between top and bottom (isotonic regression by pooling).
func spread(ys []float64, gap, top, bottom float64) []float64 {
	type block struct {
		sum float64
		n   int
	}
	var blocks []block
	for i, y := range ys {
		blocks = append(blocks, block{y - gap*float64(i), 1})
		for k := len(blocks) - 1; k > 0 && blocks[k-1].sum/float64(blocks[k-1].n) >= blocks[k].sum/float64(blocks[k].n); k-- {
			blocks[k-1].sum += blocks[k].sum
			blocks[k-1].n += blocks[k].n
			blocks = blocks[:k]
		}
	}
	placed := make([]float64, 0, len(ys))
	for _, b := range blocks {
		for range b.n {
			fit := math.Max(math.Min(b.sum/float64(b.n), bottom-gap*float64(len(ys)-1)), top)
			placed = append(placed, fit+gap*float64(len(placed)))
		}
	}
	return placed
}

// box is a rectangle that no other text may cover.
type box struct{ x1, y1, x2, y2 float64 }

func (b box) hits(others []box) bool {
	return slices.ContainsFunc(others, func(o box) bool {
		return b.x1 < o.x2 && o.x1 < b.x2 && b.y1 < o.y2 && o.y1 < b.y2
	})
}

// shortRules joins the last parts of the names of a point's rules.
func (p *Point) shortRules() string {
	var parts []string
	for _, h := range p.Hits {
		part := clipped(h.Rule[strings.LastIndex(h.Rule, "/")+1:], 10)
		if !slices.Contains(parts, part) {
			parts = append(parts, part)
		}
	}
	if len(parts) > 4 {
		parts = append(parts[:3], fmt.Sprintf("+%d", len(parts)-3))
	}
	return strings.Join(parts, ",")
}

// hitText tells all of a point with hits, for its tooltip.
func (t *Trace) hitText(i int) string {
	p := &t.Points[i]
	var b strings.Builder
	fmt.Fprintf(&b, "point %d", i+1)
	if p.Label != "" {
		fmt.Fprintf(&b, " (%s)", p.Label)
	}
	fmt.Fprintf(&b, ", %s:", strconv.FormatFloat(p.Statistic, 'g', -1, 64))
	for k, h := range p.Hits {
		if k > 0 {
			b.WriteByte(';')
		}
		fmt.Fprintf(&b, " %s %s, %s", h.Consequence, h.Rule, h.Side)
	}
	return b.String()
}

// completed counts the points at which one rule completed on one trace.
type completed struct {
	trace, rule string
	consequence Consequence
	points      int
}

// tally counts the hits of the chart by trace, rule and consequence, the worst first.
func (c Chart) tally() []completed {
	counts := make(map[completed]int)
	for _, t := range c.traces() {
		if t == nil {
			continue
		}
		for i := range t.Points {
			for _, h := range t.Points[i].Hits {
				counts[completed{t.Name, h.Rule, h.Consequence, 0}]++
			}
		}
	}
	all := make([]completed, 0, len(counts))
	for k, n := range counts {
		k.points = n
		all = append(all, k)
	}
	slices.SortFunc(all, func(a, b completed) int {
		return cmp.Or(cmp.Compare(b.consequence, a.consequence), cmp.Compare(len(a.rule), len(b.rule)), cmp.Compare(a.rule, b.rule), cmp.Compare(a.trace, b.trace))
	})
	return all
}

func plural(n int, one string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %ss", n, one)
}

// wrap breaks a text into lines no wider than limit; a word too wide is cut.
func wrap(text string, size, limit float64) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(text) {
		for width(word, size) > limit && len([]rune(word)) > 8 {
			word = clipped(word, len([]rune(word))*3/4)
		}
		if line != "" && width(line+" "+word, size) > limit {
			lines = append(lines, line)
			line = ""
		}
		line = strings.TrimPrefix(line+" "+word, " ")
	}
	if line != "" {
		lines = append(lines, line)
	}
	return lines
}
