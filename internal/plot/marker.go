package plot

import (
	"fmt"

	"limitary/internal/decimal"
)

// mark is the kind of marker a point gets.
type mark uint8

const (
	markPlain mark = iota
	markLook
	markAct
	markStop
	markNotJudged
	markRepeat
	markMissing
	marks
)

var markNames = [marks]string{"point", "LOOK", "ACT", "STOP", "not judged", "repeat", "no result"}

// markOf gives the marker of a point: its worst hit before anything else.
func markOf(p *Point) mark {
	switch c := p.worst(); {
	case c > 0:
		return mark(c)
	case p.Missing:
		return markMissing
	case p.NotJudged:
		return markNotJudged
	case p.Repeat:
		return markRepeat
	}
	return markPlain
}

// marker draws a marker's shape around x, y, in the given part of its full size.
func (c *canvas) marker(m mark, x, y, size float64) {
	at := func(dx, dy float64) string { return num(x+size*dx) + " " + num(y+size*dy) }
	square := func(half float64) string {
		return fmt.Sprintf(`x="%s" y="%s" width="%s" height="%s"`, num(x-size*half), num(y-size*half), num(2*size*half), num(2*size*half))
	}
	circle := func(r float64) string { return fmt.Sprintf(`cx="%s" cy="%s" r="%s"`, num(x), num(y), num(size*r)) }
	switch m {
	case markPlain:
		fmt.Fprintf(c, `<circle %s fill="%s"/>`, circle(2.2), inkColour)
	case markLook:
		fmt.Fprintf(c, `<path d="M%sL%sL%sZ" fill="#ffffff" stroke="%s" stroke-width="%s"/>`, at(0, -6), at(5.6, 4), at(-5.6, 4), lookColour, num(1.6*size))
	case markAct:
		fmt.Fprintf(c, `<path d="M%sL%sL%sL%sZ" fill="%s" stroke="#ffffff" stroke-width="%s"/>`, at(0, -7), at(7, 0), at(0, 7), at(-7, 0), actColour, num(0.8*size))
	case markStop:
		fmt.Fprintf(c, `<rect %s fill="%s"/>`, square(6), stopColour)
		fmt.Fprintf(c, `<path d="M%sL%sM%sL%s" stroke="#ffffff" stroke-width="%s"/>`, at(-3.6, -3.6), at(3.6, 3.6), at(-3.6, 3.6), at(3.6, -3.6), num(1.8*size))
	case markNotJudged:
		fmt.Fprintf(c, `<circle %s fill="#ffffff" stroke="%s" stroke-width="1.2"/>`, circle(3.4), quietColour)
	case markRepeat:
		fmt.Fprintf(c, `<rect %s fill="#ffffff" stroke="%s" stroke-width="1.2"/>`, square(3), inkColour)
	case markMissing:
		fmt.Fprintf(c, `<path d="M%sL%sM%sL%s" stroke="%s" stroke-width="1.1"/>`, at(-2.5, -2.5), at(2.5, 2.5), at(-2.5, 2.5), at(2.5, -2.5), quietColour)
	}
}

// ring marks a point left out of the estimate.
func (c *canvas) ring(x, y float64) {
	fmt.Fprintf(c, `<circle cx="%s" cy="%s" r="10" fill="none" stroke="%s" stroke-width="1.1" stroke-dasharray="2.5 2"/>`, num(x), num(y), inkColour)
}

// arrow marks a bound: down for a less-than result, up for a greater-than result.
func (c *canvas) arrow(b decimal.Bound, x, y float64) {
	d := 1.0
	if b == decimal.Above {
		d = -1
	}
	fmt.Fprintf(c, `<path d="M%s %sV%sm-3.2 %sl3.2 %sl3.2 %s" fill="none" stroke="%s" stroke-width="1.3"/>`,
		num(x), num(y+5*d), num(y+15*d), num(-4*d), num(4*d), num(-4*d), inkColour)
}
