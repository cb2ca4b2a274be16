package block

import (
	"fmt"
	"strings"
)

// cut takes a text apart into records of cells, quotes and guards taken off. Blank lines at the end are dropped; those
// elsewhere are records of one empty cell, so that rows keep their numbers.
func cut(s string, delimiter byte) ([][]string, error) {
	c := cutter{rest: s, delimiter: delimiter}
	var records [][]string
	for !c.done {
		cells, err := c.record(len(records) + 1)
		if err != nil {
			return nil, err
		}
		records = append(records, cells)
		if len(records) > RowsMax+1 && strings.TrimSpace(c.rest) != "" {
			return nil, &Error{Problem: fmt.Sprintf("more than %d rows, which is the limit", RowsMax), Advice: "send the block in parts"}
		}
	}
	for len(records) > 1 && len(records[len(records)-1]) == 1 && strings.TrimSpace(records[len(records)-1][0]) == "" {
		records = records[:len(records)-1]
	}
	return records, nil
}

type cutter struct {
	rest      string
	delimiter byte
	done      bool
}

func (c *cutter) record(row int) (cells []string, err error) {
	for {
		cell, last, err := c.cell(row, len(cells)+1)
		if err != nil {
			return nil, err
		}
		if len(cell) > CellBytesMax {
			return nil, &Error{Row: row, Problem: fmt.Sprintf("cell %d has %d bytes, the limit is %d", len(cells)+1, len(cell), CellBytesMax)}
		}
		if cells = append(cells, cell); last {
			return cells, nil
		}
		if len(cells) >= ColumnsMax {
			return nil, &Error{Row: row, Problem: fmt.Sprintf("more than %d cells, which is the limit", ColumnsMax)}
		}
	}
}

// cell takes one cell off the text; last says that it ends its record.
func (c *cutter) cell(row, number int) (cell string, last bool, err error) {
	if strings.HasPrefix(c.rest, `"`) {
		cell, c.rest, err = unquote(c.rest, row, number)
		if err != nil {
			return "", false, err
		}
		if last, ok := c.end(); ok {
			return Unguard(cell), last, nil
		}
		return "", false, &Error{Row: row, Problem: fmt.Sprintf("cell %d goes on after its closing quote", number), Advice: "double each quote inside a quoted cell"}
	}
	at := strings.IndexAny(c.rest, string([]byte{c.delimiter, '\n'}))
	if at < 0 {
		at = len(c.rest)
	}
	cell, c.rest = c.rest[:at], c.rest[at:]
	if (c.rest == "" || c.rest[0] == '\n') && strings.HasSuffix(cell, "\r") {
		cell = cell[:len(cell)-1]
	}
	if strings.ContainsRune(cell, '\r') {
		return "", false, &Error{Row: row, Problem: fmt.Sprintf("cell %d holds a carriage return outside quotes", number), Advice: "end lines with LF or CRLF"}
	}
	last, _ = c.end()
	return Unguard(cell), last, nil
}

// end takes a separator or a line end off the text; ok is false where there is neither.
func (c *cutter) end() (last, ok bool) {
	switch {
	case c.rest == "", c.rest == "\r":
		c.rest, c.done = "", true
		return true, true
	case strings.HasPrefix(c.rest, "\r\n"):
		c.rest = c.rest[2:]
	case c.rest[0] == '\n':
		c.rest = c.rest[1:]
	case c.rest[0] == c.delimiter:
		c.rest = c.rest[1:]
		return false, true
	default:
		return false, false
	}
	c.done = c.rest == ""
	return true, true
}

// unquote takes a quoted cell off the text.
func unquote(s string, row, number int) (cell, rest string, err error) {
	var b strings.Builder
	for s = s[1:]; ; {
		at := strings.IndexByte(s, '"')
		if at < 0 {
			return "", "", &Error{Row: row, Problem: fmt.Sprintf("the quote that opens cell %d is never closed", number), Advice: "close it, or double a quote that is text"}
		}
		b.WriteString(s[:at])
		if s = s[at+1:]; !strings.HasPrefix(s, `"`) {
			return b.String(), s, nil
		}
		b.WriteByte('"')
		s = s[1:]
	}
}
