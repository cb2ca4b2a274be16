package resultfile

import (
	"fmt"
	"strings"
	"unicode/utf8"

	"limitary/internal/chart"
)

// columns are the places of the chosen columns in a record; -1 stands for none.
type columns struct {
	names                              []string
	values                             []int
	subgroup, id, time, mark, excluded int
	material, inspected                int
}

// label names column i in messages.
func (c *columns) label(i int) string {
	if i < len(c.names) && c.names[i] != "" {
		return c.names[i]
	}
	return fmt.Sprintf("column %d", i+1)
}

// choose finds the columns that o asks for.
func choose(o Options, line int, start opening) (*columns, error) {
	c := &columns{names: start.records[0]}
	if err := c.checkHeader(line); err != nil {
		return nil, err
	}
	for _, role := range []struct {
		at   *int
		name string
		flag string
	}{
		{&c.subgroup, o.Subgroup, "--subgroup"}, {&c.id, o.ID, "--id"}, {&c.time, o.Time, "--time"},
		{&c.mark, o.Break, "--break"}, {&c.excluded, o.Exclude, "--exclude"},
		{&c.material, o.Material, "--material"}, {&c.inspected, o.Inspected, "--inspected"},
	} {
		*role.at = -1
		if role.name == "" {
			continue
		}
		i, err := c.find(line, role.name, role.flag)
		if err != nil {
			return nil, err
		}
		*role.at = i
	}
	if err := c.chooseValues(o, line, start); err != nil {
		return nil, err
	}
	return c, c.checkRoles(o, line)
}

// checkHeader refuses a first line that is no header, and names that do not tell columns apart.
func (c *columns) checkHeader(line int) error {
	seen := make(map[string]int, len(c.names))
	for i, name := range c.names {
		if !utf8.ValidString(name) {
			return &Error{Line: line, Column: fmt.Sprintf("column %d", i+1), Value: clip([]byte(name)),
				Problem: "the column name is not UTF-8 text", Advice: adviceText}
		}
		if name == "" {
			continue
		}
		if numeric(name) {
			return &Error{Line: line, Value: clip([]byte(name)), Problem: "the first line must name the columns, and a number is no name",
				Advice: "put a header line before the results, or rename the column (x1 for 1)"}
		}
		if first, twice := seen[name]; twice {
			return &Error{Line: line, Column: name, Problem: fmt.Sprintf("columns %d and %d have the same name", first+1, i+1),
				Advice: "rename one of them"}
		}
		seen[name] = i
	}
	return nil
}

// find gives the place of a named column.
func (c *columns) find(line int, name, flag string) (int, error) {
	want := strings.TrimSpace(name)
	for i, n := range c.names {
		if n == want && n != "" {
			return i, nil
		}
	}
	advice := "choose one of them with " + flag
	if near := closest(want, c.names); near != "" {
		advice = fmt.Sprintf("did you mean %s %q?", flag, near)
	}
	return 0, &Error{Line: line, Column: name, Problem: "no column has this name; there are " + listed(c.names), Advice: advice}
}

// chooseValues finds the value columns: those named, or the only one that holds numbers.
func (c *columns) chooseValues(o Options, line int, start opening) error {
	for _, name := range o.Values {
		i, err := c.find(line, name, "--value")
		if err != nil {
			return err
		}
		c.values = append(c.values, i)
	}
	if len(c.values) > 0 {
		return nil
	}
	if len(c.names) == 1 {
		c.values = []int{0}
		return nil
	}
	var found []int
	var names []string
	for i := range c.names {
		if c.taken(i) || !mostlyNumeric(start.records[1:], i) {
			continue
		}
		found = append(found, i)
		names = append(names, c.label(i))
	}
	switch {
	case len(found) == 1:
		c.values = found
		return nil
	case start.stopped != nil:
		return start.stopped // rows beyond the fault could have told
	case len(found) == 0:
		return &Error{Line: line, Problem: "no column holds numbers; there are " + listed(c.names), Advice: "choose the value column with --value NAME"}
	}
	return &Error{Line: line, Problem: fmt.Sprintf("%d columns hold numbers: %s", len(found), listed(names)),
		Advice: "choose the value column with --value NAME, once for each where a row holds several readings"}
}

// taken reports whether column i has a role other than value.
func (c *columns) taken(i int) bool {
	return i == c.subgroup || i == c.id || i == c.time || i == c.mark || i == c.excluded || i == c.material || i == c.inspected
}

// checkRoles refuses a choice of columns that contradicts itself.
func (c *columns) checkRoles(o Options, line int) error {
	seen := make(map[int]bool, len(c.values))
	for _, i := range c.values {
		switch {
		case seen[i]:
			return &Error{Line: line, Column: c.label(i), Problem: "is chosen twice as a value column", Advice: "name each value column once"}
		case c.taken(i):
			return &Error{Line: line, Column: c.label(i), Problem: "is chosen as the value column and for something else", Advice: "choose another column for one of the two"}
		}
		seen[i] = true
	}
	if c.subgroup >= 0 && len(c.values) > 1 {
		return &Error{Line: line, Column: c.label(c.subgroup), Problem: fmt.Sprintf("a subgroup column groups rows of one reading, and %d value columns are chosen", len(c.values)),
			Advice: "choose one value column with --subgroup, or several without it"}
	}
	if len(c.values) > chart.SubgroupSizeMax {
		return &Error{Line: line, Problem: fmt.Sprintf("%d value columns are chosen, the limit is %d readings a result", len(c.values), chart.SubgroupSizeMax)}
	}
	if c.mark >= 0 && c.mark == c.excluded {
		return &Error{Line: line, Column: c.label(c.mark), Problem: "is chosen for breaks and for exclusions", Advice: "choose another column for one of the two"}
	}
	return c.checkInspected(line)
}

// checkInspected refuses a column of what was inspected beside anything but one count a row.
func (c *columns) checkInspected(line int) error {
	if c.inspected < 0 {
		return nil
	}
	bad := &Error{Line: line, Column: c.label(c.inspected)}
	switch {
	case c.subgroup >= 0:
		bad.Problem, bad.Advice = "says how much was inspected, and counts make no subgroups", "leave out --subgroup"
	case len(c.values) > 1:
		bad.Problem, bad.Advice = fmt.Sprintf("says how much was inspected, and %d value columns are chosen", len(c.values)), "choose one column of counts with --value"
	case c.inspected == c.mark || c.inspected == c.excluded || c.inspected == c.material || c.inspected == c.id || c.inspected == c.time:
		bad.Problem, bad.Advice = "is chosen for what was inspected and for something else", "choose another column for one of the two"
	default:
		return nil
	}
	return bad
}

// mostlyNumeric reports whether at least half of the texts in column i are numbers: a column of results with a few
// words in it should be chosen, so that the words are refused by line, and not passed over.
func mostlyNumeric(rows [][]string, i int) bool {
	numbers, texts := 0, 0
	for _, r := range rows {
		if i >= len(r) || r[i] == "" {
			continue
		}
		texts++
		if numeric(r[i]) {
			numbers++
		}
	}
	return numbers > 0 && 2*numbers >= texts
}

// closest gives the name most like want, or nothing where none is near.
func closest(want string, names []string) string {
	best, bestAway := "", 1+max(1, utf8.RuneCountInString(want)/3)
	for _, n := range names[:min(len(names), 200)] {
		if n == "" || len(n) > 200 || len(want) > 200 {
			continue
		}
		if d := distance([]rune(strings.ToLower(want)), []rune(strings.ToLower(n))); d < bestAway {
			best, bestAway = n, d
		}
	}
	return best
}

// distance counts the single-letter edits between a and b (Levenshtein's distance).
func distance(a, b []rune) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range a {
		diagonal := row[0]
		row[0] = i + 1
		for j := range b {
			cost := diagonal
			if a[i] != b[j] {
				cost++
			}
			diagonal = row[j+1]
			row[j+1] = min(cost, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
