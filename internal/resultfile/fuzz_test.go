package resultfile_test

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"testing"

	"limitary/internal/decimal"
	"limitary/internal/resultfile"
)

// naive reads the readings of the column v by another route: encoding/csv, whole records, strconv. It knows the dialect
// and neither limits nor ambiguity; it refuses what it cannot read.
func naive(text []byte, delimiter, mark byte) ([]decimal.Reading, error) {
	r := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(text, []byte("\uFEFF"))))
	r.Comma = rune(delimiter)
	records, err := r.ReadAll()
	if err != nil {
		return nil, err
	}
	if len(records) == 0 {
		return nil, io.EOF
	}
	column := -1
	for i, name := range records[0] {
		if strings.TrimSpace(name) == "v" {
			column = i
		}
	}
	if column < 0 {
		return nil, fmt.Errorf("no column v")
	}
	var all []decimal.Reading
	for _, record := range records[1:] {
		field := strings.TrimSpace(record[column])
		if field == "" {
			continue
		}
		reading := decimal.Reading{}
		switch field[0] {
		case '<':
			reading.Bound, field = decimal.Below, strings.TrimSpace(field[1:])
		case '>':
			reading.Bound, field = decimal.Above, strings.TrimSpace(field[1:])
		}
		if mark == ',' {
			field = strings.NewReplacer(",", ".", ".", "?").Replace(field)
		}
		if strings.ContainsAny(field, "xXpP_nN") {
			return nil, fmt.Errorf("not decimal: %q", field)
		}
		if reading.Value, err = strconv.ParseFloat(field, 64); err != nil {
			return nil, err
		}
		_, decimals, _ := strings.Cut(field, ".")
		if e := strings.IndexAny(field, "eE"); e >= 0 {
			power, err := strconv.Atoi(field[e+1:])
			if err != nil {
				return nil, err
			}
			decimals, _, _ = strings.Cut(strings.ToLower(decimals), "e")
			reading.Places = max(len(decimals)-power, 0)
		} else {
			reading.Places = len(decimals)
		}
		if reading.Value == 0 {
			reading.Value = 0
		}
		all = append(all, reading)
	}
	return all, nil
}

// FuzzRead holds Read against naive where both accept the file. Read may refuse more: it is the stricter.
func FuzzRead(f *testing.F) {
	for _, text := range []string{
		"id,v\na,1.5\nb,\n\nc,<0.05\n", "v;w\r\n1,5;x\r\n\"2,25\";\"a\"\"b\r\nc\"\r\n", "\uFEFFw\tv\n1\t-0\n2\t1e-3\n", "v\n1,234\n", "w,v\n\"a\",\"1.2\"",
		"v,w\n 1.0000000000000001 ,\n>123456789012345678,", "v\n1\n\n2", "a;v\n1;1.234\n1;0.5\n", "v,a\n.5,\n5.,\n+.5e+2,\n,\n",
	} {
		f.Add([]byte(text))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		table, err := resultfile.Read(bytes.NewReader(text), resultfile.Options{Values: []string{"v"}})
		small, smallErr := resultfile.ReadSmall(bytes.NewReader(text), resultfile.Options{Values: []string{"v"}}, len(text)+1)
		if (err == nil) != (smallErr == nil) {
			t.Fatalf("the size of the buffer changes the answer: %v, %v", err, smallErr)
		}
		if err != nil {
			return
		}
		if table.Len() != small.Len() || table.Bytes != int64(len(text)) {
			t.Fatalf("got %d and %d rows, %d of %d bytes", table.Len(), small.Len(), table.Bytes, len(text))
		}
		more, err := resultfile.Read(bytes.NewReader(text), resultfile.Options{Values: []string{"v"}, Material: "w"})
		for i := 0; err == nil && i < table.Len(); i++ { // refused where there is no such column, or it is not text
			if more.Len() != table.Len() || len(more.Figures(i)) != len(table.Figures(i)) {
				t.Fatalf("a column of materials changes the rows: %d and %d", more.Len(), table.Len())
			}
		}
		if table.Delimiter == 0 {
			return // encoding/csv cannot be told that nothing separates
		}
		want, err := naive(text, table.Delimiter, table.Decimal)
		if err != nil {
			t.Skip("naive refuses")
		}
		var got []decimal.Reading
		for i := range table.Len() {
			got = table.AppendReadings(got, i)
		}
		if len(got) != len(want) {
			t.Fatalf("got %d readings, want %d", len(got), len(want))
		}
		for i, g := range got {
			if math.Float64bits(g.Value) != math.Float64bits(want[i].Value) || g.Bound != want[i].Bound || g.Places != want[i].Places {
				t.Fatalf("reading %d: got %+v, want %+v", i, g, want[i])
			}
		}
	})
}

// FuzzNumber holds the quick way of reading a number against decimal.ParseReading, value by value.
func FuzzNumber(f *testing.F) {
	for _, text := range []string{"0", "-0.0", "1.5", "123456789012345", "1234567890123456", "0.000000000000000000000123", "+.5", "5.", ".", "-", "1e5", "<3", "00012.50"} {
		f.Add(text)
	}
	f.Fuzz(func(t *testing.T, text string) {
		if strings.ContainsAny(text, "\"\r\n\x00,\ufeff") || strings.TrimSpace(text) == "" {
			return
		}
		want, wantErr := decimal.ParseReading(strings.TrimSpace(text))
		table, err := resultfile.Read(strings.NewReader("w,v\n,"+text+"\n"), resultfile.Options{Values: []string{"v"}, Delimiter: ','})
		if (err == nil) != (wantErr == nil) {
			t.Fatalf("%q: got %v, want %v", text, err, wantErr)
		}
		if err != nil {
			return
		}
		if got := table.Row(0).Readings[0]; got != want || math.Signbit(got.Value) != math.Signbit(want.Value) {
			t.Fatalf("%q: got %+v, want %+v", text, got, want)
		}
	})
}
