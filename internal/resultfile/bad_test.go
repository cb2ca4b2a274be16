package resultfile_test

import (
	"bufio"
	"errors"
	"io"
	"strings"
	"testing"

	"limitary/internal/resultfile"
)

// Each row is a file that must be refused, with the whole message.
func TestBadFilesAreRefused(t *testing.T) {
	type options = resultfile.Options
	tests := []struct {
		name, text string
		o          options
		want       string
	}{
		{"empty", "", options{}, `the file is empty; give a file with a header line and at least one result`},
		{"only a byte order mark", "\uFEFF", options{}, `the file holds nothing but blank lines; give a file with a header line and at least one result`},
		{"blank lines only", "\n \r\n", options{}, `the file holds nothing but blank lines; give a file with a header line and at least one result`},
		{"header only", "when,v\n", options{Values: []string{"v"}}, `the file has a header and no results; give at least one row below the header`},
		{"nothing inspected", "n,v\n0,1\n", options{Values: []string{"v"}, Inspected: "n"}, `line 2, column "n", value "0": is not more than zero, so nothing was inspected; leave both fields empty where there is no result`},
		{"inspected is a bound", "n,v\n>9,1\n", options{Values: []string{"v"}, Inspected: "n"}, `line 2, column "n", value ">9": is only a bound, and what was inspected is known; write how much was inspected`},
		{"inspected is missing", "n,v\n5,1\n,1\n", options{Values: []string{"v"}, Inspected: "n"}, `line 3, column "n": is empty, so it is not known how much was inspected for the count; fill it in, or leave out the count as well`},
		{"inspected with another decimal", "n;v\n0,5;1\n0.5;1\n", options{Values: []string{"v"}, Inspected: "n"}, `line 3, column "n", value "0.5": has a point, but line 2 has "0,5" with a comma; write all values with the same decimal and without thousands separators`},
		{"inspected beside subgroups", "g,n,v\n1,5,1\n", options{Values: []string{"v"}, Inspected: "n", Subgroup: "g"}, `line 1, column "n": says how much was inspected, and counts make no subgroups; leave out --subgroup`},
		{"inspected beside several values", "n,v,w\n5,1,1\n", options{Values: []string{"v", "w"}, Inspected: "n"}, `line 1, column "n": says how much was inspected, and 2 value columns are chosen; choose one column of counts with --value`},
		{"inspected is the value as well", "n,v\n5,1\n", options{Values: []string{"n"}, Inspected: "n"}, `line 1, column "n": is chosen as the value column and for something else; choose another column for one of the two`},
		{"inspected is the material as well", "n,v\n5,1\n", options{Values: []string{"v"}, Inspected: "n", Material: "n"}, `line 1, column "n": is chosen for what was inspected and for something else; choose another column for one of the two`},
		{"a subgroup of two materials", "g,m,v\n1,low,1\n1,high,2\n", options{Values: []string{"v"}, Subgroup: "g", Material: "m"}, `line 3, column "m", value "high": subgroup "1" is of "low" in line 2, and a subgroup is of one material; write the same material in all its rows, or give the subgroups different names`},
		{"no such material column", "mat,v\n1,2\n", options{Values: []string{"v"}, Material: "nat"}, `line 1, column "nat": no column has this name; there are "mat", "v"; did you mean --material "mat"?`},
		{"header only, nothing chosen", "v", options{}, `the file has a header and no results; give at least one row below the header`},
		{"no header", "10.2\n10.3\n", options{}, `line 1, value "10.2": the first line must name the columns, and a number is no name; put a header line before the results, or rename the column (x1 for 1)`},
		{"no header beside a text", "S-1,5\nS-2,6\n", options{}, `line 1, value "5": the first line must name the columns, and a number is no name; put a header line before the results, or rename the column (x1 for 1)`},
		{"same name twice", "v,w,v\n1,2,3\n", options{}, `line 1, column "v": columns 1 and 3 have the same name; rename one of them`},
		{"UTF-16 with a mark", "\xff\xfev\x00\n\x00", options{}, `the file is UTF-16 text; save it as CSV in UTF-8`},
		{"UTF-16 without a mark", "v\x00a\x00\n\x001\x00\n\x00", options{}, `line 1: the file looks like UTF-16 text; save it as CSV in UTF-8`},
		{"workbook", "PK\x03\x04\x14\x00", options{}, `the file is a zip archive, as spreadsheet workbooks are; save the sheet as CSV in UTF-8`},
		{"compressed", "\x1f\x8b\x08\x00", options{}, `the file is a compressed file; decompress it first`},
		{"NUL byte", "id,v\na,1\nb,\x00\n", options{}, `line 3: has a NUL byte, so this is not a text file; save it as CSV in UTF-8`},
		{"NUL byte in quotes", "id,v\na,1\n\"b\x00\",1\n", options{}, `line 3: has a NUL byte, so this is not a text file; save it as CSV in UTF-8`},
		{"name in another encoding", "id,tr\xfcb\na,1\n", options{}, "line 1, column \"column 2\", value \"tr\uFFFDb\": the column name is not UTF-8 text; save it as CSV in UTF-8"},
		{"text in another encoding", "id,v\na,1\n\xfc,2\n", options{ID: "id"}, "line 3, column \"id\", value \"\uFFFD\": is not UTF-8 text; save it as CSV in UTF-8"},
		{"carriage returns alone", "v\r1\r2\r", options{}, `line 1: lines end in a carriage return alone; end lines with LF or CRLF`},
		{"carriage return within a line", "id,v\na\rb,1\n", options{}, `line 2: has a carriage return within the line; end lines with LF or CRLF`},
		{"too few fields", "id,v\na,1\nb\n", options{}, `line 3: has 1 fields, the header has 2; the columns are taken to be separated by commas; give every row as many fields as the header`},
		{"decimal commas among comma separators", "id,v\na,1\nb,1,5\n", options{}, `line 3: has 3 fields, the header has 2; where the comma is the decimal, separate the columns with semicolons or put quotes around the values`},
		{"too many fields", "id;v\na;1;2\n", options{}, `line 2: has 3 fields, the header has 2; the columns are taken to be separated by semicolons; give every row as many fields as the header`},
		{"two separators fit", "id;nitrate, mg/l\na;1,5\n", options{}, `line 1: the header holds more than one of the separators: comma, semicolon; say --delimiter comma or --delimiter semicolon`},
		{"quote inside a field", "id,v\n5\" pipe,1\n", options{}, `line 2: a quote stands inside a field without quotes; put quotes around the whole field, and write a quote inside it twice`},
		{"quote never closed", "id,v\na,1\n\"b,1\nc,1\n", options{}, `line 3: a quote is opened and never closed; put quotes around the whole field, and write a quote inside it twice`},
		{"text after a quote", "id,v\n\"a\nb\"c,1\n", options{}, `line 3: text follows a closing quote; put quotes around the whole field, and write a quote inside it twice`},

		{"NaN", "id,v\na,1\nb,NaN\n", options{}, `line 3, column "v", value "NaN": is not a number; leave the field empty where there is no result`},
		{"word", "id,v\na,1\nb,not done\n", options{}, `line 3, column "v", value "not done": is not a number; leave the field empty where there is no result`},
		{"after a quoted line end the line still counts", "id,v\n\"a\nb\",1\nc,-\n", options{}, `line 4, column "v", value "-": is not a number; leave the field empty where there is no result`},
		{"unit", "id,v\na,1\nb,1 mg\n", options{}, `line 3, column "v", value "1 mg": is not a number; write digits with a point for the decimal, and < or > before a bound`},
		{"date", "id,v\na,1\nb,1.2.3\n", options{}, `line 3, column "v", value "1.2.3": is not a number; write digits with one decimal, and < or > before a bound`},
		{"too many digits", "v\n1.234567890123456789\n", options{}, `line 2, column "v", value "1.234567890123456789": 19 significant digits, the limit is 17`},
		{"too large", "v\n1e399\n", options{}, `line 2, column "v", value "1e399": is larger than 1.8e+308, the largest value that can be held`},

		{"comma before three digits in quotes", "id,v\na,\"1,234\"\nb,\"2,345\"\n", options{}, `line 2, column "v", value "1,234": can be 1.234 or 1234, and no other value tells which; say --decimal comma if it is 1.234; if it is 1234, write the values without thousands separators`},
		{"comma before three digits", "id;v\na;12\nb;1,234\n", options{}, `line 3, column "v", value "1,234": can be 1.234 or 1234, and no other value tells which; say --decimal comma if it is 1.234; if it is 1234, write the values without thousands separators`},
		{"point before three digits among semicolons", "id;v\na;1.234\n", options{}, `line 2, column "v", value "1.234": can be 1.234 or 1234, and no other value tells which; say --decimal point if it is 1.234; if it is 1234, write the values without thousands separators`},
		{"bound with a comma before three digits", "id;v\na;<1,234\n", options{}, `line 2, column "v", value "<1,234": can be <1.234 or <1234, and no other value tells which; say --decimal comma if it is <1.234; if it is <1234, write the values without thousands separators`},
		{"comma and point mixed", "id;v\na;1,5\nb;1.5\n", options{}, `line 3, column "v", value "1.5": has a point, but line 2 has "1,5" with a comma; write all values with the same decimal and without thousands separators`},
		{"thousands comma before a decimal point", "id;v\na;1,234\nb;1.5\n", options{}, `line 3, column "v", value "1.5": has a point, but line 2 has "1,234" with a comma; write all values with the same decimal and without thousands separators`},
		{"comma against --decimal point", "id;v\na;1,5\n", options{Decimal: '.'}, `line 2, column "v", value "1,5": has a comma, and the decimal is said to be a point; write it with a point and without thousands separators, or say --decimal comma`},
		{"point against --decimal comma", "id;v\na;1.5\n", options{Decimal: ','}, `line 2, column "v", value "1.5": has a point, and the decimal is said to be a comma; write it with a comma and without thousands separators, or say --decimal point`},
		{"comma and point in one value", "id;v\na;1.234,5\n", options{}, `line 2, column "v", value "1.234,5": has a thousands separator; write the number without it`},
		{"two commas in one value", "id;v\na;1,234,567\n", options{}, `line 2, column "v", value "1,234,567": has a thousands separator; write the number without it`},

		{"several columns of numbers", "experiment,run,speed\n1,1,850\n1,2,740\n", options{}, `line 1: 3 columns hold numbers: "experiment", "run", "speed"; choose the value column with --value NAME, once for each where a row holds several readings`},
		{"no column of numbers", "a,b\nx,y\n", options{}, `line 1: no column holds numbers; there are "a", "b"; choose the value column with --value NAME`},
		{"unknown column, near another", "when,nitrate\na,1\n", options{Values: []string{"nitrat"}}, `line 1, column "nitrat": no column has this name; there are "when", "nitrate"; did you mean --value "nitrate"?`},
		{"unknown column, near none", "when,nitrate\na,1\n", options{Time: "zinc"}, `line 1, column "zinc": no column has this name; there are "when", "nitrate"; choose one of them with --time`},
		{"same column chosen twice", "w,v\na,1\n", options{Values: []string{"v", "v"}}, `line 1, column "v": is chosen twice as a value column; name each value column once`},
		{"value column with another role", "w,v\na,1\n", options{Values: []string{"v"}, ID: "v"}, `line 1, column "v": is chosen as the value column and for something else; choose another column for one of the two`},
		{"subgroup column beside several value columns", "s,x,y\na,1,2\n", options{Values: []string{"x", "y"}, Subgroup: "s"}, `line 1, column "s": a subgroup column groups rows of one reading, and 2 value columns are chosen; choose one value column with --subgroup, or several without it`},
		{"break and exclusion in one column", "s,x\na,1\n", options{Break: "s", Exclude: "s"}, `line 1, column "s": is chosen for breaks and for exclusions; choose another column for one of the two`},

		{"subgroup that comes back", "s,v\na,1\nb,2\na,3\n", options{Subgroup: "s"}, `line 4, column "s", value "a": the subgroup that began in line 2 comes back after another one; put its rows together, or give different subgroups different names`},
		{"row without a subgroup", "s,v\na,1\n,2\n", options{Subgroup: "s"}, `line 3, column "s": is empty, so the row belongs to no subgroup; name the subgroup in every row`},
		{"reason in part of a subgroup", "s,v,e\na,1,\na,2,spilt\n", options{Subgroup: "s", Exclude: "e", Values: []string{"v"}}, `line 3, column "e", value "spilt": subgroup "a" has "" in line 2, and only a whole subgroup can be excluded; write the same reason in all its rows, or in none; leave the reading empty to leave out one reading`},
		{"break inside a subgroup", "s,v,b\na,1,\na,2,yes\n", options{Subgroup: "s", Break: "b", Values: []string{"v"}}, `line 3, column "b": a segment cannot begin inside subgroup "a"; mark the first row of the subgroup`},
		{"break that says neither", "v,b\n1,maybe\n", options{Break: "b"}, `line 2, column "b", value "maybe": does not say whether a segment begins here; write yes (or 1, true, x) or no (or 0, false, nothing)`},
		{"exclusion without a reason", "v,e\n1,yes\n", options{Exclude: "e"}, `line 2, column "e", value "yes": is no reason for an exclusion; write why the result is left out, or leave the field empty`},
		{"unknown separator", "v\n1\n", options{Delimiter: '|'}, `delimiter '|' is not known; say --delimiter comma, semicolon or tab`},
		{"unknown decimal", "v\n1\n", options{Decimal: ' '}, `decimal ' ' is not known; say --decimal point or --decimal comma`},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			table, err := resultfile.Read(strings.NewReader(test.text), test.o)
			var bad *resultfile.Error
			if !errors.As(err, &bad) || table != nil {
				t.Fatalf("got %v, %v; want an *Error", table, err)
			}
			if got := bad.Error(); got != test.want {
				t.Errorf("got  %s\nwant %s", got, test.want)
			}
		})
	}
}

func TestLimitsHoldAtNAndNotBeyond(t *testing.T) {
	wide := func(n int) string {
		names := make([]string, n)
		for i := range names {
			names[i] = "c" + strings.Repeat("x", i)
		}
		return strings.Join(names, ",") + "\n1" + strings.Repeat(",", n-1) + "\n"
	}
	sized := func(record int) string { // many fields, each below its own limit
		field := strings.Repeat("a", 9_999) + ","
		text := "v" + strings.Repeat(",", 200) + "\n1," + strings.Repeat(field, record/10_000)
		head := strings.Index(text, "\n") + 1
		text += strings.Repeat("b", record-(len(text)-head)-(200-strings.Count(text[head:], ",")))
		return text + strings.Repeat(",", 200-strings.Count(text[head:], ",")) + "\r\n1" + strings.Repeat(",", 200) + "\n"
	}
	first := resultfile.Options{Values: []string{"v"}}
	tests := []struct {
		name string
		text func(n int) string
		o    resultfile.Options
		n    int
		want string
	}{
		{"columns", wide, resultfile.Options{Values: []string{"c"}}, resultfile.ColumnsMax, "line 1: has 1001 fields, the limit is 1000"},
		{"record", sized, first, resultfile.RecordBytesMax, "line 2: is longer than 1048576 bytes, the limit of a line"},
		{"field", func(n int) string { return "id,v\n" + strings.Repeat("a", n) + ",1\n" }, first, resultfile.FieldBytesMax,
			"line 2: field 1 is 32769 bytes long, the limit is 32768"},
		{"quoted field", func(n int) string { return "id,v\n\"" + strings.Repeat("a", n) + "\",1\n" }, first, resultfile.FieldBytesMax,
			"line 2: field 1 is 32769 bytes long, the limit is 32768"},
		{"readings of a subgroup", func(n int) string { return "s,v\n" + strings.Repeat("a,1\n", n) }, resultfile.Options{Values: []string{"v"}, Subgroup: "s"}, 100,
			`line 102, column "s", value "a": the subgroup has more than 100 readings, the limit; choose a column that tells the subgroups apart`},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			if _, err := resultfile.Read(strings.NewReader(test.text(test.n)), test.o); err != nil {
				t.Errorf("at the limit: %v", err)
			}
			_, err := resultfile.Read(strings.NewReader(test.text(test.n+1)), test.o)
			if err == nil || err.Error() != test.want {
				t.Errorf("beyond the limit: got %v, want %s", err, test.want)
			}
		})
	}
}

// repeated gives a header and then n times the row "1".
type repeated struct{ n int }

func (r *repeated) Read(p []byte) (int, error) {
	if r.n == 0 {
		return 0, io.EOF
	}
	k := min(len(p)/2, r.n)
	for i := range k {
		p[2*i], p[2*i+1] = '1', '\n'
	}
	r.n -= k
	return 2 * k, nil
}

func TestTenMillionRowsAreReadAndOneMoreIsNot(t *testing.T) {
	file := func(n int) io.Reader {
		return bufio.NewReaderSize(io.MultiReader(strings.NewReader("v\n"), &repeated{n}), 1<<16)
	}
	table, err := resultfile.Read(file(resultfile.RowsMax), resultfile.Options{})
	if err != nil || table.Len() != 10_000_000 {
		t.Errorf("at the limit: %v", err)
	}
	want := "line 10000002: the file has more than 10000000 rows, the limit; split the file"
	if _, err := resultfile.Read(file(resultfile.RowsMax+1), resultfile.Options{}); err == nil || err.Error() != want {
		t.Errorf("beyond the limit: got %v, want %s", err, want)
	}
}

// The limits on rows, readings and texts are lowered, to keep the files small.
func TestLimitsOfTheWholeFile(t *testing.T) {
	o := resultfile.Options{Values: []string{"x", "y"}, ID: "i"}
	text := "i,x,y\nab,1,2\ncd,3,4\n"
	tests := []struct {
		name                      string
		rows, readings, textBytes int
		want                      string
	}{
		{"all at the limit", 2, 4, 4, ""},
		{"a row more", 1, 4, 4, "line 3: the file has more than 1 rows, the limit; split the file"},
		{"a reading more", 2, 3, 4, `line 3, column "y": the file has more than 3 readings, the limit; split the file`},
		{"a byte more", 2, 4, 3, `line 3, column "i": the texts of the column so far are longer than 3 bytes, the limit; split the file`},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			got := ""
			if _, err := resultfile.ReadLimited(strings.NewReader(text), o, test.rows, test.readings, test.textBytes); err != nil {
				got = err.Error()
			}
			if got != test.want {
				t.Errorf("got %q, want %q", got, test.want)
			}
		})
	}
}

func TestAQuoteOpenPastTheLimitIsNamedByItsLine(t *testing.T) {
	text := "id,v\na,1\n\"b,1\n" + strings.Repeat("c,1\n", resultfile.RecordBytesMax/4)
	_, err := resultfile.Read(strings.NewReader(text), resultfile.Options{})
	want := "line 3: a quote is opened and not closed within 1048576 bytes; put quotes around the whole field, and write a quote inside it twice"
	if err == nil || err.Error() != want {
		t.Errorf("got %v, want %s", err, want)
	}
}
