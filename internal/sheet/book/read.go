package book

import (
	"bytes"
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/grid"
)

// unpackedBytesMax bounds a workbook once unpacked.
const unpackedBytesMax = 64 << 20

// Options say what to read.
type Options struct {
	// Sheet is the name of the sheet; empty takes the only one there is.
	Sheet string
	// HeaderRow is the row of the column names, from 1.
	HeaderRow int
	// RawDates gives date cells as the serial numbers they are.
	RawDates bool
}

// Looks reports whether data begin as a workbook does.
func Looks(data []byte) bool { return bytes.HasPrefix(data, []byte("PK\x03\x04")) }

// Read reads the rows under a header row. Row numbers are those of the sheet. What is wrong with the workbook or the choice
// is a *block.Error.
func Read(data []byte, o Options) (*block.Block, error) {
	if len(data) > block.BytesMax {
		return nil, &block.Error{Problem: fmt.Sprintf("the workbook has %d bytes, the limit is %d", len(data), block.BytesMax), Advice: "send the sheet alone, or in parts"}
	}
	f, err := excelize.OpenReader(bytes.NewReader(data), excelize.Options{UnzipSizeLimit: unpackedBytesMax, UnzipXMLSizeLimit: unpackedBytesMax})
	if err != nil {
		return nil, &block.Error{Problem: "the workbook cannot be read", Advice: "save it as .xlsx without a password"}
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
}

// format is what a cell's number format tells: a date, or how many decimals are shown; -1 where it does not say.
type format struct {
	date   bool
	places int
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
		if out[i], err = r.text(cell, text); err != nil {
			return nil, &block.Error{Row: row, Problem: fmt.Sprintf("cell %s: %v", cell, err)}
		}
	}
	return out, nil
}

// text gives what a cell holds as text.
func (r *reader) text(cell, raw string) (string, error) {
	kind, err := r.file.GetCellType(r.sheet, cell)
	if err != nil {
		return "", err
	}
	if kind != excelize.CellTypeNumber && kind != excelize.CellTypeUnset && kind != excelize.CellTypeDate {
		return block.Unguard(raw), nil
	}
	x, err := strconv.ParseFloat(raw, 64)
	if err != nil {
		return block.Unguard(raw), nil // a date as text, or a kind of cell that is not known
	}
	f, err := r.format(cell)
	if err != nil {
		return "", err
	}
	if f.date && !r.options.RawDates {
		return r.wallClock(raw)
	}
	return padded(grid.Shortest(x), f.places), nil
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

var (
	plainFormat = regexp.MustCompile(`^0(?:\.(0+))?$`)
	notLetters  = regexp.MustCompile(`"[^"]*"|\\.|\[[^\]]*\]`)
)

func (r *reader) format(cell string) (format, error) {
	id, err := r.file.GetCellStyle(r.sheet, cell)
	if err != nil {
		return format{}, err
	}
	if f, known := r.formats[id]; known {
		return f, nil
	}
	f := format{places: -1}
	if style, err := r.file.GetStyle(id); err == nil && style != nil {
		f = formatOf(style)
	}
	r.formats[id] = f
	return f, nil
}

// formatOf reads a number format. The numbers of built-in formats for dates and times are 14 to 22, 27 to 36, 45 to 47 and 50
// to 58; 2 is 0.00 (ECMA-376 part 1, 18.8.30; from memory).
func formatOf(style *excelize.Style) format {
	n := style.NumFmt
	switch {
	case style.CustomNumFmt != nil:
		code := *style.CustomNumFmt
		if m := plainFormat.FindStringSubmatch(code); m != nil {
			return format{places: len(m[1])}
		}
		return format{date: strings.ContainsAny(strings.ToLower(notLetters.ReplaceAllString(code, "")), "ydhs"), places: -1}
	case n >= 14 && n <= 22, n >= 27 && n <= 36, n >= 45 && n <= 47, n >= 50 && n <= 58:
		return format{date: true, places: -1}
	case n == 2:
		return format{places: 2}
	}
	return format{places: -1}
}
