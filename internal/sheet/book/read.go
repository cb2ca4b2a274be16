package book

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"
	"time"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/block"
)

// Options say what to read.
type Options struct {
	// Sheet is the name of the sheet; empty takes the only one there is.
	Sheet string
	// HeaderRow is the row of the column names, from 1.
	HeaderRow int
	// RawDates gives date cells as the serial numbers they are.
	RawDates bool
	// Dates is what the caller says of serial numbers. One that contradicts the workbook is refused; empty says nothing.
	Dates block.Dates
	// Use tells what the column of a name is for; nil goes by the usual names, and takes other columns for Any.
	Use func(name string) Use
}

// Looks reports whether data begin as a workbook does.
func Looks(data []byte) bool { return bytes.HasPrefix(data, []byte("PK\x03\x04")) }

// Read reads the rows under a header row. Row numbers are those of the sheet. What is wrong with the workbook or the choice
// is a *block.Error.
func Read(data []byte, o Options) (*block.Block, error) {
	if len(data) > block.BytesMax {
		return nil, &block.Error{Problem: fmt.Sprintf("the workbook has %d bytes, the limit is %d", len(data), block.BytesMax), Advice: "send the sheet alone, or in parts"}
	}
	if o.HeaderRow > headerRowMax {
		return nil, &block.Error{Problem: fmt.Sprintf("header_row=%d: the limit is %d", o.HeaderRow, headerRowMax)}
	}
	if err := checkZip(data); err != nil {
		return nil, err
	}
	f, err := excelize.OpenReader(bytes.NewReader(data), excelize.Options{UnzipSizeLimit: unpackedBytesMax, UnzipXMLSizeLimit: unpackedBytesMax})
	if err != nil {
		return nil, unreadable()
	}
	defer f.Close()
	name, err := sheetName(f, o.Sheet)
	if err != nil {
		return nil, err
	}
	props, err := f.GetWorkbookProps()
	if err != nil {
		return nil, &block.Error{Problem: "the workbook's properties cannot be read", Advice: "save it as .xlsx again"}
	}
	r := reader{file: f, sheet: name, options: o, from1904: props.Date1904 != nil && *props.Date1904, formats: map[int]format{}}
	if err := o.checkDates(r.from1904); err != nil {
		return nil, err
	}
	stringCount, err := sharedStrings(f)
	if err != nil {
		return nil, err
	}
	part, err := partOf(f, name)
	if err != nil {
		return nil, err
	}
	if r.marks, err = walkSheet(part, o.HeaderRow, stringCount); err != nil {
		return nil, err
	}
	return r.block()
}

func sheetName(f *excelize.File, wanted string) (string, error) {
	names := f.GetSheetList()
	if wanted == "" && len(names) == 1 {
		return names[0], nil
	}
	for _, n := range names {
		if n == wanted {
			return n, nil
		}
	}
	problem := "the workbook has several sheets"
	if wanted != "" {
		problem = fmt.Sprintf("the workbook has no sheet %q", wanted)
	}
	return "", &block.Error{Problem: problem, Advice: "say sheet=, one of " + strings.Join(names, ", ")}
}

type reader struct {
	file     *excelize.File
	sheet    string
	options  Options
	from1904 bool
	formats  map[int]format
	// marks are those of the cells that are still to come.
	marks []mark
	// uses are those of the columns, once the header is read.
	uses []Use
}

func (r *reader) block() (*block.Block, error) {
	rows, err := r.file.Rows(r.sheet)
	if err != nil {
		return nil, &block.Error{Problem: fmt.Sprintf("the sheet %q cannot be read", r.sheet), Advice: "is it a sheet of cells?"}
	}
	defer rows.Close()
	b := &block.Block{Dialect: block.Dialect{Delimiter: block.Tab, Decimal: '.'}, HasHeader: true}
	number := 0
	for rows.Next() {
		number++
		raw, err := rows.Columns(excelize.Options{RawCellValue: true})
		if err != nil {
			return nil, &block.Error{Row: number, Problem: "the row cannot be read"}
		}
		if number < r.options.HeaderRow {
			continue
		}
		if number > r.options.HeaderRow && len(raw) > len(b.Names) {
			raw = raw[:len(b.Names)] // what stands beside the table is not its own
		}
		cells, err := r.cells(number, raw)
		if err != nil {
			return nil, err
		}
		if number == r.options.HeaderRow {
			if err := b.SetHeader(number, cells); err != nil {
				return nil, err
			}
			r.uses = r.options.uses(b.Names)
			continue
		}
		for len(cells) < len(b.Names) {
			cells = append(cells, "")
		}
		if b.Rows = append(b.Rows, block.Row{Number: number, Cells: cells}); len(b.Rows) > block.RowsMax {
			return nil, &block.Error{Problem: fmt.Sprintf("more than %d rows, which is the limit", block.RowsMax), Advice: "send the sheet in parts"}
		}
	}
	if b.Names == nil {
		return nil, &block.Error{Problem: fmt.Sprintf("the sheet %q has no row %d", r.sheet, r.options.HeaderRow), Advice: "say header_row=, the row of the column names"}
	}
	return b, nil
}

func (r *reader) cells(row int, raw []string) ([]string, error) {
	if len(raw) > block.ColumnsMax {
		return nil, &block.Error{Row: row, Problem: fmt.Sprintf("more than %d columns, which is the limit", block.ColumnsMax)}
	}
	out := make([]string, len(raw))
	for i, text := range raw {
		if text == "" {
			continue
		}
		cell, err := excelize.CoordinatesToCellName(i+1, row)
		if err != nil {
			return nil, err
		}
		use := Other
		if i < len(r.uses) {
			use = r.uses[i]
		}
		if out[i], err = r.text(cell, text, r.mark(row, i+1), use); err != nil {
			return nil, &block.Error{Row: row, Problem: err.Error()}
		}
	}
	return out, nil
}

// wallClock gives the time of a date cell, without an offset.
func (r *reader) wallClock(raw string) (string, error) {
	clock := block.Clock{Dates: block.Serial1900, Zone: time.UTC}
	if r.from1904 {
		clock.Dates = block.Serial1904
	}
	if x, err := strconv.ParseFloat(raw, 64); err == nil {
		raw = strconv.FormatFloat(x, 'f', -1, 64)
	}
	text, err := clock.Read(raw, '.')
	return strings.TrimSuffix(text, "Z"), err
}

// padded adds the zeros that a format shows.
func padded(s string, places int) string {
	whole, fraction, _ := strings.Cut(s, ".")
	if places <= len(fraction) || strings.ContainsAny(s, "eE") {
		return s
	}
	return whole + "." + fraction + strings.Repeat("0", places-len(fraction))
}

// format gives the number format of a style.
func (r *reader) format(cell string, id int) (format, error) {
	if f, known := r.formats[id]; known {
		return f, nil
	}
	style, err := r.file.GetStyle(id)
	if err != nil {
		return format{}, fmt.Errorf("cell %s has a format that the workbook does not hold; save it as .xlsx again", cell)
	}
	r.formats[id] = formatOf(style)
	return r.formats[id], nil
}
