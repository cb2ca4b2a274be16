package block_test

import (
	"fmt"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/sheet/block"
)

// rows are the same rows in every dialect: an id, a time, a reading and a text with everything that needs a quote.
var rows = [][]string{
	{"id", "time", "value", "note"},
	{"n1", "2026-03-02T09:30:00Z", "0.30", "plain"},
	{"n2", "2026-03-02T10:30:00Z", "-0.012", "a \"quote\", a ; and a\nline end"},
	{"n3", "2026-03-02T11:30:00Z", "12.5", ""},
	{"n4", "2026-03-02T12:30:00Z", "<0.05", "-not a formula"},
}

func inDialect(d block.Dialect) string {
	w := block.NewWriter(d)
	for _, r := range rows {
		out := append([]string{}, r...)
		if d.Decimal == ',' {
			out[2] = strings.Replace(out[2], ".", ",", 1)
		}
		out[3] = block.Guard(out[3])
		w.Row(out...)
	}
	return string(w.Bytes())
}

func TestAllDialectsReadTheSame(t *testing.T) {
	for _, delimiter := range []byte{block.Tab, block.Comma, block.Semicolon} {
		for _, decimal := range []byte{'.', ','} {
			for _, crlf := range []bool{false, true} {
				for _, bom := range []bool{false, true} {
					d := block.Dialect{Delimiter: delimiter, Decimal: decimal, CRLF: crlf, BOM: bom}
					t.Run(fmt.Sprintf("%q %q crlf=%t bom=%t", delimiter, decimal, crlf, bom), func(t *testing.T) {
						readsAs(t, inDialect(d), d)
					})
				}
			}
		}
	}
}

func readsAs(t *testing.T, text string, want block.Dialect) {
	t.Helper()
	b, err := block.Read([]byte(text), block.Options{})
	if err != nil {
		t.Fatal(err)
	}
	var cells []block.Cell
	for _, r := range b.Rows {
		cells = append(cells, block.Cell{Row: r.Number, Column: "value", Text: r.Cells[2]})
	}
	if err := b.Dialect.SettleDecimal(cells); err != nil {
		t.Fatal(err)
	}
	if b.Dialect != want {
		t.Errorf("got dialect %+v, want %+v", b.Dialect, want)
	}
	got := [][]string{b.Names}
	for _, r := range b.Rows {
		value, err := b.Dialect.Number(r.Cells[2])
		if err != nil {
			t.Fatal(err)
		}
		got = append(got, []string{r.Cells[0], r.Cells[1], value, r.Cells[3]})
	}
	if !reflect.DeepEqual(got, rows) {
		t.Errorf("got  %q\nwant %q", got, rows)
	}
}

// TestWhatIsRefused holds what cannot be read, or can be read in two ways, and the words that tell what to say instead.
func TestWhatIsRefused(t *testing.T) {
	for name, c := range map[string]struct {
		text string
		o    block.Options
		want []string
	}{
		"nothing":                   {"", block.Options{}, []string{"empty"}},
		"blank":                     {" \n\n", block.Options{}, []string{"empty"}},
		"UTF-16":                    {"\xff\xfei\x00d\x00", block.Options{}, []string{"UTF-16", "UTF-8"}},
		"a zero byte":               {"id\n\x00", block.Options{}, []string{"UTF-16 or no text"}},
		"Latin-1":                   {"id\tnote\nn1\tM\xfcller\n", block.Options{}, []string{"row 2", "not UTF-8"}},
		"no header":                 {"n1\t0.3\nn2\t0.4\n", block.Options{}, []string{"row 1", `"0.3"`, "header=no"}},
		"a name twice":              {"value\tValue\n1\t2\n", block.Options{}, []string{"row 1", "column Value", "twice"}},
		"two separators":            {"a,b;c\n1,2;3\n", block.Options{}, []string{"semicolon, comma", "delimiter=semicolon or delimiter=comma"}},
		"a cell too few":            {"a\tb\n1\t2\n3\n", block.Options{}, []string{"row 3", "1 cells", "has 2", "delimiter="}},
		"a cell too many":           {"a;b\n1;2;3\n", block.Options{}, []string{"row 2", "3 cells"}},
		"an open quote":             {"a\tb\n\"1\t2\n", block.Options{Delimiter: block.Tab}, []string{"row 2", "cell 1", "never closed"}},
		"text after a quote":        {"a\tb\n\"1\"x\t2\n", block.Options{Delimiter: block.Tab}, []string{"row 2", "closing quote", "double"}},
		"lines of carriage returns": {"a\tb\r1\t2\r", block.Options{}, []string{"carriage return", "LF or CRLF"}},
		"one column or two":         {"1,5\n2,5\n", block.Options{NoHeader: true}, []string{"two columns or be decimals", "delimiter=comma", "decimal=comma"}},
		"one column or two, named":  {"Nitrate, mg/L\n1,5\n2,5\n", block.Options{}, []string{"two columns or be decimals", "decimal=comma"}},
		"rows over the limit":       {"v\n" + strings.Repeat("1\n", block.RowsMax+1), block.Options{}, []string{"10000"}},
		"columns over the limit":    {strings.Repeat("a;", block.ColumnsMax) + "a\n", block.Options{Delimiter: block.Semicolon}, []string{"more than 200 cells"}},
		"a cell over the limit":     {"a\n" + strings.Repeat("x", block.CellBytesMax+1), block.Options{}, []string{"row 2", "32769", "32768"}},
		"bytes over the limit":      {strings.Repeat("x", block.BytesMax+1), block.Options{}, []string{"8388609", "8388608"}},
		"a blank line first":        {"\nvalue\n1\n", block.Options{}, []string{"row 1", "blank"}},
		"carriage return in a cell": {"a\tb\n1\r1\t2\n", block.Options{}, []string{"row 2", "carriage return"}},
		"a header that is a bound":  {"<0.5\n1\n", block.Options{}, []string{"number", "header=no"}},
		"cells over the limit":      {strings.Repeat(strings.Repeat(";", 199)+"\n", 2501), block.Options{NoHeader: true}, []string{"500200 cells", "500000"}},
	} {
		t.Run(name, func(t *testing.T) {
			b, err := block.Read([]byte(c.text), c.o)
			if err == nil {
				t.Fatalf("read as %q %+v", b.Names, b.Dialect)
			}
			for _, want := range c.want {
				if !strings.Contains(err.Error(), want) {
					t.Errorf("got %q, want it to say %q", err, want)
				}
			}
		})
	}
}

func TestLimitsAreTaken(t *testing.T) {
	b, err := block.Read([]byte("v\n"+strings.Repeat("1\n", block.RowsMax)), block.Options{})
	if err != nil || len(b.Rows) != block.RowsMax {
		t.Errorf("%d rows: %v", block.RowsMax, err)
	}
	if _, err := block.Read([]byte("a\n"+strings.Repeat("x", block.CellBytesMax)), block.Options{}); err != nil {
		t.Errorf("a cell of %d bytes: %v", block.CellBytesMax, err)
	}
}

// TestDecimals goes through what settles a block's decimal, and what is refused with both readings.
func TestDecimals(t *testing.T) {
	for _, c := range []struct {
		delimiter, given byte
		texts            string // separated by spaces; "#" begins a count
		want             string // the numbers, or what the error must say
	}{
		{block.Tab, 0, "1.5 2.25 3", "1.5 2.25 3"},
		{block.Tab, 0, "1,5 2,25 3", "1.5 2.25 3"},
		{block.Tab, 0, "1,234", `"1,234" may be 1.234 or 1234; say decimal=comma or decimal=point`},
		{block.Tab, ',', "1,234", "1.234"},
		{block.Tab, 0, "1,234 0,98", "1.234 0.98"},
		{block.Tab, 0, "0,234", "0.234"},
		{block.Tab, 0, "1,2345", "1.2345"},
		{block.Tab, 0, "1.234", `"1.234" may be 1.234 or 1234; say decimal=point or decimal=comma`},
		{block.None, 0, "1.234", `"1.234" may be 1.234 or 1234`},
		{block.Comma, 0, "1.234", "1.234"},
		{block.Tab, '.', "1.234", "1.234"},
		{block.Tab, 0, "1.234 0.5", "1.234 0.5"},
		{block.Tab, 0, "1,234 n/a,late", `"1,234" may be 1.234 or 1234`},
		{block.Tab, 0, "1,234 p.3", `"1,234" may be 1.234 or 1234`},
		{block.Tab, 0, "1,234 \u22120,5", `"1,234" may be 1.234 or 1234`},
		{block.Comma, 0, "#1.000", `"1.000" may be 1.000 or 1000; a count has no decimal`},
		{block.Semicolon, 0, "#1,000 0,5", `"1,000" may be 1.000 or 1000; a count has no decimal`},
		{block.Tab, '.', "#1.000", "1.000"},
		{block.Tab, 0, "#2.5 #100", "2.5 100"},
		{block.Semicolon, 0, "1.234", `"1.234" may be 1.234 or 1234; say decimal=point or decimal=comma`},
		{block.Semicolon, '.', "1.234", "1.234"},
		{block.Semicolon, 0, "1.234 0.5", "1.234 0.5"},
		{block.Tab, 0, "1.5 2,5", `"2,5" has a decimal comma, but "1.5" in row 1 has a decimal point`},
		{block.Tab, 0, "1.5 1,234", "would separate thousands"},
		{block.Semicolon, 0, "1,5 1.234", "would separate thousands"},
		{block.Tab, '.', "1,5", "the decimal is a point; say decimal=comma"},
		{block.Tab, ',', "1.5", "the decimal is a comma; say decimal=point"},
		{block.Tab, 0, "1,234.5", "2 decimals or thousands separators"},
		{block.Tab, 0, "<1,234", `"<1,234" may be`},
		{block.Tab, 0, "-1,234", `"-1,234" may be`},
		{block.Tab, ',', "<0,05 -0,012 +1,5e-3", "<0.05 -0.012 +1.5e-3"},
		{block.Tab, 0, "0.30", "0.30"},
		{block.Tab, 0, "", ""},
	} {
		t.Run(fmt.Sprintf("%s %c", c.texts, c.given), func(t *testing.T) {
			if got := normalised(block.Dialect{Delimiter: c.delimiter, Decimal: c.given}, strings.Split(c.texts, " ")); got != c.want &&
				!(strings.ContainsAny(c.want, " ") && strings.Contains(got, c.want)) {
				t.Errorf("got %s, want %s", got, c.want)
			}
		})
	}
}

func normalised(d block.Dialect, texts []string) string {
	var cells []block.Cell
	for i, text := range texts {
		number, count := strings.CutPrefix(text, "#")
		texts[i] = number
		cells = append(cells, block.Cell{Row: i + 1, Text: number, Count: count})
	}
	if err := d.SettleDecimal(cells); err != nil {
		return err.Error()
	}
	var out []string
	for _, text := range texts {
		n, err := d.Number(text)
		if err != nil {
			return err.Error()
		}
		out = append(out, n)
	}
	return strings.Join(out, " ")
}

func TestGuard(t *testing.T) {
	for in, want := range map[string]string{
		"=1+1": "'=1+1", "+x": "'+x", "-x": "'-x", "@SUM(A1)": "'@SUM(A1)", "\t=1": "'\t=1", "\rx": "'\rx", "＝1": "'＝1",
		"'=1": "''=1", "''=1": "'''=1", "'quoted'": "'quoted'", "plain": "plain", "": "", "-0.012": "'-0.012", "'": "'",
	} {
		if got := block.Guard(in); got != want {
			t.Errorf("Guard(%q): got %q, want %q", in, got, want)
		}
		if got := block.Unguard(want); got != in {
			t.Errorf("Unguard(%q): got %q, want %q", want, got, in)
		}
	}
	for _, number := range []string{"-0.012", "+5", "-1,5", "-.5", "-1e5", "1E-3"} {
		if got := block.GuardUnlessNumber(number); got != number {
			t.Errorf("the number %q became %q", number, got)
		}
	}
	for _, text := range []string{"-", "-1-1", "+1+1", "-1e5e5", "=-1", "-1\n", "- 1"} {
		if got := block.GuardUnlessNumber(text); got != "'"+text {
			t.Errorf("the text %q became %q", text, got)
		}
	}
}
