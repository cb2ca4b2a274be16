package resultfile

import (
	"bytes"
	"fmt"
	"strings"
)

// sampleRecordsMax bounds the records looked at to find separator and value column.
const sampleRecordsMax = 1000

var delimiterNames = map[byte]string{',': "comma", ';': "semicolon", '\t': "tab"}

// ParseDelimiter reads the name of a separator: comma, semicolon or tab. An empty name asks for detection.
func ParseDelimiter(name string) (byte, error) {
	if name == "" {
		return 0, nil
	}
	for d, n := range delimiterNames {
		if n == name {
			return d, nil
		}
	}
	return 0, fmt.Errorf("delimiter %q: want comma, semicolon or tab", name)
}

// ParseDecimal reads the name of a decimal: point or comma. An empty name asks for detection.
func ParseDecimal(name string) (byte, error) {
	switch name {
	case "":
		return 0, nil
	case "point":
		return '.', nil
	case "comma":
		return ',', nil
	}
	return 0, fmt.Errorf("decimal %q: want point or comma", name)
}

func (o Options) checkDialect() error {
	if _, ok := delimiterNames[o.Delimiter]; !ok && o.Delimiter != 0 {
		return &Error{Problem: fmt.Sprintf("delimiter %q is not known", o.Delimiter), Advice: "say --delimiter comma, semicolon or tab"}
	}
	if o.Decimal != 0 && o.Decimal != '.' && o.Decimal != ',' {
		return &Error{Problem: fmt.Sprintf("decimal %q is not known", o.Decimal), Advice: "say --decimal point or --decimal comma"}
	}
	return nil
}

// foreign are the beginnings of files that are often given for a text file.
var foreign = []struct{ start, what, advice string }{
	{"\xff\xfe\x00\x00", "UTF-32 text", adviceText},
	{"\x00\x00\xfe\xff", "UTF-32 text", adviceText},
	{"\xff\xfe", "UTF-16 text", adviceText},
	{"\xfe\xff", "UTF-16 text", adviceText},
	{"PK\x03\x04", "a zip archive, as spreadsheet workbooks are", "save the sheet as CSV in UTF-8"},
	{"\xd0\xcf\x11\xe0", "an old spreadsheet workbook or another binary document", "save the sheet as CSV in UTF-8"},
	{"%PDF-", "a PDF document", "export the results as CSV in UTF-8"},
	{"\x1f\x8b", "a compressed file", "decompress it first"},
}

const adviceEmpty = "give a file with a header line and at least one result"

const byteOrderMark = "\xef\xbb\xbf"

// checkText refuses what is no UTF-8 text and steps over a byte order mark.
func (s *scanner) checkText() error {
	head := s.buf[s.pos:s.end]
	if len(head) == 0 {
		return &Error{Problem: "the file is empty", Advice: adviceEmpty}
	}
	for _, f := range foreign {
		if bytes.HasPrefix(head, []byte(f.start)) {
			return &Error{Problem: "the file is " + f.what, Advice: f.advice}
		}
	}
	if bytes.HasPrefix(head, []byte(byteOrderMark)) {
		s.pos += len(byteOrderMark)
		s.taken += int64(len(byteOrderMark))
		head = s.buf[s.pos:s.end]
	}
	if at := bytes.IndexByte(head, 0); at >= 0 && at < 4 && (at+2 >= len(head) || head[at+2] == 0) {
		return &Error{Line: 1, Problem: "the file looks like UTF-16 text", Advice: adviceText}
	}
	if bytes.IndexByte(head, '\r') >= 0 && bytes.IndexByte(head, '\n') < 0 && len(bytes.TrimRight(head, "\r")) > bytes.IndexByte(head, '\r') {
		return &Error{Line: 1, Problem: "lines end in a carriage return alone", Advice: "end lines with LF or CRLF"}
	}
	return nil
}

// skipBlank steps over blank lines before the header.
func (s *scanner) skipBlank() error {
	for {
		head := s.buf[s.pos:s.end]
		at := bytes.IndexByte(head, '\n') + 1
		if at == 0 && s.eof {
			at = len(head)
		}
		if len(bytes.TrimSpace(head[:at])) > 0 || at == 0 && len(head) > 0 {
			return nil
		}
		s.pos += at
		s.taken += int64(at)
		s.line++
		if s.pos < s.end {
			continue
		}
		if s.eof {
			return &Error{Problem: "the file holds nothing but blank lines", Advice: adviceEmpty}
		}
		if err := s.fill(); err != nil {
			return err
		}
	}
}

// sample gives the first whole records of the buffer under a separator, the header first. It stops at the first record
// that cannot be cut, and gives the error beside the records before it.
func (s *scanner) sample(delimiter byte) (seen opening) {
	seen.delimiter = delimiter
	text := s.buf[s.pos:s.end]
	probe := &scanner{buf: text, end: len(text), eof: s.eof, bounds: s.bounds, class: s.class, line: s.line}
	probe.bounds.columns = len(text) // too many columns are still columns
	probe.separate(delimiter)
	for len(seen.records) < sampleRecordsMax {
		var used, lines int
		used, lines, seen.stopped = probe.cut()
		if seen.stopped != nil || used == 0 {
			break
		}
		probe.pos += used
		probe.line += lines
		if probe.blank() && delimiter != 0 {
			continue
		}
		record := make([]string, len(probe.fields))
		for i, f := range probe.fields {
			record[i] = strings.TrimSpace(string(f))
		}
		seen.records = append(seen.records, record)
	}
	switch n := len(seen.records); {
	case n > 0:
		seen.recordBytes = max(int64(probe.pos/n), 1)
	case seen.stopped == nil:
		seen.stopped = s.tooLong(s.quoteOpen())
	}
	return seen
}

// blank reports whether the record is an empty line.
func (s *scanner) blank() bool {
	return len(s.fields) == 1 && !s.quoted && len(bytes.TrimSpace(s.fields[0])) == 0
}

// detect finds the separator: the one kind that occurs in the header outside quotes, or the only one of several under
// which all sampled records have as many fields as the header. It gives 0 for a file of one column.
func (s *scanner) detect() (byte, error) {
	var fitting, present []byte
	for _, d := range []byte{',', ';', '\t'} {
		records := s.sample(d).records
		if len(records) == 0 || len(records[0]) == 1 {
			continue // under the wrong separator, quotes stand in the wrong places
		}
		present = append(present, d)
		if even(records) {
			fitting = append(fitting, d)
		}
	}
	switch {
	case len(present) == 0:
		return 0, nil
	case len(present) == 1:
		return present[0], nil
	case len(fitting) == 1:
		return fitting[0], nil
	}
	names := make([]string, len(present))
	for i, d := range present {
		names[i] = delimiterNames[d]
	}
	return 0, &Error{Line: s.line, Problem: "the header holds more than one of the separators: " + strings.Join(names, ", "),
		Advice: "say --delimiter " + strings.Join(names, " or --delimiter ")}
}

func even(records [][]string) bool {
	for _, r := range records {
		if len(r) != len(records[0]) {
			return false
		}
	}
	return true
}

// opening is what the start of a file shows.
type opening struct {
	delimiter byte
	records   [][]string // the header and the rows after it
	stopped   error      // why no more rows are seen, where that is a fault of the file
	// recordBytes is the mean length of the records seen.
	recordBytes int64
}

// begin reads the start of the file and settles its separator.
func (s *scanner) begin(o Options) (opening, error) {
	if err := s.fill(); err != nil {
		return opening{}, err
	}
	if err := s.checkText(); err != nil {
		return opening{}, err
	}
	if err := s.skipBlank(); err != nil {
		return opening{}, err
	}
	delimiter := o.Delimiter
	if delimiter == 0 {
		var err error
		if delimiter, err = s.detect(); err != nil {
			return opening{}, err
		}
	}
	start := s.sample(delimiter)
	if len(start.records) > 0 && len(start.records[0]) == 1 {
		start = s.sample(0) // one column: nothing separates
	}
	if len(start.records) == 0 {
		return opening{}, start.stopped
	}
	s.separate(start.delimiter)
	return start, nil
}
