package block

import (
	"fmt"
	"strings"
	"unicode/utf8"
)

const byteOrderMark = "\xef\xbb\xbf"

// Read reads a block.
func Read(text []byte, o Options) (*Block, error) {
	b := &Block{HasHeader: !o.NoHeader}
	s, err := b.open(text)
	if err != nil {
		return nil, err
	}
	if b.Dialect.Delimiter = o.Delimiter; o.Delimiter == 0 {
		if b.Dialect.Delimiter, err = detect(s, o); err != nil {
			return nil, err
		}
	}
	records, err := cut(s, b.Dialect.Delimiter)
	if err != nil {
		return nil, err
	}
	b.Dialect.Decimal = o.Decimal
	return b, b.take(records)
}

// open checks what can be seen without knowing the separator, and takes off the byte order mark and blank lines around.
func (b *Block) open(text []byte) (string, error) {
	if len(text) > BytesMax {
		return "", &Error{Problem: fmt.Sprintf("the block has %d bytes, the limit is %d", len(text), BytesMax), Advice: "send it in parts"}
	}
	s := string(text)
	if s, b.Dialect.BOM = strings.CutPrefix(s, byteOrderMark); strings.HasPrefix(s, "\xff\xfe") || strings.HasPrefix(s, "\xfe\xff") || strings.ContainsRune(s, 0) {
		return "", &Error{Problem: "the block is UTF-16 or no text", Advice: "send it as UTF-8"}
	}
	if at := invalidUTF8(s); at >= 0 {
		return "", &Error{Row: 1 + strings.Count(s[:at], "\n"), Problem: "the block is not UTF-8", Advice: "send it as UTF-8"}
	}
	b.Dialect.CRLF = strings.Contains(s, "\r\n")
	if strings.TrimSpace(s) == "" {
		return "", &Error{Problem: "the block is empty", Advice: "send a header line and at least one row"}
	}
	return s, nil
}

func invalidUTF8(s string) int {
	for i, r := range s {
		if r == utf8.RuneError {
			if _, size := utf8.DecodeRuneInString(s[i:]); size == 1 {
				return i
			}
		}
	}
	return -1
}

// take makes rows and names of the records.
func (b *Block) take(records [][]string) error {
	if b.HasHeader {
		if err := b.SetHeader(1, records[0]); err != nil {
			return err
		}
	} else {
		for i := range records[0] {
			b.Names = append(b.Names, fmt.Sprintf("column_%d", i+1))
		}
	}
	for i, cells := range records {
		if i == 0 && b.HasHeader {
			continue
		}
		row := Row{Number: i + 1, Cells: cells}
		if len(cells) != len(b.Names) {
			if !row.Blank() {
				return &Error{Row: row.Number, Problem: fmt.Sprintf("%d cells, the first row has %d", len(cells), len(b.Names)),
					Advice: "say delimiter=comma, semicolon, tab or none where the separator was not found right, and quote cells that hold it"}
			}
			row.Cells = make([]string, len(b.Names))
		}
		b.Rows = append(b.Rows, row)
	}
	if len(b.Rows) > RowsMax {
		return &Error{Problem: fmt.Sprintf("%d rows, the limit is %d", len(b.Rows), RowsMax), Advice: "send the block in parts"}
	}
	if n := len(b.Rows) * len(b.Names); n > CellsMax {
		return &Error{Problem: fmt.Sprintf("%d cells, the limit is %d", n, CellsMax), Advice: "leave out columns that are not needed, or send the block in parts"}
	}
	return nil
}

// SetHeader takes the names of the columns from a row. A number is no name: a block without a header would lose its first row.
func (b *Block) SetHeader(row int, cells []string) error {
	if (Row{Cells: cells}).Blank() {
		return &Error{Row: row, Problem: "the first row is blank", Advice: "begin with a header line, or say header=no"}
	}
	seen := map[string]bool{}
	for i, c := range cells {
		name := strings.TrimSpace(c)
		if looksNumeric(name) {
			return &Error{Row: row, Problem: fmt.Sprintf("the header has the number %q for a name", clip(name)), Advice: "send a header line, or say header=no"}
		}
		if name == "" {
			name = fmt.Sprintf("column_%d", i+1)
		}
		if key := strings.ToLower(name); seen[key] {
			return &Error{Row: row, Column: clip(name), Problem: "the name stands twice in the header", Advice: "give each column a name of its own"}
		} else {
			seen[key] = true
		}
		b.Names = append(b.Names, name)
	}
	return nil
}
