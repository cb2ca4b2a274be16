package resultfile

import "io"

// ReadLimited is Read with lower limits: rows, readings and the bytes of a text column.
func ReadLimited(r io.Reader, o Options, rows, readings, textBytes int) (*Table, error) {
	b := standard
	b.rows, b.readings, b.textBytes = rows, readings, textBytes
	return read(r, o, b)
}

// ReadSmall is Read with a buffer so small that nearly every record crosses its end.
func ReadSmall(r io.Reader, o Options, recordBytes int) (*Table, error) {
	b := standard
	b.recordBytes = recordBytes
	return read(r, o, b)
}
