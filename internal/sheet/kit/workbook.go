package kit

import (
	"bytes"
	"fmt"
	"regexp"
	"strings"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/book"
)

const (
	workbookType = book.ContentType
	// FormulaSheet holds the formulas of the workbook from row FormulaRow on, in column B, and what each gives in column A.
	FormulaSheet = "Formulas"
	FormulaRow   = 2
	// SettingsSheet holds the settings, in column B from row 1 on: address, chart, key.
	SettingsSheet = "Settings"
	// ResultsSheet holds the cells that the formulas read, where the page says.
	ResultsSheet = "Results"
)

// newer are the functions that the format knows under a longer name (ECMA-376, and its extensions by the makers of programs;
// from memory, and held by the test that opens the workbook).
var newer = regexp.MustCompile(`\b(WEBSERVICE|ENCODEURL|NUMBERVALUE|TEXTJOIN)\(`)

// ownCells are the cells that the page's formulas read.
var ownCells = regexp.MustCompile(`\bB[2-8](?::B[2-8])?\b`)

// Workbook makes a workbook of the formulas of the page, with cells for the settings and for results. It holds no key.
func Workbook(address string) ([]byte, error) {
	f := excelize.NewFile()
	defer f.Close()
	if err := f.SetSheetName("Sheet1", SettingsSheet); err != nil {
		return nil, err
	}
	for _, name := range []string{ResultsSheet, FormulaSheet} {
		if _, err := f.NewSheet(name); err != nil {
			return nil, err
		}
	}
	for _, fill := range []func(*excelize.File, string) error{fillSettings, fillResults, fillFormulas} {
		if err := fill(f, address); err != nil {
			return nil, err
		}
	}
	var out bytes.Buffer
	err := f.Write(&out)
	return out.Bytes(), err
}

func fillSettings(f *excelize.File, address string) error {
	for i, line := range [][2]string{{"base", address}, {"chart", ""}, {"key", ""}} {
		row := i + 1
		if err := f.SetSheetRow(SettingsSheet, fmt.Sprintf("A%d", row), &[]any{"limitary_" + line[0], line[1]}); err != nil {
			return err
		}
		name := &excelize.DefinedName{Name: "limitary_" + line[0], RefersTo: fmt.Sprintf("%s!$B$%d", SettingsSheet, row)}
		if err := f.SetDefinedName(name); err != nil {
			return err
		}
	}
	if err := f.SetColWidth(SettingsSheet, "A", "B", 40); err != nil {
		return err
	}
	return f.SetCellStr(SettingsSheet, "A5", "The key must be one whose one role is reader. Whoever has this workbook has the key.")
}

func fillResults(f *excelize.File, _ string) error {
	if err := f.SetCellStr(ResultsSheet, "A1", "Results in B2 to B6"); err != nil {
		return err
	}
	if err := f.SetCellStr(ResultsSheet, "A8", "The verdict of B2"); err != nil {
		return err
	}
	for _, each := range Formulas(WithCommas) {
		if strings.Contains(each.Text, "&value=") {
			return f.SetCellFormula(ResultsSheet, "B8", stored(each.Text))
		}
	}
	return fmt.Errorf("the page has no formula for the verdict of one result")
}

func fillFormulas(f *excelize.File, _ string) error {
	if err := f.SetSheetRow(FormulaSheet, "A1", &[]any{"What", "Answer"}); err != nil {
		return err
	}
	for i, each := range Formulas(WithCommas) {
		row := FormulaRow + i
		if err := f.SetCellStr(FormulaSheet, fmt.Sprintf("A%d", row), each.Gives); err != nil {
			return err
		}
		if err := f.SetCellFormula(FormulaSheet, fmt.Sprintf("B%d", row), stored(each.Text)); err != nil {
			return err
		}
	}
	return f.SetColWidth(FormulaSheet, "A", "B", 60)
}

// stored writes a formula as the file format does, reading the cells of the sheet of results.
func stored(formula string) string {
	s := newer.ReplaceAllString(strings.TrimPrefix(formula, "="), "_xlfn.$1(")
	return ownCells.ReplaceAllString(s, ResultsSheet+"!$0")
}
