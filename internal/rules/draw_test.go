package rules_test

import (
	"fmt"
	"math"
	"math/big"
	"strconv"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/rules"
)

// dice gives a number from 0 to n-1: from a seeded generator in the property test, from the input in the fuzz test.
type dice func(n int) int

func (d dice) oneIn(n int) bool { return d(n) == 0 }

func pick[T any](d dice, from ...T) T { return from[d(len(from))] }

// testCase is a trace, rules and a series for them. Its values are drawn from the lines of its own rules and their
// neighbours, so that ties are the rule and not the exception.
type testCase struct {
	trace     chart.Trace
	places    int
	specs     []rules.Spec
	headStart bool
	// unequal is set where points have scales of their own.
	unequal bool
	series  []observation
}

func (c *testCase) String() string {
	return fmt.Sprintf("places %d, head start %t, unequal %t\ntrace %s\nrules %+v", c.places, c.headStart, c.unequal, traceText(c.trace), c.specs)
}

func traceText(t chart.Trace) string {
	number := func(p *float64) any {
		if p == nil {
			return "none"
		}
		return *p
	}
	return fmt.Sprintf("centre %v sigma %v action %+v %+v warning %+v %+v", number(t.Centre), number(t.Sigma), t.LowerAction, t.UpperAction, t.LowerWarning, t.UpperWarning)
}

// number gives digits·10^exponent, through text, as values are posted.
func number(digits, exponent int) float64 {
	x, err := strconv.ParseFloat(fmt.Sprintf("%de%d", digits, exponent), 64)
	if err != nil {
		panic(err)
	}
	return x
}

// painter draws the values of one case.
type painter struct {
	dice
	*testCase
	scales []rules.Scale
	lines  map[lineKey]float64
	// hundredths are the multiples of sigma where lines lie, in hundredths.
	hundredths []int
}

func drawCase(d dice) *testCase {
	p := &painter{dice: d, testCase: &testCase{}, lines: map[lineKey]float64{}}
	exponent := pick(d, 0, 0, 0, 0, 0, -2, 3, 10, -290, 290)
	p.places = d(6) - 1
	if exponent != 0 && d.oneIn(2) {
		p.places = decimal.Unrounded
	}
	centre, sigma := number(d(41)-20, exponent+pick(d, 0, 0, 0, 3)), number(1+d(12), exponent)
	if centre == 0 && d.oneIn(2) {
		centre = math.Copysign(0, -1)
	}
	p.trace.Centre, p.trace.Sigma = &centre, &sigma
	p.scales = []rules.Scale{{Centre: centre, Sigma: sigma}}
	if d.oneIn(3) {
		p.unequal = true
		p.scales = append(p.scales, rules.Scale{Centre: centre, Sigma: number(1+d(12), exponent)},
			rules.Scale{Centre: number(d(41)-20, exponent), Sigma: pick(d, sigma, number(1+d(30), exponent-1))})
	}
	bare := !p.unequal && d.oneIn(12) // fixed lines only
	for i := range 1 + d(8) {
		p.specs = append(p.specs, p.spec(i, bare))
	}
	for _, l := range []*chart.Line{&p.trace.LowerAction, &p.trace.UpperAction, &p.trace.LowerWarning, &p.trace.UpperWarning} {
		*l = p.fixedLine()
	}
	if bare {
		p.trace.Centre, p.trace.Sigma = nil, nil
		p.scales[0] = rules.Scale{}
	}
	p.headStart = d.oneIn(3)
	p.paint(rules.Scale{Centre: centre, Sigma: sigma}, bare)
	return p.testCase
}

// window draws the length of a window: mostly short, up to the longest.
func (p *painter) window(least int) int {
	if p.oneIn(4) {
		return least + p.dice(rules.WindowPointsMax-least+1)
	}
	return least + p.dice(8)
}

func (p *painter) spec(i int, bare bool) rules.Spec {
	s := rules.Spec{ID: fmt.Sprintf("r%d", i), Consequence: rules.Consequence(1 + p.dice(3)), Sides: rules.Sides(p.dice(3))}
	s.Kind = rules.Kind(1 + p.dice(10))
	if bare {
		s.Kind = pick(p.dice, rules.BeyondLine, rules.Trend, rules.Alternating)
	}
	z := pick(p.dice, 100, 200, 300, 0, 50, 150, 10, 30, 309)
	switch s.Kind {
	case rules.Beyond:
		s.M = pick(p.dice, 1, p.window(1))
		s.K = pick(p.dice, 1, s.M, 1+p.dice(s.M))
		s.Z = p.multiple(z)
	case rules.BeyondLine:
		s.Line = pick(p.dice, rules.ActionLine, rules.WarningLine)
	case rules.SameSide, rules.Trend:
		s.N = p.window(2)
	case rules.Alternating:
		s.N, s.Sides = p.window(3), rules.BothSides
	case rules.Within:
		s.N, s.Z, s.Sides = p.window(2), p.multiple(max(z, 10)), rules.BothSides
	case rules.Outside:
		s.N, s.Z, s.OneSideOK, s.Sides = p.window(2), p.multiple(z), p.oneIn(2), rules.BothSides
	case rules.Span:
		s.Z = p.multiple(2 * max(z, 10))
		p.hundredths = append(p.hundredths, z)
	case rules.EWMA:
		s.Lambda, s.Limit, s.Asymptotic = pick(p.dice, 0.2, 0.05, 0.25, 0.3, 0.5, 1), pick(p.dice, 3, 0.5, 1, 2, 2.7), p.oneIn(2)
	case rules.CUSUM:
		s.Reference, s.Interval = pick(p.dice, 0.5, 0, 0.25, 1), pick(p.dice, 4, 5, 0.5, 1, 2)
		s.HeadStart = s.Interval * pick(p.dice, 0.5, 0, 1)
	}
	return s
}

func (p *painter) multiple(hundredths int) float64 {
	p.hundredths = append(p.hundredths, hundredths)
	return number(hundredths, -2)
}

// fixedLine draws the basis of a line, and where it is fixed a value on or beside some line of the rules.
func (p *painter) fixedLine() chart.Line {
	switch p.dice(4) {
	case 0:
		return chart.Line{Basis: chart.Absent, Value: math.NaN()}
	case 1:
		value := p.at(p.scales[0], p.dice(701)-350)
		if p.oneIn(3) { // with a decimal more than is published
			value = publish(new(big.Rat).Mul(onPaper(value), big.NewRat(10005, 10000)), decimal.Unrounded)
		}
		return chart.Line{Basis: pick(p.dice, chart.MethodCriterion, chart.Target, chart.TailProbability), Value: value}
	}
	return chart.Line{Basis: chart.SigmaMultiple, Value: math.NaN()} // the value must not be read
}

// at gives the published value so many hundredths of sigma from the centre.
func (p *painter) at(scale rules.Scale, hundredths int) float64 {
	key := lineKey{scale, float64(hundredths)}
	v, known := p.lines[key]
	if !known {
		r := new(big.Rat).Mul(big.NewRat(int64(hundredths), 100), onPaper(scale.Sigma))
		v = publish(r.Add(r, onPaper(scale.Centre)), p.places)
		p.lines[key] = v
	}
	return v
}

// paint draws the series: stretches of one manner after the other, since long windows complete in no other way.
func (p *painter) paint(fallback rules.Scale, bare bool) {
	length := 10 + p.dice(90)
	if p.oneIn(3) {
		length += p.dice(150)
	}
	withBounds := p.oneIn(3)
	manner, left, level := 0, 0, 0
	scale := p.scales[0]
	for i := range length {
		if left == 0 {
			manner, left, level = p.dice(9), 1+pick(p.dice, p.dice(6), p.dice(20), p.dice(90)), p.dice(301)-150
		}
		left--
		if p.unequal && p.oneIn(3) {
			scale = pick(p.dice, p.scales...)
		}
		where := scale
		if bare {
			where = fallback
		}
		o := observation{at: scale, x: p.nudge(p.at(where, p.step(manner, i, &level)))}
		if withBounds && p.oneIn(8) {
			o.bound = decimal.Bound(1 + p.dice(2))
		}
		if p.oneIn(60) {
			o.restart, o.headStart = true, p.oneIn(3)
		}
		p.series = append(p.series, o)
	}
}

// step gives the next value of a manner, in hundredths of sigma.
func (p *painter) step(manner, i int, level *int) int {
	line := 0
	if len(p.hundredths) > 0 {
		line = pick(p.dice, p.hundredths...)
	}
	outwards := line + pick(p.dice, 0, 1, 10, 100)*boolInt(!p.oneIn(8))
	switch manner {
	case 0: // one side
		return outwards
	case 1: // the other
		return -outwards
	case 2: // both sides by turns
		return outwards * (1 - 2*(i%2))
	case 3: // both sides by chance
		return outwards * pick(p.dice, 1, -1)
	case 4: // near the centre
		return p.dice(9) - 4
	case 5: // rising, now and then equal
		*level += pick(p.dice, 1, 2, 5) * boolInt(!p.oneIn(40))
		return *level
	case 6: // falling
		*level -= pick(p.dice, 1, 2, 5) * boolInt(!p.oneIn(40))
		return *level
	case 7: // on the lines and beside them
		return pick(p.dice, 1, -1)*line + pick(p.dice, 0, 0, 1, -1)
	}
	return p.dice(801) - 400
}

func boolInt(b bool) int {
	if b {
		return 1
	}
	return 0
}

// nudge moves a value to its neighbour now and then, and gives zero a sign where nothing is rounded.
func (p *painter) nudge(x float64) float64 {
	if p.places == decimal.Unrounded {
		switch {
		case p.oneIn(12):
			return math.Nextafter(x, math.Inf(1-2*p.dice(2)))
		case x == 0 && p.oneIn(2):
			return math.Copysign(0, -1)
		}
		return x
	}
	if p.oneIn(12) {
		unit := big.NewRat(int64(1-2*p.dice(2)), 1)
		for range p.places {
			unit.Quo(unit, big.NewRat(10, 1))
		}
		return publish(unit.Add(unit, onPaper(x)), p.places)
	}
	return x
}
