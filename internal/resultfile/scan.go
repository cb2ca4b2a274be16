package resultfile

import (
	"bytes"
	"fmt"
	"io"
)

// bounds holds the limits of a file; tests lower them.
type bounds struct{ rows, columns, fieldBytes, recordBytes, readings, textBytes int }

var standard = bounds{RowsMax, ColumnsMax, FieldBytesMax, RecordBytesMax, ReadingsMax, TextBytesMax}

// Classes of bytes that end the quick run through a field.
const (
	plain uint8 = iota
	separator
	newline
	quote
	carriage
	nul
)

// scanner cuts a file into records and fields. Fields are valid until the next call.
type scanner struct {
	src      io.Reader
	buf      []byte
	pos, end int
	eof      bool
	bounds   bounds
	class    [256]uint8

	line    int   // of the record to come, from 1
	taken   int64 // bytes of the records cut so far
	fields  [][]byte
	scratch []byte // text of quoted fields that hold a doubled quote

	recordLine int  // where the present record begins
	quoted     bool // whether it has quotes
}

func newScanner(src io.Reader, b bounds) *scanner {
	s := &scanner{src: src, bounds: b, line: 1}
	s.buf = make([]byte, b.recordBytes+len("\r\n")+1)
	s.class['\n'], s.class['"'], s.class['\r'], s.class[0] = newline, quote, carriage, nul
	return s
}

// separate sets the separator; 0 means that the file has one column.
func (s *scanner) separate(delimiter byte) {
	if delimiter != 0 {
		s.class[delimiter] = separator
	}
}

// fill reads until the buffer is full or the file ends.
func (s *scanner) fill() error {
	if s.pos > 0 {
		s.end = copy(s.buf, s.buf[s.pos:s.end])
		s.pos = 0
	}
	idle := 0
	for s.end < len(s.buf) && !s.eof {
		n, err := s.src.Read(s.buf[s.end:])
		s.end += n
		switch {
		case err == io.EOF:
			s.eof = true
		case err != nil:
			return fmt.Errorf("reading on after line %d: %w", s.line, err)
		case n == 0:
			if idle++; idle == 100 {
				return fmt.Errorf("reading on after line %d: %w", s.line, io.ErrNoProgress)
			}
		default:
			idle = 0
		}
	}
	return nil
}

// next cuts the next record into s.fields; false at the end of the file. An empty line gives one empty field.
func (s *scanner) next() (bool, error) {
	s.recordLine = s.line
	for {
		used, lines, err := s.cut()
		if err != nil {
			return false, err
		}
		if used > 0 {
			s.pos += used
			s.line += lines
			s.taken += int64(used)
			return true, nil
		}
		if s.eof {
			return false, nil
		}
		if s.pos == 0 && s.end == len(s.buf) {
			return false, s.tooLong(s.quoteOpen())
		}
		if err := s.fill(); err != nil {
			return false, err
		}
	}
}

// cut cuts one record from the buffer and gives its bytes and lines; 0 bytes where the buffer holds none in full.
func (s *scanner) cut() (used, lines int, err error) {
	buf := s.buf[s.pos:s.end]
	s.fields, s.quoted = s.fields[:0], false
	start := 0
	for i, c := range buf {
		switch s.class[c] {
		case plain:
		case separator:
			s.fields = append(s.fields, buf[start:i])
			start = i + 1
		case newline:
			s.fields = append(s.fields, buf[start:i])
			return i + 1, 1, s.check(i)
		case carriage:
			if i+1 == len(buf) {
				if !s.eof {
					return 0, 0, nil
				}
			} else if buf[i+1] != '\n' {
				return 0, 0, s.fail(s.line, "has a carriage return within the line", "end lines with LF or CRLF")
			}
			s.fields = append(s.fields, buf[start:i])
			return min(i+2, len(buf)), 1, s.check(i)
		case quote:
			if i > start {
				return 0, 0, s.strayQuote(s.line)
			}
			return s.cutQuoted(buf)
		case nul:
			return 0, 0, s.fail(s.line, "has a NUL byte, so this is not a text file", adviceText)
		}
	}
	if !s.eof || len(buf) == 0 {
		return 0, 0, nil
	}
	s.fields = append(s.fields, buf[start:])
	return len(buf), 1, s.check(len(buf))
}

// check holds the record against the limits; size is its bytes without the line end.
func (s *scanner) check(size int) error {
	if size > s.bounds.recordBytes {
		return s.tooLong(0)
	}
	if len(s.fields) > s.bounds.columns {
		return s.fail(s.line, fmt.Sprintf("has %d fields, the limit is %d", len(s.fields), s.bounds.columns), "")
	}
	if size > s.bounds.fieldBytes {
		for i, f := range s.fields {
			if len(f) > s.bounds.fieldBytes {
				return s.fail(s.line, fmt.Sprintf("field %d is %d bytes long, the limit is %d", i+1, len(f), s.bounds.fieldBytes), "")
			}
		}
	}
	return nil
}

// cutQuoted is cut for a record with quotes: slower, and exact about lines inside quotes.
func (s *scanner) cutQuoted(buf []byte) (used, lines int, err error) {
	s.fields, s.scratch, s.quoted = s.fields[:0], s.scratch[:0], true
	at, lines := 0, 1
	for {
		field, next, inner, err := s.field(buf, at, s.line+lines-1)
		if err != nil || next < 0 {
			return 0, 0, err
		}
		lines += inner
		s.fields = append(s.fields, field)
		if next < len(buf) && s.class[buf[next]] == separator {
			at = next + 1
			continue
		}
		size := next
		if next < len(buf) && buf[next] == '\r' {
			if next+1 == len(buf) && !s.eof {
				return 0, 0, nil
			}
			if next+1 < len(buf) && buf[next+1] != '\n' {
				return 0, 0, s.fail(s.line+lines-1, "has a carriage return within the line", "end lines with LF or CRLF")
			}
			next++
		}
		return min(next+1, len(buf)), lines, s.check(size)
	}
}

// field cuts the field that begins at buf[at]. It gives the position after it and the line ends inside it; next is
// negative where the buffer ends first.
func (s *scanner) field(buf []byte, at, line int) (field []byte, next, inner int, err error) {
	if at == len(buf) || buf[at] != '"' {
		for i := at; i < len(buf); i++ {
			switch s.class[buf[i]] {
			case separator, newline, carriage:
				return buf[at:i], i, 0, nil
			case quote:
				return nil, 0, 0, s.strayQuote(line)
			case nul:
				return nil, 0, 0, s.fail(line, "has a NUL byte, so this is not a text file", adviceText)
			}
		}
		if s.eof {
			return buf[at:], len(buf), 0, nil
		}
		return nil, -1, 0, nil
	}
	return s.quotedField(buf, at+1, line)
}

func (s *scanner) quotedField(buf []byte, at, line int) (field []byte, next, inner int, err error) {
	start, doubled := at, false
	kept := len(s.scratch)
	for {
		i := bytes.IndexByte(buf[at:], '"')
		if i < 0 {
			if s.eof {
				return nil, 0, 0, s.fail(line, "a quote is opened and never closed", adviceQuote)
			}
			return nil, -1, 0, nil
		}
		at += i + 1
		if at == len(buf) && !s.eof {
			return nil, -1, 0, nil
		}
		if at < len(buf) && buf[at] == '"' {
			s.scratch = append(s.scratch, buf[start:at]...)
			at++
			start, doubled = at, true
			continue
		}
		field = buf[start : at-1]
		break
	}
	if doubled {
		s.scratch = append(s.scratch, field...)
		field = s.scratch[kept:]
	}
	if bytes.IndexByte(field, 0) >= 0 {
		return nil, 0, 0, s.fail(line, "has a NUL byte, so this is not a text file", adviceText)
	}
	inner = bytes.Count(field, []byte{'\n'})
	if at < len(buf) {
		switch s.class[buf[at]] {
		case separator, newline, carriage:
		default:
			return nil, 0, 0, s.fail(line+inner, "text follows a closing quote", adviceQuote)
		}
	}
	return field, at, inner, nil
}

const (
	adviceText  = "save it as CSV in UTF-8"
	adviceQuote = "put quotes around the whole field, and write a quote inside it twice"
)

func (s *scanner) fail(line int, problem, advice string) error {
	return &Error{Line: line, Problem: problem, Advice: advice}
}

func (s *scanner) strayQuote(line int) error {
	return s.fail(line, "a quote stands inside a field without quotes", adviceQuote)
}

// tooLong reports a record over the limit; open is the line of a quote still open, or 0.
func (s *scanner) tooLong(open int) error {
	if open > 0 {
		return s.fail(open, fmt.Sprintf("a quote is opened and not closed within %d bytes", s.bounds.recordBytes), adviceQuote)
	}
	return s.fail(s.line, fmt.Sprintf("is longer than %d bytes, the limit of a line", s.bounds.recordBytes), "")
}

// quoteOpen gives the line of the quote that is open at the end of the buffer, or 0.
func (s *scanner) quoteOpen() int {
	line, open := s.line, 0
	for _, c := range s.buf[s.pos:s.end] {
		switch {
		case c == '\n':
			line++
		case c == '"' && open == 0:
			open = line
		case c == '"':
			open = 0
		}
	}
	return open
}
