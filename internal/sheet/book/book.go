// Package book writes tables as .xlsx workbooks and reads blocks out of them.
//
// The library is excelize: of the libraries for this format in Go it is the one that both reads and writes, is released
// every few months by the same people since 2016, is pure Go under a BSD licence, and bounds what it unpacks. It is heavy,
// since it can also calculate and draw; nothing of that is used here, and no formula is ever written or evaluated.
//
// # Out
//
// A number of up to 15 significant digits is a number cell, shown with the decimals it was written with; a longer one is
// text, since the format keeps numbers as doubles. Texts are string cells, never formulas, and guarded as in delimited
// text, so that they stay harmless when the program saves the workbook as text. Times are date cells in UTC. A blank is
// no cell at all.
//
// # In
//
// A number cell gives the shortest decimal text of its value, with zeros after it where its format (0, 0.00 and the like)
// shows more decimals; the workbook keeps no other trace of how a number was typed. A format that shows another value than
// the cell holds, such as 0.00% or "<"0.00, is refused; in a column of ids and names, so is every format but General and 0.
// A date cell gives its wall-clock time without an offset. A formula gives the value it had when the workbook was saved.
// TRUE and FALSE are texts, and errors are refused. Hidden rows are read like others.
//
// What a workbook unpacks to is bounded, and its sheet is walked through once before the library streams it: rows and cells
// have to be in order, each once, and within the limits of a block. The library's calls for single cells are not used, since
// they make the whole sheet at once, and every row up to its last column.
package book

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/grid"
)

// ContentType is the media type of a workbook.
const ContentType = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"

const (
	// digitsMax is how many significant digits a double is sure to keep.
	digitsMax = 15
	// cellCharsMax bounds a cell's text (common practice).
	cellCharsMax = 32_767
	timeFormat   = "yyyy-mm-dd hh:mm:ss"
	columnWidth  = 16
)

// Write makes a workbook with a sheet for each table, the header row in bold and kept in sight.
func Write(tables []*grid.Table) ([]byte, error) {
	f := excelize.NewFile()
	defer f.Close()
	w := writer{file: f, places: map[int]int{}}
	if err := w.begin(); err != nil {
		return nil, err
	}
	for i, t := range tables {
		if i == 0 {
			if err := f.SetSheetName("Sheet1", t.Name); err != nil {
				return nil, err
			}
		} else if _, err := f.NewSheet(t.Name); err != nil {
			return nil, err
		}
		if err := w.table(t); err != nil {
			return nil, fmt.Errorf("sheet %s: %w", t.Name, err)
		}
	}
	var buf bytes.Buffer
	if err := f.Write(&buf); err != nil {
		return nil, err
	}
	return buf.Bytes(), nil
}

type writer struct {
	file       *excelize.File
	bold, time int
	// places has the style of each number of decimals.
	places map[int]int
}

func (w *writer) begin() (err error) {
	if w.bold, err = w.file.NewStyle(&excelize.Style{Font: &excelize.Font{Bold: true}}); err != nil {
		return err
	}
	format := timeFormat
	w.time, err = w.file.NewStyle(&excelize.Style{CustomNumFmt: &format})
	return err
}

func (w *writer) table(t *grid.Table) error {
	s, err := w.file.NewStreamWriter(t.Name)
	if err != nil {
		return err
	}
	if err := s.SetColWidth(1, max(1, len(t.Columns)), columnWidth); err != nil {
		return err
	}
	if err := s.SetPanes(&excelize.Panes{Freeze: true, YSplit: 1, TopLeftCell: "A2", ActivePane: "bottomLeft"}); err != nil {
		return err
	}
	cells := make([]any, len(t.Columns))
	for i, name := range t.Columns {
		cells[i] = excelize.Cell{StyleID: w.bold, Value: text(name)}
	}
	if err := s.SetRow("A1", cells); err != nil {
		return err
	}
	for n, row := range t.Rows {
		for i, v := range row {
			if v.Kind == grid.Number && strings.Contains(v.Text, ".") && usualUse(t.Columns[i]) == Text {
				v.Kind = grid.Text // an id 10.50 has to come back as it is, which a number cell does not promise
			}
			if cells[i], err = w.cell(v); err != nil {
				return err
			}
		}
		if err := s.SetRow("A"+strconv.Itoa(n+2), cells); err != nil {
			return err
		}
	}
	return s.Flush()
}

func (w *writer) cell(v grid.Value) (any, error) {
	switch v.Kind {
	case grid.Text:
		return text(v.Text), nil
	case grid.Time:
		return excelize.Cell{StyleID: w.time, Value: v.Time}, nil
	case grid.Number:
		x, err := strconv.ParseFloat(v.Text, 64)
		if err != nil || digits(v.Text) > digitsMax {
			return text(v.Text), nil
		}
		style, err := w.decimals(v.Text)
		return excelize.Cell{StyleID: style, Value: x}, err
	}
	return nil, nil
}

// digits counts the significant digits of a decimal text.
func digits(s string) int {
	s, _, _ = strings.Cut(strings.ToLower(s), "e")
	return len(strings.TrimLeft(strings.NewReplacer("-", "", "+", "", ".", "").Replace(s), "0"))
}

// decimals gives the style that shows a number with the decimals it is written with.
func (w *writer) decimals(s string) (int, error) {
	_, fraction, ok := strings.Cut(s, ".")
	if !ok || strings.ContainsAny(s, "eE") {
		return 0, nil
	}
	n := len(fraction)
	if id, known := w.places[n]; known {
		return id, nil
	}
	format := "0." + strings.Repeat("0", n)
	id, err := w.file.NewStyle(&excelize.Style{CustomNumFmt: &format})
	w.places[n] = id
	return id, err
}
