package book

import (
	"fmt"
	"regexp"
	"strconv"

	"limitary/internal/sheet/block"
)

// decimalForm is a number as the format writes it; strconv reads more than that.
var decimalForm = regexp.MustCompile(`^[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[Ee][+-]?[0-9]+)?$`)

// mark gives the mark of a cell, and drops those before it.
func (r *reader) mark(row, column int) *mark {
	for len(r.marks) > 0 {
		m := &r.marks[0]
		if int(m.row) == row && int(m.column) == column {
			return m
		}
		if int(m.row) > row || int(m.row) == row && int(m.column) > column {
			return nil
		}
		r.marks = r.marks[1:]
	}
	return nil
}

// text gives what a cell holds as text.
func (r *reader) text(cell, raw string, m *mark, use Use) (string, error) {
	if m == nil {
		return "", fmt.Errorf("cell %s is not where it should be; save the workbook as .xlsx again", cell)
	}
	switch m.kind {
	case truthCell:
		return truth(cell, raw)
	case errorCell:
		if use != Other {
			return "", fmt.Errorf("cell %s holds the error %s; correct its formula or delete the row", cell, clip(raw))
		}
		return raw, nil
	case numberCell, dateCell:
		return r.number(cell, raw, m, use)
	}
	return block.Unguard(raw), nil
}

// number gives what a cell of numbers holds. A date may be a text, too.
func (r *reader) number(cell, raw string, m *mark, use Use) (string, error) {
	x, err := strconv.ParseFloat(raw, 64)
	if err == nil && decimalForm.MatchString(raw) {
		return r.shown(cell, raw, x, int(m.style), use)
	}
	if m.kind == dateCell {
		return block.Unguard(raw), nil
	}
	return "", fmt.Errorf("cell %s is a number and holds %q, which is none within the range of numbers; enter it again", cell, clip(raw))
}

// truth gives a cell of truth as it is shown.
func truth(cell, raw string) (string, error) {
	switch raw {
	case "1", "TRUE", "true":
		return "TRUE", nil
	case "0", "FALSE", "false":
		return "FALSE", nil
	}
	return "", fmt.Errorf("cell %s is TRUE or FALSE and holds %q; enter it again", cell, clip(raw))
}
