package block

import (
	"fmt"
	"regexp"
	"strings"
)

var (
	// numeric is a number in either dialect.
	numeric = regexp.MustCompile(`^[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)(?:[eE][+-]?[0-9]+)?$`)
	// grouped is a number that may have a thousands separator: the part before it is no lone zero.
	grouped = regexp.MustCompile(`^[+-]?[1-9][0-9]{0,2}([.,])[0-9]{3}$`)
)

// looksNumeric reports a number in either dialect, or a bound on one.
func looksNumeric(s string) bool {
	return numeric.MatchString(strings.TrimSpace(strings.TrimLeft(strings.TrimSpace(s), "<>")))
}

// Cell is the place of a cell in a block.
type Cell struct {
	Row    int
	Column string
	Text   string
	// Count marks a number of pieces, which has no decimal: a mark before three digits in it is likely to group them.
	Count bool
}

// SettleDecimal finds the decimal of a block from all cells that are to be numbers, where the caller has not said it. A
// cell that cannot be read either way is left to Number, and no text beside a number settles anything. A count with three
// digits after its one mark is refused, whatever the other numbers have.
func (d *Dialect) SettleDecimal(cells []Cell) error {
	if d.Decimal != 0 {
		return nil
	}
	var found, doubtful [2]*Cell // of points, of commas
	for i := range cells {
		c := &cells[i]
		at, mark := decimalMark(c.Text)
		if mark == 0 {
			continue
		}
		if c.Count && isGrouped(c.Text) {
			return doubt(c, "a count has no decimal; write it without its mark, or say decimal=point or decimal=comma")
		}
		if d.doubtful(c.Text, mark) {
			if doubtful[at] == nil {
				doubtful[at] = c
			}
			continue
		}
		if found[at] == nil {
			found[at] = c
		}
	}
	return d.settle(found, doubtful)
}

func decimalMark(text string) (at int, mark byte) {
	if !looksNumeric(text) {
		return 0, 0
	}
	point, comma := strings.Count(text, "."), strings.Count(text, ",")
	switch {
	case point == 1 && comma == 0:
		return 0, '.'
	case comma == 1 && point == 0:
		return 1, ','
	}
	return 0, 0
}

// doubtful reports a number whose mark may separate thousands. Where commas separate cells, a point is the decimal.
func (d *Dialect) doubtful(text string, mark byte) bool {
	return (mark == ',' || d.Delimiter != Comma) && isGrouped(text)
}

func isGrouped(text string) bool {
	return grouped.MatchString(strings.TrimSpace(strings.TrimLeft(strings.TrimSpace(text), "<>")))
}

func (d *Dialect) settle(found, doubtful [2]*Cell) error {
	switch {
	case found[0] != nil && found[1] != nil:
		return &Error{Row: found[1].Row, Column: found[1].Column,
			Problem: fmt.Sprintf("%q has a decimal comma, but %q in row %d has a decimal point", clip(found[1].Text), clip(found[0].Text), found[0].Row),
			Advice:  "write all numbers with the same decimal"}
	case found[0] != nil && doubtful[1] != nil:
		return doubt(doubtful[1], "other numbers of the block have a decimal point, so that its comma would separate thousands, which are not read; write it without")
	case found[1] != nil && doubtful[0] != nil:
		return doubt(doubtful[0], "other numbers of the block have a decimal comma, so that its point would separate thousands, which are not read; write it without")
	case found[0] != nil:
		d.Decimal = '.'
	case found[1] != nil:
		d.Decimal = ','
	case doubtful[1] != nil:
		return doubt(doubtful[1], "say decimal=comma or decimal=point")
	case doubtful[0] != nil:
		return doubt(doubtful[0], "say decimal=point or decimal=comma")
	}
	return nil
}

func doubt(c *Cell, advice string) error {
	digits := strings.NewReplacer(".", "", ",", "").Replace(c.Text)
	return &Error{Row: c.Row, Column: c.Column, Problem: fmt.Sprintf("%q may be %s or %s", clip(c.Text), strings.Replace(clip(c.Text), ",", ".", 1), clip(digits)), Advice: advice}
}

// Number gives a number of the block as decimal text with a point, otherwise as written. An empty text stays empty. It
// does not check what the text means beyond its decimal.
func (d Dialect) Number(text string) (string, error) {
	s := strings.Trim(text, " \u00a0\u202f")
	point, comma := strings.Count(s, "."), strings.Count(s, ",")
	switch {
	case point+comma == 0:
		return s, nil
	case point+comma > 1:
		return "", fmt.Errorf("%q has %d decimals or thousands separators; write it with one decimal and no thousands separator", clip(text), point+comma)
	case comma == 1 && d.Decimal == '.':
		return "", fmt.Errorf("%q has a comma, but the decimal is a point; say decimal=comma, or write it without a thousands separator", clip(text))
	case point == 1 && d.Decimal == ',':
		return "", fmt.Errorf("%q has a point, but the decimal is a comma; say decimal=point, or write it without a thousands separator", clip(text))
	case comma == 1:
		return strings.Replace(s, ",", ".", 1), nil
	}
	return s, nil
}
