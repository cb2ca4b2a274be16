package resultfile

import (
	"math"
	"slices"

	"limitary/internal/decimal"
)

// Row is one result of a file.
type Row struct {
	// Line is where the row begins, from 1.
	Line int
	// ID, Time, Group and Material are the texts of the columns chosen for them, without spaces around; empty without a
	// column.
	ID, Time, Group, Material string
	// Readings are those there are, in the order of the value columns or of the rows of the subgroup.
	Readings []decimal.Reading
	// Break says that a segment begins with this row.
	Break bool
	// Exclude is the reason why the row is left out of an estimate; empty where it is not.
	Exclude string
}

// Table holds the results of a file, by column. It is not changed after Read and may be read by several goroutines.
type Table struct {
	// Names are the file's column names; Values the chosen value columns among them.
	Names, Values []string
	// Delimiter separated the columns; 0 in a file of one column. Decimal is '.', ',' or, where no value has one, 0.
	Delimiter, Decimal byte
	// Bytes and Lines are the size of the file.
	Bytes int64
	Lines int
	// Empty counts the rows without a reading, EmptyFields the value fields without one, Skipped the lines skipped as
	// blank.
	Empty, EmptyFields, Skipped int
	// Bounded counts the readings that are bounds.
	Bounded int
	// Places is the largest number of decimals written.
	Places int
	// TimeBack is the line of the first row whose time is before that of the row above it, where both are RFC 3339 with
	// an offset; 0 where there is none.
	TimeBack int

	rows   int
	values []float64
	// places holds one entry a reading; bounds too, once a reading is a bound.
	places []uint16
	kinds  []decimal.Bound
	// ends[i] is one past row i's last reading, once a row has other than one reading.
	ends []uint32
	// lines[i] is where row i begins, once that is other than i+2.
	lines []int

	id, time, group, exclude, material text
	breaks                             []bool
	// inspected has one entry a row where there is such a column; NaN where the row has no count.
	inspected []float64
}

// text is one column of texts, end to end.
type text struct {
	bytes []byte
	ends  []int
}

func (t *text) add(s []byte) {
	t.bytes = append(t.bytes, s...)
	t.ends = append(t.ends, len(t.bytes))
}

// at gives text i; an absent column has none.
func (t *text) at(i int) []byte {
	if i >= len(t.ends) {
		return nil
	}
	start := 0
	if i > 0 {
		start = t.ends[i-1]
	}
	return t.bytes[start:t.ends[i]]
}

// Len is the number of rows.
func (t *Table) Len() int { return t.rows }

// span gives the readings of row i as a range.
func (t *Table) span(i int) (from, to int) {
	if t.ends == nil {
		return i, i + 1
	}
	if i > 0 {
		from = int(t.ends[i-1])
	}
	return from, int(t.ends[i])
}

// Figures gives the values of row i without copying; the caller must not change them. Where Bounded is zero they say all
// there is to say.
func (t *Table) Figures(i int) []float64 {
	from, to := t.span(i)
	return t.values[from:to:to]
}

// Series gives the values of all rows without copying, where every row has exactly one reading and none is a bound.
func (t *Table) Series() ([]float64, bool) {
	if t.ends != nil || t.Bounded > 0 {
		return nil, false
	}
	return t.values[:len(t.values):len(t.values)], true
}

// AppendReadings appends the readings of row i to dst.
func (t *Table) AppendReadings(dst []decimal.Reading, i int) []decimal.Reading {
	from, to := t.span(i)
	for k := from; k < to; k++ {
		r := decimal.Reading{Value: t.values[k], Places: int(t.places[k])}
		if t.kinds != nil {
			r.Bound = t.kinds[k]
		}
		dst = append(dst, r)
	}
	return dst
}

// Row gives row i, 0 <= i < Len.
func (t *Table) Row(i int) Row {
	return Row{
		Line:     t.Line(i),
		ID:       string(t.id.at(i)),
		Time:     string(t.time.at(i)),
		Group:    string(t.group.at(i)),
		Material: t.Material(i),
		Readings: t.AppendReadings(nil, i),
		Break:    t.Break(i),
		Exclude:  string(t.exclude.at(i)),
	}
}

// Line gives where row i begins.
func (t *Table) Line(i int) int {
	if t.lines == nil {
		return i + 2
	}
	return t.lines[i]
}

// Break says whether a segment begins with row i.
func (t *Table) Break(i int) bool { return i < len(t.breaks) && t.breaks[i] }

// Material gives the material of row i, empty without such a column.
func (t *Table) Material(i int) string { return string(t.material.at(i)) }

// Inspected gives how much was looked at for the count of row i; ok is false without such a column, or without a count.
func (t *Table) Inspected(i int) (size float64, ok bool) {
	if i >= len(t.inspected) || math.IsNaN(t.inspected[i]) {
		return 0, false
	}
	return t.inspected[i], true
}

// Excluded says whether row i has a reason for exclusion, which Row gives.
func (t *Table) Excluded(i int) bool { return len(t.exclude.at(i)) > 0 }

// expect makes room for about as many readings as are to come.
func (t *Table) expect(readings int) {
	t.values = make([]float64, 0, readings)
	t.places = make([]uint16, 0, readings)
}

// addReading appends a reading to the row being built.
func (t *Table) addReading(r decimal.Reading) {
	if len(t.values) == cap(t.values) {
		// append alone would grow a long slice by a quarter, and copy it five times over in the end.
		t.values = slices.Grow(t.values, len(t.values)+1)
		t.places = slices.Grow(t.places, len(t.values)+1)
	}
	t.values = append(t.values, r.Value)
	t.places = append(t.places, uint16(min(r.Places, math.MaxUint16)))
	if r.Bound != decimal.Measured {
		if t.kinds == nil {
			t.kinds = make([]decimal.Bound, len(t.values)-1, cap(t.values))
		}
		t.Bounded++
	}
	if t.kinds != nil {
		t.kinds = append(t.kinds, r.Bound)
	}
	t.Places = max(t.Places, r.Places)
}

// endRow closes the row that began at line.
func (t *Table) endRow(line int) {
	end := len(t.values)
	if t.ends == nil && end != t.rows+1 {
		t.ends = make([]uint32, t.rows, max(t.rows+1, cap(t.values)))
		for i := range t.ends {
			t.ends[i] = uint32(i + 1)
		}
	}
	if t.ends != nil {
		t.ends = append(t.ends, uint32(end))
	}
	if t.lines == nil && line != t.rows+2 {
		t.lines = make([]int, t.rows, max(t.rows+1, cap(t.values)))
		for i := range t.lines {
			t.lines[i] = i + 2
		}
	}
	if t.lines != nil {
		t.lines = append(t.lines, line)
	}
	if from, to := t.span(t.rows); from == to {
		t.Empty++
	}
	t.rows++
}
