package validation

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io/fs"
	"math"
	"strconv"
	"strings"

	"limitary/testdata"
)

// table is a CSV file read by its header.
type table struct {
	name    string
	columns map[string]int
	rows    [][]string
}

func readTable(name string) (table, error) {
	file, err := testdata.Files.Open(name)
	if err != nil {
		return table{}, err
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		return table{}, fmt.Errorf("%s: %w", name, err)
	}
	if len(rows) < 2 {
		return table{}, fmt.Errorf("%s: no rows", name)
	}
	t := table{name, map[string]int{}, rows[1:]}
	for i, column := range rows[0] {
		t.columns[column] = i
	}
	return t, nil
}

func (t table) text(row int, column string) (string, error) {
	i, ok := t.columns[column]
	if !ok {
		return "", fmt.Errorf("%s: no column %q", t.name, column)
	}
	return t.rows[row][i], nil
}

func (t table) number(row int, column string) (float64, error) {
	text, err := t.text(row, column)
	if err != nil {
		return 0, err
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return 0, fmt.Errorf("%s, row %d, column %s: %w", t.name, row+1, column, err)
	}
	return x, nil
}

func readJSON(name string, into any) error {
	raw, err := fs.ReadFile(testdata.Files, name)
	if err != nil {
		return err
	}
	if err := json.Unmarshal(raw, into); err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	return nil
}

// figure is a number as printed.
type figure struct {
	value float64
	// unit is one unit of the last printed digit.
	unit float64
}

func parseFigure(text string) (figure, error) {
	value, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return figure{}, err
	}
	_, decimals, _ := strings.Cut(text, ".")
	return figure{value, math.Pow10(-len(decimals))}, nil
}

// binarySlack widens a decimal tolerance by what its float64 form may be off.
const binarySlack = 1 + 1e-9

// halfUnit is the largest error that rounding to the printed digits makes.
func (f figure) halfUnit() float64 { return f.unit / 2 * binarySlack }
