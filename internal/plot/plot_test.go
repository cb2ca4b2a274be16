package plot_test

import (
	"bytes"
	"encoding/xml"
	"errors"
	"io"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"unicode/utf8"

	"limitary/internal/chart"
	"limitary/internal/plot"
)

// picture is what the tests look for in an SVG.
type picture struct {
	elements map[string]int
	hits     []string // the tooltips
	texts    []textAt
	titles   int
	attrs    map[string]string // of the root
}

type textAt struct {
	x, y float64
	text string
}

// parse reads an SVG strictly and holds every number in it against the page.
func parse(t *testing.T, svg []byte) picture {
	t.Helper()
	p := picture{elements: map[string]int{}, attrs: map[string]string{}}
	d := xml.NewDecoder(bytes.NewReader(svg))
	var path []string
	inHit := false
	for {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("not well-formed: %v", err)
		}
		switch e := token.(type) {
		case xml.StartElement:
			p.elements[e.Name.Local]++
			path = append(path, e.Name.Local)
			at := textAt{}
			for _, a := range e.Attr {
				checkAttribute(t, e.Name.Local, a)
				if len(path) == 1 {
					p.attrs[a.Name.Local] = a.Value
				}
				switch v, _ := strconv.ParseFloat(a.Value, 64); a.Name.Local {
				case "class":
					inHit = a.Value == "hit"
				case "x":
					at.x = v
				case "y":
					at.y = v
				}
			}
			if e.Name.Local == "text" {
				p.texts = append(p.texts, at)
			}
		case xml.EndElement:
			path = path[:len(path)-1]
		case xml.CharData:
			switch last := path[max(len(path)-1, 0):]; {
			case len(last) == 0:
			case last[0] == "text":
				p.texts[len(p.texts)-1].text += string(e)
			case last[0] == "title" && inHit && len(path) > 2:
				p.hits = append(p.hits, string(e))
			}
		}
	}
	return p
}

var numbers = regexp.MustCompile(`-?\d+(\.\d+)?`)

// checkAttribute refuses words where numbers belong and coordinates far off the page.
func checkAttribute(t *testing.T, element string, a xml.Attr) {
	t.Helper()
	switch a.Name.Local {
	case "x", "y", "x1", "x2", "y1", "y2", "cx", "cy", "r", "width", "height", "d", "viewBox", "font-size", "stroke-width":
	default:
		return
	}
	rest := numbers.ReplaceAllString(a.Value, "")
	if strings.Trim(rest, "MLVZml ") != "" {
		t.Fatalf("<%s %s=%q> holds more than numbers", element, a.Name.Local, a.Value)
	}
	for _, n := range numbers.FindAllString(a.Value, -1) {
		if v, err := strconv.ParseFloat(n, 64); err != nil || math.Abs(v) > 2000 {
			t.Fatalf("<%s %s=%q> leaves the page", element, a.Name.Local, a.Value)
		}
	}
}

func traces(c plot.Chart) (all []*plot.Trace) {
	for _, t := range []*plot.Trace{c.Location, c.Dispersion} {
		if t != nil {
			all = append(all, t)
		}
	}
	return all
}

// checkPicture holds what must be true of any chart's picture.
func checkPicture(t *testing.T, svg []byte, c plot.Chart) {
	t.Helper()
	p := parse(t, svg)
	want := 0
	for _, trace := range traces(c) {
		for i := range trace.Points {
			if len(trace.Points[i].Hits) > 0 {
				want++
			}
		}
	}
	if len(p.hits) != want {
		t.Errorf("got %d points with hits, want %d", len(p.hits), want)
	}
	if p.attrs["role"] != "img" || p.elements["desc"] != 1 || p.elements["title"] != 1+want || p.elements["svg"] != 1 {
		t.Errorf("got role %q, %d desc, %d title; want img, 1, %d", p.attrs["role"], p.elements["desc"], p.elements["title"], 1+want)
	}
	for i, a := range p.texts {
		for _, b := range p.texts[:i] {
			if a.x == b.x && math.Abs(a.y-b.y) < 10 && a.x > 600 && a.x == b.x {
				t.Errorf("line labels %q and %q overlap", a.text, b.text)
			}
		}
	}
}

func has(p picture, text string) bool {
	for _, at := range p.texts {
		if at.text == text {
			return true
		}
	}
	return false
}

func TestEveryHitIsTold(t *testing.T) {
	p := parse(t, mustWrite(t, eventful()))
	all := strings.Join(p.hits, "\n")
	for _, want := range []string{
		"point 18 (2026-03-19), 10.93: STOP nelson-1984/1, upper side; ACT nelson-1984/5, upper side",
		"point 34 (2026-04-04), 9.12: STOP nelson-1984/1, lower side",
		"point 71 (2026-05-11), 10.55: LOOK nelson-1984/8, no side",
	} {
		if !strings.Contains(all, want) {
			t.Errorf("no tooltip %q in\n%s", want, all)
		}
	}
	for _, want := range []string{"STOP", "ACT", "LOOK", "not judged", "repeat", "no result", "left out of the estimate", "less-than result",
		"greater-than result", "new segment", "1,5", "upper action 10.700 (method)", "lower warning 9.750", "centre 10.150"} {
		if !has(p, want) {
			t.Errorf("no text %q in the picture", want)
		}
	}
}

func TestAHundredThousandPointsKeepHitsAndExtremesInAModestFile(t *testing.T) {
	c := individuals(100_000, 10, 0.25, 3, 5)
	for i := range c.Location.Points {
		c.Location.Points[i].Hits = nil
		c.Dispersion.Points[i].Hits = nil
	}
	c.Location.Points[77_777].Statistic = 14
	c.Location.Points[33_333].Statistic = 6
	c.Location.Points[50_000].Hits = []plot.Hit{{Rule: "a", Consequence: plot.Look}}
	svg := mustWrite(t, c)
	p := parse(t, svg)
	if len(p.hits) != 1 || len(svg) > 400_000 {
		t.Errorf("got %d hits in %d bytes, want 1 in at most 400000", len(p.hits), len(svg))
	}
	// Two extremes a trace, the key's dot, and nothing for 199,000 others.
	if got := p.elements["circle"]; got != 5 {
		t.Errorf("got %d dots, want 5", got)
	}
}

func TestHostileTextStaysText(t *testing.T) {
	evil := "</text><script>alert(1)</script>\"'&<!--]]>\x00\x1b\xff\u202e\nx"
	c := individuals(3, 10, 1, 2, 1)
	c.Title, c.Subtitle, c.Unit, c.Notes = evil, evil, evil, []string{evil}
	c.Location.Name, c.Dispersion.Name = evil, evil
	c.Location.Points[1].Label = evil
	c.Location.Points[1].Hits = []plot.Hit{{Rule: evil, Consequence: plot.Stop}}
	svg := mustWrite(t, c)
	checkPicture(t, svg, c)
	p := parse(t, svg)
	if p.elements["script"] != 0 || bytes.IndexByte(svg, 0) >= 0 || bytes.IndexByte(svg, 0x1b) >= 0 || !utf8.Valid(svg) || bytes.Contains(svg, []byte("\u202e")) {
		t.Error("text became markup or control characters passed")
	}
	if len(p.hits) != 1 || !strings.Contains(p.hits[0], "</text><script>alert(1)</script>\"'&<!--]]>") {
		t.Errorf("got tooltips %q, want the text as it was", p.hits)
	}
}

func TestExtremeMagnitudesStayOnThePage(t *testing.T) {
	tests := map[string][]float64{
		"largest":            {math.MaxFloat64, -math.MaxFloat64, 0},
		"smallest":           {math.SmallestNonzeroFloat64, 0},
		"smallest alone":     {math.SmallestNonzeroFloat64},
		"both":               {math.MaxFloat64, math.SmallestNonzeroFloat64},
		"zero":               {0, 0, 0},
		"equal":              {1e300, 1e300},
		"last place":         {1, math.Nextafter(1, 2)},
		"negative":           {-5, -5.1},
		"just below a power": {9.9999999e8, 1e9, 999.9999},
	}
	for name, vs := range tests {
		t.Run(name, func(t *testing.T) {
			c := plot.Chart{Location: &plot.Trace{Name: "v", Decimals: 2}}
			for _, v := range vs {
				c.Location.Points = append(c.Location.Points, plot.Point{Statistic: v, Lines: five(v, 0)})
			}
			svg := mustWrite(t, c)
			checkPicture(t, svg, c)
			for _, at := range parse(t, svg).texts {
				if strings.Contains(at.text, "NaN") || regexp.MustCompile(`[0-9.]{16}`).MatchString(at.text) || strings.Contains(at.text, "Inf") || len([]rune(at.text)) > 90 {
					t.Errorf("got text %q", at.text)
				}
			}
		})
	}
}

func TestChartsThatCannotBeDrawnAreRefused(t *testing.T) {
	one := func(p plot.Point) plot.Chart {
		return plot.Chart{Location: &plot.Trace{Points: []plot.Point{{}, p}}}
	}
	tests := []struct {
		name string
		c    plot.Chart
		want string
	}{
		{"no trace", plot.Chart{}, "plot: the chart has no trace"},
		{"traces of two lengths", plot.Chart{Location: &plot.Trace{Points: make([]plot.Point, 2)}, Dispersion: &plot.Trace{}},
			"plot: the location trace has 2 points and the dispersion trace 0; they must match"},
		{"NaN", one(plot.Point{Statistic: math.NaN()}), "plot: location point 2: statistic NaN is not finite; a point without a statistic is Missing"},
		{"infinite line", one(plot.Point{Lines: &plot.Lines{UpperAction: at(math.Inf(1))}}), "plot: location point 2: upper action line +Inf is not finite"},
		{"hit without a statistic", one(plot.Point{Missing: true, Hits: []plot.Hit{{Rule: "a", Consequence: plot.Act}}}), "plot: location point 2: has a hit and no statistic"},
		{"hit without a consequence", one(plot.Point{Hits: []plot.Hit{{Rule: "a"}}}), `plot: location point 2: rule "a": consequence 0 is not LOOK, ACT or STOP`},
		{"decimals", plot.Chart{Dispersion: &plot.Trace{Decimals: 16}}, "plot: the dispersion trace has 16 decimals, the limits are 0 and 15"},
		{"too many points", plot.Chart{Location: &plot.Trace{Points: make([]plot.Point, plot.PointsMax+1)}}, "plot: the location trace has 1000001 points, the limit is 1000000"},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			var b bytes.Buffer
			err := plot.Write(&b, test.c)
			if err == nil || err.Error() != test.want || b.Len() > 0 {
				t.Errorf("got %v and %d bytes, want %s and none", err, b.Len(), test.want)
			}
		})
	}
}

func TestAMissingPointMayHoldAnyStatistic(t *testing.T) {
	c := plot.Chart{Location: &plot.Trace{Points: []plot.Point{{Statistic: 1}, {Statistic: math.NaN(), Missing: true}}}}
	checkPicture(t, mustWrite(t, c), c)
}

func TestAnAbsentLineIsNotDrawn(t *testing.T) {
	c := individuals(3, 10, 1, 2, 1)
	c.Location.Points[2].Lines = &plot.Lines{Centre: at(10), LowerAction: &plot.Line{Value: math.NaN(), Basis: chart.Absent}}
	p := parse(t, mustWrite(t, c))
	if !has(p, "centre 10.00") || has(p, "lower action 7.00") {
		t.Error("want the centre line's label alone")
	}
}

func TestAFailingWriterIsReported(t *testing.T) {
	r, w := io.Pipe()
	r.Close()
	if err := plot.Write(w, individuals(2, 1, 1, 1, 1)); !errors.Is(err, io.ErrClosedPipe) {
		t.Errorf("got %v, want the writer's error", err)
	}
}
