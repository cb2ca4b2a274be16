package block

import (
	"fmt"
	"strings"
)

// ParseDelimiter reads the name of a separator: tab, comma, semicolon, or none for one column. An empty name asks for detection.
func ParseDelimiter(name string) (byte, error) {
	if name == "" {
		return 0, nil
	}
	for d, n := range delimiterNames {
		if n == name {
			return d, nil
		}
	}
	return 0, fmt.Errorf("delimiter=%s: want tab, comma, semicolon or none", clip(name))
}

// ParseDecimal reads the name of a decimal: point or comma. An empty name asks for detection.
func ParseDecimal(name string) (byte, error) {
	switch name {
	case "":
		return 0, nil
	case "point":
		return '.', nil
	case "comma":
		return ',', nil
	}
	return 0, fmt.Errorf("decimal=%s: want point or comma", clip(name))
}

// detect finds the separator.
func detect(s string, o Options) (byte, error) {
	var fitting, present []byte
	for _, d := range []byte{Tab, Semicolon, Comma} {
		if d == Comma && o.Decimal == ',' && maybeDecimals(s, o) {
			continue // a column of numbers with decimal commas
		}
		records, err := cut(s, d)
		if first := firstRecord(s, d); len(first) < 2 {
			continue // under the wrong separator, quotes stand in the wrong places
		}
		present = append(present, d)
		if err == nil && even(records) {
			fitting = append(fitting, d)
		}
	}
	switch {
	case len(present) == 0:
		return None, nil
	case len(present) == 1 && present[0] == Comma && o.Decimal == 0 && maybeDecimals(s, o):
		return 0, &Error{Problem: "the commas may separate two columns or be decimals", Advice: "say delimiter=comma, or decimal=comma"}
	case len(present) == 1:
		return present[0], nil
	case len(fitting) == 1:
		return fitting[0], nil
	}
	names := make([]string, len(present))
	for i, d := range present {
		names[i] = delimiterNames[d]
	}
	return 0, &Error{Row: 1, Problem: "the first row holds more than one of the separators: " + strings.Join(names, ", "),
		Advice: "say delimiter=" + strings.Join(names, " or delimiter=")}
}

func firstRecord(s string, d byte) []string {
	c := cutter{rest: s, delimiter: d}
	cells, err := c.record(1)
	if err != nil {
		return nil
	}
	return cells
}

func even(records [][]string) bool {
	for _, r := range records {
		if len(r) != len(records[0]) && !(Row{Cells: r}).Blank() {
			return false
		}
	}
	return true
}

// maybeDecimals reports a block whose lines of data could all be numbers with decimal commas.
func maybeDecimals(s string, o Options) bool {
	if !o.NoHeader {
		_, s, _ = strings.Cut(s, "\n")
	}
	some := false
	for line := range strings.SplitSeq(s, "\n") {
		if line = strings.TrimSpace(line); line == "" {
			continue
		}
		if some = true; !looksNumeric(line) {
			return false
		}
	}
	return some
}
