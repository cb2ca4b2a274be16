package book

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/block"
)

// mark is what kind of cell stands where, and the number of its style.
type mark struct {
	row, column int32
	style       int32
	kind        cellKind
}

type cellKind uint8

const (
	numberCell cellKind = iota
	textCell
	truthCell
	errorCell
	dateCell
)

// cellKinds are by the letters of the format; a cell without one is a number.
var cellKinds = map[string]cellKind{"": numberCell, "n": numberCell, "s": textCell, "str": textCell, "inlineStr": textCell, "b": truthCell, "e": errorCell, "d": dateCell}

// walk goes through a sheet's XML and keeps counts and marks.
type walk struct {
	headerRow, stringCount int
	// row and column are those of the last row and cell that began, index is the cell's place in its row.
	row, column, index int
	inRow, shared      bool
	inValue            bool
	value              []byte
	cells              int
	elements, loose    int
	marks              []mark
}

// walkSheet checks what the library relies on or makes memory of: rows and cells in order, each once and where it says, within the
// limits, and indexes of shared texts that exist. It gives a mark for each
// cell, in order.
func walkSheet(data []byte, headerRow, stringCount int) ([]mark, error) {
	w := walk{headerRow: headerRow, stringCount: stringCount}
	d := xml.NewDecoder(bytes.NewReader(data))
	for {
		token, err := d.RawToken()
		if err == io.EOF {
			return w.marks, nil
		}
		if err != nil {
			return nil, &block.Error{Row: w.row, Problem: "the sheet's XML is broken", Advice: "save it as .xlsx again"}
		}
		switch t := token.(type) {
		case xml.StartElement:
			err = w.start(t)
		case xml.EndElement:
			err = w.end(t.Name.Local)
		case xml.CharData:
			if w.inValue {
				w.value = append(w.value, t...)
			}
		}
		if err != nil {
			return nil, err
		}
	}
}

func (w *walk) start(t xml.StartElement) error {
	w.elements++
	if !w.inRow {
		w.loose++
	}
	if w.elements > elementsMax || w.loose > looseMax {
		return tooMuch("the sheet has more than %d XML elements, or %d outside its rows, which are the limits", elementsMax, looseMax)
	}
	switch t.Name.Local {
	case "row":
		return w.startRow(t)
	case "c":
		return w.startCell(t)
	case "v":
		w.inValue, w.value = w.shared, w.value[:0]
	}
	return nil
}

func (w *walk) end(name string) error {
	switch name {
	case "row":
		w.inRow = false
	case "v":
		w.inValue = false
	case "c":
		defer func() { w.shared, w.value = false, w.value[:0] }()
		if text := strings.TrimSpace(string(w.value)); w.shared && text != "" {
			if n, err := strconv.Atoi(text); err != nil || n < 0 || n >= w.stringCount {
				return w.broken("cell %s: there is no text %.20q among the workbook's %d", w.name(), text, w.stringCount)
			}
		}
	}
	return nil
}

func (w *walk) startRow(t xml.StartElement) error {
	text, err := attribute(t, "r")
	number := w.row + 1
	if err == nil && text != "" {
		number, err = strconv.Atoi(text)
	}
	switch {
	case err != nil || number < 1:
		return w.broken("the row after it has the number %.20q", text)
	case number <= w.row:
		return w.broken("row %d comes after it, so that rows are repeated or out of order", number)
	case number > w.headerRow+block.RowsMax:
		return &block.Error{Row: number, Problem: fmt.Sprintf("more than %d rows under the header, which is the limit", block.RowsMax), Advice: "send the sheet in parts"}
	}
	w.row, w.column, w.index, w.inRow = number, 0, 0, true
	return nil
}

func (w *walk) startCell(t xml.StartElement) error {
	if !w.inRow {
		return w.broken("a cell stands outside the rows")
	}
	kind, err1 := attribute(t, "t")
	text, err2 := attribute(t, "r")
	style, err3 := attribute(t, "s")
	if err1 != nil || err2 != nil || err3 != nil {
		return w.broken("a cell gives its place, kind or style twice")
	}
	w.index++
	column, row := w.column+1, w.row
	if text != "" {
		var err error
		if column, row, err = excelize.CellNameToCoordinates(text); err != nil {
			return w.broken("%.20q is no cell", text)
		}
	} else if column != w.index {
		return w.broken("a cell after column %d does not say where it stands", w.column)
	}
	switch {
	case row != w.row:
		return w.broken("cell %.20s stands in it", text)
	case column <= w.column:
		return w.broken("cell %.20s is repeated or out of order", text)
	case column > block.ColumnsMax:
		return &block.Error{Row: row, Problem: fmt.Sprintf("more than %d columns, which is the limit", block.ColumnsMax), Advice: "delete the columns beside the table, formats included"}
	}
	w.cells += column - w.column
	w.column, w.shared, w.value = column, kind == "s", w.value[:0]
	if w.cells > block.CellsMax {
		return &block.Error{Row: row, Problem: fmt.Sprintf("more than %d cells down to here, which is the limit", block.CellsMax), Advice: "send the sheet in parts"}
	}
	return w.mark(kind, style)
}

func (w *walk) mark(kind, style string) error {
	m := mark{row: int32(w.row), column: int32(w.column)}
	var known bool
	if m.kind, known = cellKinds[kind]; !known {
		return w.broken("cell %s is of the unknown kind %.20q", w.name(), kind)
	}
	if style != "" {
		n, err := strconv.ParseInt(style, 10, 32)
		if err != nil {
			return w.broken("cell %s has the style %.20q, which is no number", w.name(), style)
		}
		m.style = int32(n)
	}
	w.marks = append(w.marks, m)
	return nil
}

func (w *walk) name() string {
	name, _ := excelize.CoordinatesToCellName(w.column, w.row)
	return name
}

func (w *walk) broken(format string, args ...any) error {
	return &block.Error{Row: w.row, Problem: fmt.Sprintf(format, args...), Advice: "save the workbook as .xlsx again"}
}

// attribute gives an attribute, "" where there is none. One that is there twice is an error, since readers differ in which they take.
func attribute(t xml.StartElement, name string) (string, error) {
	out, seen := "", false
	for _, a := range t.Attr {
		if a.Name.Local != name {
			continue
		}
		if seen {
			return "", fmt.Errorf("%s twice", name)
		}
		out, seen = a.Value, true
	}
	return out, nil
}
