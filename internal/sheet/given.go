package sheet

import (
	"fmt"
	"slices"
	"strings"

	"limitary/internal/sheet/block"
)

// fieldNames are the columns that are taken by their own name.
var fieldNames = []string{"lot", "run_id", "position", "replicate", "role", "repeat_of", "unit", "material", "analyst", "instrument", "chart", "voided"}

// findFields finds those columns; one that holds readings is no field.
func (p *pasted) findFields() {
	p.fields = map[string]int{}
	for _, name := range fieldNames {
		if at := p.Index(name); at >= 0 && !slices.Contains(p.values, at) {
			p.fields[name] = at
		}
	}
}

// field gives what a row has in a column of that name, "" where there is no such column.
func (p *pasted) field(row block.Row, name string) string {
	if at, ok := p.fields[name]; ok {
		return strings.TrimSpace(row.Cells[at])
	}
	return ""
}

// orGiven is a field of a row, or what the address says where the row says nothing.
func (p *pasted) orGiven(row block.Row, name string) string {
	if text := p.field(row, name); text != "" {
		return text
	}
	return p.request.query.Get(name)
}

// contradicts finds what a row says otherwise than the address.
func (p *pasted) contradicts(row block.Row) *trouble {
	if text := p.field(row, "chart"); text != "" && text != p.request.chart() {
		return &trouble{row.Number, "chart", fmt.Sprintf("%q: the address says chart %q", clip(text), clip(p.request.chart()))}
	}
	for _, name := range []string{"lot", "material"} {
		text, given := p.field(row, name), p.request.query.Get(name)
		if text != "" && given != "" && text != given {
			return &trouble{row.Number, name, fmt.Sprintf("%q: the address says %s=%s", clip(text), name, clip(given))}
		}
	}
	return nil
}

// isVoided reads the column that a table of results marks voided ones with.
func (p *pasted) isVoided(row block.Row) (bool, *trouble) {
	switch text := strings.ToLower(p.field(row, "voided")); text {
	case "", "no", "false", "0":
		return false, nil
	case "yes", "true", "1":
		return true, nil
	default:
		return false, &trouble{row.Number, "voided", fmt.Sprintf("%q: want yes or no", clip(text))}
	}
}

// unreadShown bounds the columns named as not read.
const unreadShown = 10

// unread names the columns that hold something and are not read, for the note of the first row; also are columns that are
// known beside the values, the inspected and the fields. It is empty where every column is read.
func (p *pasted) unread(also ...int) string {
	var names []string
	more := 0
	for i, name := range p.Names {
		if i == p.inspected || slices.Contains(p.values, i) || slices.Contains(also, i) || p.isField(i) || p.blankColumn(i) {
			continue
		}
		if len(names) == unreadShown {
			more++
			continue
		}
		names = append(names, clip(name))
	}
	text := "columns not read: " + strings.Join(names, ", ")
	switch {
	case names == nil:
		return ""
	case more > 0:
		return fmt.Sprintf("%s and %d more", text, more)
	}
	return text
}

func (p *pasted) isField(column int) bool {
	for _, at := range p.fields {
		if at == column {
			return true
		}
	}
	return false
}

func (p *pasted) blankColumn(column int) bool {
	return !slices.ContainsFunc(p.Rows, func(r block.Row) bool { return strings.TrimSpace(r.Cells[column]) != "" })
}

// sayUnread puts what is not read at the end of the first row's note, which is its last cell.
func (p *pasted) sayUnread(more [][]string, also ...int) {
	text := p.unread(also...)
	first := slices.IndexFunc(p.Rows, func(r block.Row) bool { return !r.Blank() })
	if text == "" || first < 0 {
		return
	}
	note := &more[first][len(more[first])-1]
	if *note != "" {
		text = *note + "; " + text
	}
	*note = text
}
