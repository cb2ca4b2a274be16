package book

import (
	"archive/zip"
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"maps"
	"slices"
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/block"
)

// Limits of what a workbook holds. Cells, texts and styles take many times as much memory as their XML, which itself packs very
// small, so that the bytes alone do not bound it.
const (
	// unpackedBytesMax bounds a workbook once unpacked.
	unpackedBytesMax = 64 << 20
	// entriesMax bounds the files in a workbook.
	entriesMax = 2_000
	// partBytesMax bounds the parts that hold neither cells nor their texts nor pictures, such as the styles, once unpacked.
	partBytesMax = 4 << 20
	// stringsMax bounds the texts that cells share, over all sheets.
	stringsMax = 200_000
	// elementsMax bounds the elements of one part, and looseMax those outside the rows.
	elementsMax = 3_000_000
	looseMax    = 200_000
	// headerRowMax bounds the row of the header, since all rows above it are made as well.
	headerRowMax = 100_000
)

// stringsPart is where the library keeps the shared texts, however the workbook spells it.
const stringsPart = "xl/sharedStrings.xml"

// largeParts begin the names of what may be as large as the workbook.
var largeParts = []string{"xl/worksheets/", "xl/sharedstrings.xml", "xl/media/", "xl/charts/", "xl/drawings/", "xl/embeddings/", "xl/pivotcache/", "xl/vbaproject.bin", "customxml/", "docprops/"}

// checkZip bounds the files in a workbook by what they say of themselves, and then unpacks each once to see that it is as long as it
// says and undamaged, since the library takes what it gets of a damaged part for the whole.
func checkZip(data []byte) error {
	z, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		return unreadable()
	}
	if len(z.File) > entriesMax {
		return tooMuch("it holds %d files, the limit is %d", len(z.File), entriesMax)
	}
	var total uint64
	for _, f := range z.File {
		n := f.UncompressedSize64
		if total += n; n > unpackedBytesMax || total > unpackedBytesMax {
			return tooMuch("unpacked it has more than %d bytes, which is the limit", unpackedBytesMax)
		}
		if n > partBytesMax && !large(f.Name) {
			return tooMuch("its part %.60q has %d bytes unpacked, the limit is %d", f.Name, n, partBytesMax)
		}
	}
	for _, f := range z.File {
		if err := undamaged(f); err != nil {
			return &block.Error{Problem: fmt.Sprintf("the workbook's part %.60q is damaged", f.Name), Advice: "send the file again"}
		}
	}
	return nil
}

func undamaged(f *zip.File) error {
	r, err := f.Open()
	if err != nil {
		return err
	}
	defer r.Close()
	_, err = io.Copy(io.Discard, r)
	return err
}

func large(name string) bool {
	name = strings.ToLower(strings.ReplaceAll(name, `\`, "/"))
	for _, p := range largeParts {
		if strings.HasPrefix(name, p) {
			return true
		}
	}
	return false
}

func unreadable() error {
	return &block.Error{Problem: "the workbook cannot be read", Advice: "save it as .xlsx without a password"}
}

func tooMuch(format string, args ...any) error {
	return &block.Error{Problem: "the workbook is too large: " + fmt.Sprintf(format, args...), Advice: "send the sheet alone, or in parts"}
}

// partOf finds the part that the library takes for a sheet, by putting a sheet of one cell in the place of every part: that cell's
// text says which part it is. Only that part is put back, so that no other is ever read.
func partOf(f *excelize.File, sheet string) ([]byte, error) {
	parts := map[string][]byte{}
	f.Pkg.Range(func(name, data any) bool {
		n, isName := name.(string)
		if part, ok := data.([]byte); ok && isName && n != stringsPart && n != "[Content_Types].xml" && !strings.HasSuffix(n, ".rels") {
			parts[n] = part
		}
		return true
	})
	names := slices.Sorted(maps.Keys(parts))
	for i, n := range names {
		f.Pkg.Store(n, []byte(standIn(strconv.Itoa(i))))
	}
	i, err := standInOf(f, sheet)
	if err != nil || i < 0 || i >= len(names) {
		return nil, &block.Error{Problem: fmt.Sprintf("the sheet %q cannot be read", sheet), Advice: "is it a sheet of cells?"}
	}
	f.Pkg.Store(names[i], parts[names[i]])
	return parts[names[i]], nil
}

// standInOf gives the number in the only cell of a stand-in.
func standInOf(f *excelize.File, sheet string) (int, error) {
	rows, err := f.Rows(sheet)
	if err != nil {
		return -1, err
	}
	defer rows.Close()
	if !rows.Next() {
		return -1, io.EOF
	}
	cells, err := rows.Columns(excelize.Options{RawCellValue: true})
	if err != nil || len(cells) != 1 {
		return -1, io.EOF
	}
	return strconv.Atoi(cells[0])
}

func standIn(text string) string {
	return `<worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><sheetData><row r="1"><c r="A1" t="str"><v>` + text + `</v></c></row></sheetData></worksheet>`
}

// sharedStrings counts the shared texts.
func sharedStrings(f *excelize.File) (int, error) {
	part, ok := f.Pkg.Load(stringsPart)
	data, isBytes := part.([]byte)
	if !ok || !isBytes {
		return 0, nil
	}
	count, elements := 0, 0
	d := xml.NewDecoder(bytes.NewReader(data))
	for {
		token, err := d.RawToken()
		if err == io.EOF {
			return count, nil
		}
		if err != nil {
			return 0, &block.Error{Problem: "the workbook's texts cannot be read", Advice: "save it as .xlsx again"}
		}
		start, ok := token.(xml.StartElement)
		if !ok {
			continue
		}
		if elements++; start.Name.Local == "si" {
			count++
		}
		if count > stringsMax || elements > elementsMax {
			return 0, tooMuch("its cells share more than %d texts, which is the limit", stringsMax)
		}
	}
}
