// Package plot draws a control chart as SVG.
//
// The picture is about 1000 pixels wide: title, the location trace, below it the dispersion trace on the same points,
// then the key, the rules that completed, and notes. Everything is told by shape and text as well as by colour, so that a
// black and white print loses nothing:
//
//	unremarkable point   small dot
//	LOOK                 hollow triangle
//	ACT                  solid diamond
//	STOP                 solid square with a white cross
//	not judged           hollow circle         no result   small cross at the foot of the panel
//	repeat               hollow square, off the connecting line
//	excluded             ring around the point
//	less or greater than arrow down or up from the point
//	centre line          dashes and dots       action line solid       warning line dashed
//	break                gap with a vertical dotted line
//
// A hit carries the last part of its rule's name ("5" for nelson-1984/5) where there is room, and the whole name, side
// and consequence in its tooltip. Beyond PointsDrawnMax points the connecting line keeps first, least, greatest and last of
// each half pixel and unremarkable points lose their dots, but for the least and the greatest; a hit is always drawn.
//
// The same chart gives the same bytes. No number that is not finite and no text that is markup reaches the output.
package plot

import (
	"bytes"
	"fmt"
	"io"
	"math"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

const (
	// PointsMax bounds the points of a trace.
	PointsMax = 1_000_000
	// PointsDrawnMax is the number of points up to which each has its dot.
	PointsDrawnMax = 600
)

// Consequence is what a completed rule asks for.
type Consequence uint8

// Consequences from the mildest to the worst.
const (
	Look Consequence = iota + 1
	Act
	Stop
)

// String is the consequence as the chart's key names it.
func (c Consequence) String() string {
	if c >= Look && c <= Stop {
		return [...]string{"LOOK", "ACT", "STOP"}[c-Look]
	}
	return fmt.Sprintf("consequence(%d)", uint8(c))
}

// Side is the side of the centre on which a rule completed.
type Side uint8

// Sides of the centre; None for a pattern with no side.
const (
	None Side = iota
	Upper
	Lower
)

func (s Side) String() string {
	return [...]string{"no side", "upper side", "lower side"}[min(s, Lower)]
}

// Hit is one rule completing at a point.
type Hit struct {
	Rule        string
	Consequence Consequence
	Side        Side
}

// Line is a centre, action or warning line at one point, in the chart's unit. A Basis other than SigmaMultiple is named
// beside the line's value; a line whose Basis is Absent is not drawn.
type Line struct {
	Value float64
	Basis chart.Basis
}

// Lines are those in force at a point; nil stands for none. Points may share one Lines.
type Lines struct {
	Centre                                               *Line
	LowerAction, LowerWarning, UpperWarning, UpperAction *Line
}

// Point is one result on a trace.
type Point struct {
	// Label stands below the axis: a time, a number, a name. Where it is empty the point's number stands there.
	Label string
	// Statistic is plotted, in the chart's unit; it is not looked at where Missing is set.
	Statistic float64
	// Missing says that there is no statistic.
	Missing bool
	// NotJudged says that no verdict was possible; such a point is drawn off the connecting line.
	NotJudged bool
	// Repeat says that the point repeats another and is drawn off the connecting line.
	Repeat bool
	// Excluded says that the point is left out of the estimate of the limits. It is judged all the same.
	Excluded bool
	// Bound says that the statistic is only a bound.
	Bound decimal.Bound
	// BreakBefore says that a segment begins here: neither the points nor the lines are connected across.
	BreakBefore bool
	Lines       *Lines
	Hits        []Hit
}

// Trace is one panel.
type Trace struct {
	// Name says what is plotted: "Single value", "Moving range".
	Name string
	// Decimals are those of the values of the lines.
	Decimals int
	Points   []Point
}

// Chart is the whole picture. One of the traces may be nil; where both are there, they have the same number of points.
type Chart struct {
	Title, Subtitle string
	Unit            string
	Location        *Trace
	Dispersion      *Trace
	// Notes stand at the foot: what the limits rest on, and what a chart does not say.
	Notes []string
}

// Write draws the chart. Where it gives an error about the chart nothing is written.
func Write(w io.Writer, c Chart) error {
	if err := c.check(); err != nil {
		return err
	}
	var out bytes.Buffer
	c.draw(&out)
	if _, err := w.Write(out.Bytes()); err != nil {
		return fmt.Errorf("plot: writing the chart: %w", err)
	}
	return nil
}

// check refuses what cannot be drawn.
func (c Chart) check() error {
	if c.Location == nil && c.Dispersion == nil {
		return fmt.Errorf("plot: the chart has no trace")
	}
	if c.Location != nil && c.Dispersion != nil && len(c.Location.Points) != len(c.Dispersion.Points) {
		return fmt.Errorf("plot: the location trace has %d points and the dispersion trace %d; they must match",
			len(c.Location.Points), len(c.Dispersion.Points))
	}
	for role, t := range c.traces() {
		if t == nil {
			continue
		}
		name := chart.Role(role).String()
		if len(t.Points) > PointsMax {
			return fmt.Errorf("plot: the %s trace has %d points, the limit is %d", name, len(t.Points), PointsMax)
		}
		if t.Decimals < 0 || t.Decimals > decimal.PlacesMax {
			return fmt.Errorf("plot: the %s trace has %d decimals, the limits are 0 and %d", name, t.Decimals, decimal.PlacesMax)
		}
		for i := range t.Points {
			if err := t.Points[i].check(); err != nil {
				return fmt.Errorf("plot: %s point %d: %w", name, i+1, err)
			}
		}
	}
	return nil
}

func (c Chart) traces() [chart.Roles]*Trace {
	return [chart.Roles]*Trace{chart.Location: c.Location, chart.Dispersion: c.Dispersion}
}

func (p *Point) check() error {
	if !p.Missing && !finite(p.Statistic) {
		return fmt.Errorf("statistic %v is not finite; a point without a statistic is Missing", p.Statistic)
	}
	if p.Missing && len(p.Hits) > 0 {
		return fmt.Errorf("has a hit and no statistic")
	}
	for _, h := range p.Hits {
		if h.Consequence < Look || h.Consequence > Stop {
			return fmt.Errorf("rule %q: consequence %d is not LOOK, ACT or STOP", h.Rule, h.Consequence)
		}
	}
	for k, l := range p.Lines.all() {
		if l != nil && !finite(l.Value) {
			return fmt.Errorf("%s line %v is not finite", lineKinds[k].name, l.Value)
		}
	}
	return nil
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// all gives the drawn lines in the order of lineKinds.
func (l *Lines) all() (lines [5]*Line) {
	if l == nil {
		return lines
	}
	lines = [5]*Line{l.UpperAction, l.UpperWarning, l.Centre, l.LowerWarning, l.LowerAction}
	for i, line := range lines {
		if line != nil && line.Basis == chart.Absent {
			lines[i] = nil
		}
	}
	return lines
}

// worst gives the worst consequence of a point's hits, or 0.
func (p *Point) worst() Consequence {
	var c Consequence
	for _, h := range p.Hits {
		c = max(c, h.Consequence)
	}
	return c
}

// onLine says whether the connecting line runs through the point.
func (p *Point) onLine() bool { return !p.Missing && !p.NotJudged && !p.Repeat }
