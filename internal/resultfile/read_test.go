package resultfile_test

import (
	"errors"
	"fmt"
	"io"
	"reflect"
	"strings"
	"testing"
	"testing/iotest"

	"limitary/internal/decimal"
	"limitary/internal/resultfile"
)

func mustRead(tb testing.TB, text string, o resultfile.Options) *resultfile.Table {
	tb.Helper()
	t, err := resultfile.Read(strings.NewReader(text), o)
	if err != nil {
		tb.Fatalf("Read: %v\n%s", err, text)
	}
	return t
}

func rows(t *resultfile.Table) []resultfile.Row {
	got := make([]resultfile.Row, t.Len())
	for i := range got {
		got[i] = t.Row(i)
	}
	return got
}

func values(t *resultfile.Table) [][]float64 {
	got := make([][]float64, t.Len())
	for i := range got {
		got[i] = append([]float64{}, t.Figures(i)...)
	}
	return got
}

func measured(v float64, places int) decimal.Reading {
	return decimal.Reading{Value: v, Places: places}
}

// The same rows in every dialect give identical readings and texts. The expected rows are written here by hand.
func TestEveryDialectGivesTheSameRows(t *testing.T) {
	header := []string{"time", "id", "nitrate", "why left out", "new segment"}
	body := [][]string{
		{"2026-03-02T08:00:00+01:00", "A-1", "10.20", "", ""},
		{"2026-03-03T08:00:00+01:00", "A,2;\tx", "<0.05", "", "yes"},
		{"2026-03-04T08:00:00+01:00", "say \"hi\"\nthere", "", "", "no"},
		{"2026-03-05T08:00:00+01:00", "", " -1.234 ", "bottle left open", ""},
		{"later", "A-5", "1.5e-3", "", "0"},
		{"", "A-6", "+7", "", ""},
	}
	want := []resultfile.Row{
		{Time: "2026-03-02T08:00:00+01:00", ID: "A-1", Readings: []decimal.Reading{measured(10.2, 2)}},
		{Time: "2026-03-03T08:00:00+01:00", ID: "A,2;\tx", Readings: []decimal.Reading{{Value: 0.05, Bound: decimal.Below, Places: 2}}, Break: true},
		{Time: "2026-03-04T08:00:00+01:00", ID: "say \"hi\"\nthere"},
		{Time: "2026-03-05T08:00:00+01:00", Readings: []decimal.Reading{measured(-1.234, 3)}, Exclude: "bottle left open"},
		{Time: "later", ID: "A-5", Readings: []decimal.Reading{measured(0.0015, 4)}},
		{ID: "A-6", Readings: []decimal.Reading{measured(7, 0)}},
	}
	wantLines := []int{2, 3, 4, 6, 7, 8}
	for _, delimiter := range []string{",", ";", "\t"} {
		for _, mark := range []string{".", ","} {
			for _, end := range []string{"\n", "\r\n"} {
				for _, front := range []string{"", "\uFEFF", "\n \n"} {
					for _, always := range []bool{true, false} {
						for _, last := range []bool{true, false} {
							name := fmt.Sprintf("delimiter %q decimal %q end %q front %q quoted %v last %v", delimiter, mark, end, front, always, last)
							t.Run(name, func(t *testing.T) {
								text := front + encode(header, body, delimiter, mark, end, always)
								if !last {
									text = strings.TrimSuffix(text, end)
								}
								o := resultfile.Options{Time: "time", ID: "id", Exclude: "why left out", Break: "new segment"}
								for _, explicit := range []bool{false, true} {
									if explicit {
										o.Delimiter, o.Decimal = delimiter[0], mark[0]
									}
									got := mustRead(t, text, o)
									checkDialect(t, got, delimiter[0], mark[0], want, wantLines, strings.Count(front, "\n"))
								}
								small, err := resultfile.ReadSmall(iotest.OneByteReader(strings.NewReader(text)), o, 400)
								if err != nil {
									t.Fatal(err)
								}
								checkDialect(t, small, delimiter[0], mark[0], want, wantLines, strings.Count(front, "\n"))
							})
						}
					}
				}
			}
		}
	}
}

func checkDialect(t *testing.T, got *resultfile.Table, delimiter, mark byte, want []resultfile.Row, lines []int, shift int) {
	t.Helper()
	for i, r := range rows(got) {
		r.Line -= shift
		r.ID = strings.ReplaceAll(r.ID, "\r\n", "\n")
		w := want[i]
		w.Line = lines[i]
		if !reflect.DeepEqual(r, w) {
			t.Errorf("row %d: got %+v, want %+v", i, r, w)
		}
	}
	if got.Len() != len(want) || got.Delimiter != delimiter || got.Decimal != mark {
		t.Errorf("got %d rows, delimiter %q, decimal %q; want %d, %q, %q", got.Len(), got.Delimiter, got.Decimal, len(want), delimiter, mark)
	}
	if got.Empty != 1 || got.EmptyFields != 1 || got.Bounded != 1 || got.Places != 4 || got.TimeBack != 0 {
		t.Errorf("got counts %d %d %d %d %d, want 1 1 1 4 0", got.Empty, got.EmptyFields, got.Bounded, got.Places, got.TimeBack)
	}
}

// encode writes rows in a dialect; column 2 holds the number.
func encode(header []string, body [][]string, delimiter, mark, end string, always bool) string {
	var b strings.Builder
	for i, row := range append([][]string{header}, body...) {
		for j, field := range row {
			if i > 0 && j == 2 {
				field = strings.Replace(field, ".", mark, 1)
			}
			field = strings.ReplaceAll(field, "\n", end)
			if always || strings.ContainsAny(field, delimiter+"\"\n") {
				field = `"` + strings.ReplaceAll(field, `"`, `""`) + `"`
			}
			if j > 0 {
				b.WriteString(delimiter)
			}
			b.WriteString(field)
		}
		b.WriteString(end)
	}
	return b.String()
}

func TestWideFormKeepsTheReadingsOfEachRow(t *testing.T) {
	got := mustRead(t, "day,x1,x2,x3\nMon,1,2,3\nTue,4,,6\nWed,,,\n\nThu,7,8,9\n", resultfile.Options{ID: "day", Values: []string{"x1", "x2", "x3"}})
	want := [][]float64{{1, 2, 3}, {4, 6}, {}, {7, 8, 9}}
	if !reflect.DeepEqual(values(got), want) {
		t.Errorf("got %v, want %v", values(got), want)
	}
	if got.Empty != 1 || got.EmptyFields != 4 || got.Skipped != 1 || got.Line(3) != 6 || got.Lines != 6 {
		t.Errorf("got empty %d, fields %d, skipped %d, line %d, lines %d; want 1 4 1 6 6", got.Empty, got.EmptyFields, got.Skipped, got.Line(3), got.Lines)
	}
	if _, ok := got.Series(); ok {
		t.Error("got a series of rows with several readings, want none")
	}
}

func TestLongFormGroupsConsecutiveRows(t *testing.T) {
	text := "sub,when,v,ex,br\nA,t1,1,,\nA,t2,2,,\nB,t3,3,spilt,yes\nB,t4,<4,spilt,yes\n,,,,\nC,t5,,,\nD,t6,6,,\n"
	got := mustRead(t, text, resultfile.Options{Values: []string{"v"}, Subgroup: "sub", Time: "when", Exclude: "ex", Break: "br"})
	want := []resultfile.Row{
		{Line: 2, Group: "A", Time: "t1", Readings: []decimal.Reading{measured(1, 0), measured(2, 0)}},
		{Line: 4, Group: "B", Time: "t3", Readings: []decimal.Reading{measured(3, 0), {Value: 4, Bound: decimal.Below}}, Exclude: "spilt", Break: true},
		{Line: 7, Group: "C", Time: "t5"},
		{Line: 8, Group: "D", Time: "t6", Readings: []decimal.Reading{measured(6, 0)}},
	}
	if !reflect.DeepEqual(rows(got), want) {
		t.Errorf("got  %+v\nwant %+v", rows(got), want)
	}
	if !got.Excluded(1) || got.Excluded(0) || got.Skipped != 1 {
		t.Errorf("got excluded %v %v, skipped %d; want true false 1", got.Excluded(1), got.Excluded(0), got.Skipped)
	}
}

func TestOneColumnNeedsNoSeparator(t *testing.T) {
	tests := []struct {
		name, text string
		want       [][]float64
		decimal    byte
	}{
		{"a blank line is a row without a reading", "v\n1.5\n\n2.5\n\n\n", [][]float64{{1.5}, {}, {2.5}}, '.'},
		{"a quoted empty field is a row", "v\n1.5\n\"\"\n", [][]float64{{1.5}, {}}, '.'},
		{"decimal commas need no quotes", "v\n1,5\n0,25", [][]float64{{1.5}, {0.25}}, ','},
		{"commas before three digits are settled by another value", "v\n1,234\n0,25", [][]float64{{1.234}, {0.25}}, ','},
		{"a point before three digits is a decimal", "v\n1.234\n", [][]float64{{1.234}}, '.'},
		{"whole numbers have no decimal", "v\n1\n2\n", [][]float64{{1}, {2}}, 0},
		{"negative zero is zero", "v\n-0\n-0.00\n", [][]float64{{0}, {0}}, '.'},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			got := mustRead(t, test.text, resultfile.Options{})
			if !reflect.DeepEqual(values(got), test.want) || got.Decimal != test.decimal || got.Delimiter != 0 {
				t.Errorf("got %v decimal %q delimiter %q, want %v %q 0", values(got), got.Decimal, got.Delimiter, test.want, test.decimal)
			}
		})
	}
}

func TestTheDialectIsFound(t *testing.T) {
	tests := []struct {
		name, text         string
		o                  resultfile.Options
		delimiter, decimal byte
		want               [][]float64
	}{
		{"a comma in a quoted name separates nothing", "id;\"nitrate, mg/l\"\na;1,5\n", resultfile.Options{}, ';', ',', [][]float64{{1.5}}},
		{"the separator that fits all rows wins", "id;nitrate, mg/l\na;15\n", resultfile.Options{}, ';', 0, [][]float64{{15}}},
		{"quoted decimal commas among comma separators", "id,v\na,\"1,5\"\nb,\"2,25\"\n", resultfile.Options{}, ',', ',', [][]float64{{1.5}, {2.25}}},
		{"--decimal comma reads 1,234", "id;v\na;1,234\n", resultfile.Options{Decimal: ','}, ';', ',', [][]float64{{1.234}}},
		{"--decimal point reads 1.234 among semicolons", "id;v\na;1.234\n", resultfile.Options{Decimal: '.'}, ';', '.', [][]float64{{1.234}}},
		{"an exponent shows the comma to be a decimal", "id;v\na;1,234e2\n", resultfile.Options{}, ';', ',', [][]float64{{123.4}}},
		{"a given separator leaves others in the names", "a,b;v\nx;1\n", resultfile.Options{Delimiter: ';'}, ';', 0, [][]float64{{1}}},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			got := mustRead(t, test.text, test.o)
			if !reflect.DeepEqual(values(got), test.want) || got.Decimal != test.decimal || got.Delimiter != test.delimiter {
				t.Errorf("got %v, delimiter %q, decimal %q; want %v %q %q", values(got), got.Delimiter, got.Decimal, test.want, test.delimiter, test.decimal)
			}
		})
	}
}

func TestTheOnlyColumnOfNumbersIsChosen(t *testing.T) {
	tests := []struct {
		name, text string
		o          resultfile.Options
		want       string
	}{
		{"beside texts", "when,who,nitrate\n2026-03-02,AB,1\n", resultfile.Options{}, "nitrate"},
		{"beside dates with points", "when;nitrate\n02.03.2026;1,5\n", resultfile.Options{}, "nitrate"},
		{"beside numbers with another role", "n,nitrate\n1,1\n", resultfile.Options{ID: "n"}, "nitrate"},
		{"with a bound first", "when,lead\na,<0.05\nb,1\n", resultfile.Options{}, "lead"},
		{"by name, spaces aside", "n, nitrate \n1,1\n", resultfile.Options{Values: []string{"nitrate"}}, "nitrate"},
		{"without a name", "when,\na,1\n", resultfile.Options{}, "column 2"},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			if got := mustRead(t, test.text, test.o).Values; !reflect.DeepEqual(got, []string{test.want}) {
				t.Errorf("got %q, want %q", got, test.want)
			}
		})
	}
}

func TestSeriesSharesThePlainValues(t *testing.T) {
	got, ok := mustRead(t, "v\n1\n2.5\n", resultfile.Options{}).Series()
	if !ok || !reflect.DeepEqual(got, []float64{1, 2.5}) {
		t.Errorf("got %v %v, want [1 2.5] true", got, ok)
	}
	if _, ok := mustRead(t, "v\n1\n<2.5\n", resultfile.Options{}).Series(); ok {
		t.Error("got a series with a bound, want none")
	}
}

func TestTimeThatGoesBackIsNoted(t *testing.T) {
	text := "t,v\n2026-03-02T08:00:00+01:00,1\n2026-03-02T07:30:00Z,2\n2026-03-02T07:15:00Z,3\n2026-03-02T01:00:00Z,3\n"
	if got := mustRead(t, text, resultfile.Options{Time: "t"}).TimeBack; got != 4 {
		t.Errorf("got line %d, want 4", got)
	}
}

func TestProgressEndsWithTheWholeFile(t *testing.T) {
	text := "v\n" + strings.Repeat("1\n", 200_000)
	calls, lastRows, lastBytes := 0, int64(0), int64(0)
	mustRead(t, text, resultfile.Options{Progress: func(rows, bytes int64) {
		if rows < lastRows || bytes < lastBytes {
			t.Errorf("progress went back from %d, %d to %d, %d", lastRows, lastBytes, rows, bytes)
		}
		calls, lastRows, lastBytes = calls+1, rows, bytes
	}})
	if calls < 3 || lastRows != 200_000 || lastBytes != int64(len(text)) {
		t.Errorf("got %d calls, last %d rows %d bytes; want at least 3, 200000, %d", calls, lastRows, lastBytes, len(text))
	}
}

func TestAFailingReaderIsReportedAsItself(t *testing.T) {
	boom := errors.New("cable pulled")
	_, err := resultfile.Read(io.MultiReader(strings.NewReader("v\n1\n2\n"), iotest.ErrReader(boom)), resultfile.Options{})
	var bad *resultfile.Error
	if !errors.Is(err, boom) || errors.As(err, &bad) {
		t.Errorf("got %v, want the reader's own error", err)
	}
}

// Texts of materials and figures of what was inspected, in the wide and the long form. The expected values are written
// here by hand.
func TestMaterialAndInspected(t *testing.T) {
	table := mustRead(t, "m;n;k\nlow;50;2\n high ;2,5;0\n;;\nmid;40;\n", resultfile.Options{Values: []string{"k"}, Material: "m", Inspected: "n"})
	wantMaterial, wantSize := []string{"low", "high", "", "mid"}, []float64{50, 2.5, 0, 0}
	for i := range table.Len() {
		size, ok := table.Inspected(i)
		if table.Material(i) != wantMaterial[i] || table.Row(i).Material != wantMaterial[i] || size != wantSize[i] || ok != (wantSize[i] > 0) {
			t.Errorf("row %d: got %q and %v, %v", i, table.Material(i), size, ok)
		}
	}
	if !table.HasInspected() || table.Decimal != ',' || table.Empty != 2 {
		t.Errorf("got inspected %v, decimal %q, %d rows without a reading", table.HasInspected(), table.Decimal, table.Empty)
	}
	long := mustRead(t, "g,m,x\n1,low,1\n1,low,2\n2,high,3\n", resultfile.Options{Values: []string{"x"}, Subgroup: "g", Material: "m"})
	if long.HasInspected() || long.Len() != 2 || long.Material(0) != "low" || long.Material(1) != "high" {
		t.Errorf("got %d subgroups of %q and %q", long.Len(), long.Material(0), long.Material(1))
	}
	if _, ok := long.Inspected(0); ok {
		t.Error("something was inspected in a file that does not say so")
	}
}
