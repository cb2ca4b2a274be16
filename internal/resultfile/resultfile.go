package resultfile

import (
	"io"
	"io/fs"
)

const (
	// RowsMax bounds the rows of a file: a result a minute for 19 years.
	RowsMax = 10_000_000
	// ColumnsMax bounds its columns.
	ColumnsMax = 1000
	// FieldBytesMax bounds one field; a spreadsheet's cell holds no more (32,767 characters, common practice).
	FieldBytesMax = 32_768
	// RecordBytesMax bounds a row without its line end, however many lines it spans.
	RecordBytesMax = 1 << 20

	// ReadingsMax and TextBytesMax bound what is kept in memory: the readings, and the texts of one chosen column.
	ReadingsMax  = 50_000_000
	TextBytesMax = 1 << 30

	// progressRows is the number of rows from one call of Progress to the next.
	progressRows = 1 << 16
)

// Options say how to read a file. The zero value finds separator, decimal and the one value column by itself.
type Options struct {
	// Delimiter is ',', ';', '\t', or 0 to find it. Decimal is '.', ',', or 0 to find it.
	Delimiter, Decimal byte
	// Values are the columns of readings; none chooses the only column that holds numbers.
	Values []string
	// Subgroup is the column whose equal texts in consecutive rows make one result of several rows.
	Subgroup string
	// ID and Time are columns whose texts are kept. Exclude holds the reason for an exclusion, or nothing. Break holds
	// yes where a segment begins, no or nothing elsewhere.
	ID, Time, Break, Exclude string
	// Material is a column whose texts are kept: the control material of each result.
	Material string
	// Inspected is the column that says how much was looked at where the value column holds counts. The file then has one
	// value column and no subgroups.
	Inspected string
	// Progress, if set, is called now and then with the rows and bytes taken in, and once at the end.
	Progress func(rows, bytes int64)
}

// Read reads a file to its end. A file or a choice that cannot stand gives an *Error; a failing r its own error, wrapped.
func Read(r io.Reader, o Options) (*Table, error) { return read(r, o, standard) }

func read(r io.Reader, o Options, b bounds) (*Table, error) {
	if err := o.checkDialect(); err != nil {
		return nil, err
	}
	s := newScanner(r, b)
	start, err := s.begin(o)
	if err != nil {
		return nil, err
	}
	if _, err := s.next(); err != nil {
		return nil, err
	}
	cols, err := choose(o, s.recordLine, start)
	if err != nil {
		return nil, err
	}
	t := &Table{Names: cols.names, Delimiter: start.delimiter}
	for _, i := range cols.values {
		t.Values = append(t.Values, cols.label(i))
	}
	if size := sizeOf(r); size > 0 {
		t.expect(min(len(cols.values)*int(size/start.recordBytes+1), readingsExpectedMax))
	}
	build := &builder{scan: s, cols: cols, progress: o.Progress, table: t,
		decimal: evidence{decimal: o.Decimal, asked: o.Decimal != 0, delimiter: start.delimiter}}
	return build.run()
}

// readingsExpectedMax bounds the room made for readings before they are seen.
const readingsExpectedMax = RowsMax

// sizeOf gives the size of a regular file, or 0 where it is not known.
func sizeOf(r io.Reader) int64 {
	f, ok := r.(interface{ Stat() (fs.FileInfo, error) })
	if !ok {
		return 0
	}
	info, err := f.Stat()
	if err != nil || !info.Mode().IsRegular() {
		return 0
	}
	return info.Size()
}
