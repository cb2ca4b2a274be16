package sheet

import (
	"fmt"
	"io"
	"slices"
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
	// values are the columns of readings, or the one of counts; inspected is the column of how much was inspected, -1 where
	// there is none; fields are the columns taken by their own name.
	values    []int
	inspected int
	fields    map[string]int
	// inspectedGiven is what the address says was inspected.
	inspectedGiven string
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
	p.inspected = p.Index("inspected")
	if p.values, err = p.valueColumns(r.query.Get("values")); err != nil {
		return nil, err
	}
	p.findFields()
	p.inspectedGiven, err = r.inspected()
	return p, err
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
	dates := r.query.Get("dates")
	return book.Read(data, book.Options{Sheet: r.query.Get("sheet"), HeaderRow: row, RawDates: strings.HasPrefix(dates, "serial"), Dates: block.Dates(dates), Use: r.use})
}

// use tells what a column of a workbook is for, as the caller names columns or else by the usual names. A column of another
// name may be the only one, and then holds readings, unless the caller has named those.
func (r *request) use(name string) book.Use {
	is := func(param string, usual ...string) bool {
		if named := r.query.Get(param); named != "" {
			usual = strings.Split(named, ",")
		}
		return slices.ContainsFunc(usual, func(u string) bool { return strings.EqualFold(strings.TrimSpace(u), name) })
	}
	named := r.query.Get("values") != ""
	switch {
	case named && is("values"), !named && valueName.MatchString(name), strings.EqualFold(name, "inspected"):
		return book.Reading
	case is("time", "time", "measured_at"):
		return book.Any
	case is("id", "id", "source_id"), is("", "source"), is("", fieldNames...):
		return book.Text
	case named:
		return book.Other
	}
	return book.Any
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

// numbers are the columns of numbers.
func (p *pasted) numbers() []int { return append(append([]int{}, p.values...), p.inspected) }

// inspectedOf gives how much was inspected for the count of a row, "" where the row holds readings.
func (p *pasted) inspectedOf(r block.Row) (string, *trouble) {
	if p.inspected < 0 || strings.TrimSpace(r.Cells[p.inspected]) == "" {
		return p.inspectedGiven, nil
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

// settle finds the decimal from all columns of numbers.
func (p *pasted) settle(columns ...int) error {
	var cells []block.Cell
	for _, r := range p.Rows {
		for _, c := range columns {
			if c >= 0 && strings.TrimSpace(r.Cells[c]) != "" {
				cells = append(cells, block.Cell{Row: r.Number, Column: p.Names[c], Text: r.Cells[c], Count: p.isCount(r, c)})
			}
		}
	}
	return p.Dialect.SettleDecimal(cells)
}

// isCount reports a cell that is to hold a number of pieces.
func (p *pasted) isCount(r block.Row, column int) bool {
	if column == p.inspected || strings.EqualFold(p.Names[column], "nonconforming") {
		return true
	}
	counted := p.inspectedGiven != "" || p.inspected >= 0 && strings.TrimSpace(r.Cells[p.inspected]) != ""
	return counted && slices.Contains(p.values, column)
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
