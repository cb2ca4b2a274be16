package sheet

import (
	"fmt"
	"io"
	"regexp"
	"sort"
	"strconv"
	"strings"

	"limitary/internal/decimal"
	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
)

// pasted is a block with its columns found.
type pasted struct {
	*block.Block
	request  *request
	workbook bool
	// values are the columns of readings, or the one of counts; inspected is the column of how much was inspected and
	// material that of the level, -1 where there is none.
	values              []int
	inspected, material int
}

// paste reads the body.
func (r *request) paste() (*pasted, error) {
	data, err := io.ReadAll(r.http.Body)
	if err != nil {
		return nil, refuse("the body could not be read")
	}
	p := &pasted{request: r, workbook: book.Looks(data)}
	if p.workbook {
		err = r.withWorkbook(func() (err error) { p.Block, err = r.workbookBlock(data); return err })
	} else {
		p.Block, err = r.textBlock(data)
	}
	if err != nil {
		return nil, err
	}
	p.Drop(added)
	if len(p.Rows) == 0 {
		return nil, refuse("the block has no rows under its header")
	}
	p.inspected, p.material = p.Index("inspected"), p.Index("material")
	if p.values, err = p.valueColumns(r.query.Get("values")); err != nil {
		return nil, err
	}
	return p, nil
}

func (r *request) textBlock(data []byte) (*block.Block, error) {
	for _, name := range []string{"sheet", "header_row"} {
		if r.query.Has(name) {
			return nil, refuse("%s: is for a workbook, and the body is text", name)
		}
	}
	decimal, err := r.decimal()
	if err != nil {
		return nil, err
	}
	delimiter, err := block.ParseDelimiter(r.query.Get("delimiter"))
	if err != nil {
		return nil, asRefusal(err)
	}
	header, err := r.flag("header", true)
	if err != nil {
		return nil, err
	}
	return block.Read(data, block.Options{Delimiter: delimiter, Decimal: decimal, NoHeader: !header})
}

func (r *request) workbookBlock(data []byte) (*block.Block, error) {
	row := 1
	if text := r.query.Get("header_row"); text != "" {
		n, err := strconv.Atoi(text)
		if err != nil || n < 1 || n > 1_000_000 {
			return nil, refuse("header_row=%s: want the row of the column names, from 1", clip(text))
		}
		row = n
	}
	return book.Read(data, book.Options{Sheet: r.query.Get("sheet"), HeaderRow: row, RawDates: strings.HasPrefix(r.query.Get("dates"), "serial")})
}

// column finds a column that the caller named, or one of the usual names; -1 where it is none of those.
func (p *pasted) column(param, named string, usual ...string) (int, error) {
	if named != "" {
		if at := p.Index(named); at >= 0 {
			return at, nil
		}
		return -1, refuse("%s=%s: there is no such column; there are %s", param, clip(named), p.list())
	}
	found := -1
	for _, name := range usual {
		if at := p.Index(name); at >= 0 {
			if found >= 0 {
				return -1, refuse("columns %s and %s may both be it; say %s=", p.Names[found], p.Names[at], param)
			}
			found = at
		}
	}
	return found, nil
}

func (p *pasted) list() string { return clip(strings.Join(p.Names, ", ")) }

var valueName = regexp.MustCompile(`(?i)^(?:(?:value|reading|result)s?[ _]?([0-9]{0,3})|nonconforming)$`)

// valueColumns finds the columns of readings.
func (p *pasted) valueColumns(named string) ([]int, error) {
	var found []int
	if named != "" {
		for name := range strings.SplitSeq(named, ",") {
			at, err := p.column("values", strings.TrimSpace(name))
			if err != nil {
				return nil, err
			}
			found = append(found, at)
		}
		return found, p.distinct(found)
	}
	if len(p.Names) == 1 {
		return []int{0}, nil
	}
	order := map[int]int{}
	for i, name := range p.Names {
		if m := valueName.FindStringSubmatch(name); m != nil {
			order[i], _ = strconv.Atoi(m[1])
			found = append(found, i)
		}
	}
	sort.SliceStable(found, func(a, b int) bool { return order[found[a]] < order[found[b]] })
	if len(found) == 0 {
		return nil, refuse("which columns hold the readings is not clear; say values=, some of %s", p.list())
	}
	return found, nil
}

func (p *pasted) distinct(columns []int) error {
	seen := map[int]bool{}
	for _, c := range columns {
		if seen[c] {
			return refuse("values=: column %s is named twice", p.Names[c])
		}
		seen[c] = true
	}
	return nil
}

// numbers are the columns of numbers.
func (p *pasted) numbers() []int { return append(append([]int{}, p.values...), p.inspected) }

// inspectedOf gives how much was inspected for the count of a row, "" where the row holds readings.
func (p *pasted) inspectedOf(r block.Row) (string, *trouble) {
	if p.inspected < 0 || strings.TrimSpace(r.Cells[p.inspected]) == "" {
		text, err := p.request.inspected()
		if err != nil {
			return "", &trouble{r.Number, "", err.Error()}
		}
		return text, nil
	}
	text, err := p.Dialect.Number(r.Cells[p.inspected])
	if err == nil {
		_, err = decimal.ParseReading(text)
	}
	if err != nil {
		return "", &trouble{r.Number, p.Names[p.inspected], err.Error()}
	}
	return text, nil
}

// materialOf gives the level of a row.
func (p *pasted) materialOf(r block.Row) string {
	if p.material >= 0 {
		return strings.TrimSpace(r.Cells[p.material])
	}
	return p.request.query.Get("material")
}

// settle finds the decimal from all columns of numbers.
func (p *pasted) settle(columns ...int) error {
	var cells []block.Cell
	for _, r := range p.Rows {
		for _, c := range columns {
			if c >= 0 && strings.TrimSpace(r.Cells[c]) != "" {
				cells = append(cells, block.Cell{Row: r.Number, Column: p.Names[c], Text: r.Cells[c]})
			}
		}
	}
	return p.Dialect.SettleDecimal(cells)
}

// trouble is what is wrong with a row, at a column.
type trouble struct {
	row    int
	column string
	text   string
}

func (t *trouble) String() string {
	if t.column == "" {
		return fmt.Sprintf("row %d: %s", t.row, t.text)
	}
	return fmt.Sprintf("row %d, column %s: %s", t.row, t.column, t.text)
}

// readings gives the readings of a row as decimal texts with a point; empty cells are none.
func (p *pasted) readings(r block.Row) ([]string, *trouble) {
	var out []string
	for _, c := range p.values {
		text, err := p.Dialect.Number(r.Cells[c])
		if err == nil && text != "" {
			_, err = decimal.ParseReading(text)
		}
		if err != nil {
			return nil, &trouble{r.Number, p.Names[c], err.Error()}
		}
		if text != "" {
			out = append(out, text)
		}
	}
	return out, nil
}
