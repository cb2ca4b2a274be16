package grid_test

import (
	"math"
	"strconv"
	"testing"
	"time"

	"limitary/internal/sheet/block"
	"limitary/internal/sheet/grid"
)

func TestDelimited(t *testing.T) {
	half := 0.5
	table := &grid.Table{Columns: []string{"text", "number", "time", "=x"}, Rows: [][]grid.Value{
		{grid.Of("a,b"), grid.Float(-0.012), grid.Moment(time.Date(2026, 3, 2, 10, 30, 0, 0, time.FixedZone("", 3600))), grid.Yes(true)},
		{grid.Of("-5"), {Kind: grid.Number, Text: "0.30"}, {}, grid.Optional(nil)},
		{grid.Of(""), grid.Int(-7), grid.Moment(time.Time{}), grid.Optional(&half)},
	}}
	for _, c := range []struct {
		d    block.Dialect
		want string
	}{
		{block.Dialect{Delimiter: block.Comma, Decimal: '.', CRLF: true}, "text,number,time,'=x\r\n\"a,b\",-0.012,2026-03-02T09:30:00Z,yes\r\n'-5,0.30,,\r\n,-7,,0.5\r\n"},
		{block.Dialect{Delimiter: block.Semicolon, Decimal: ','}, "text;number;time;'=x\na,b;-0,012;2026-03-02T09:30:00Z;yes\n'-5;0,30;;\n;-7;;0,5\n"},
		{block.Dialect{Delimiter: block.Comma, Decimal: ','}, "text,number,time,'=x\n\"a,b\",\"-0,012\",2026-03-02T09:30:00Z,yes\n'-5,\"0,30\",,\n,-7,,\"0,5\"\n"},
	} {
		if got := string(table.Delimited(c.d)); got != c.want {
			t.Errorf("%+v:\ngot  %q\nwant %q", c.d, got, c.want)
		}
	}
}

func TestShortestReadsBack(t *testing.T) {
	for _, x := range []float64{0, 10, 0.1, -0.012, 1e21, 1.5e300, math.SmallestNonzeroFloat64, math.MaxFloat64, 0.4262512332137109, 123456789012345.6} {
		s := grid.Shortest(x)
		if back, err := strconv.ParseFloat(s, 64); err != nil || back != x || len(s) > 24 {
			t.Errorf("%v was written as %q, which reads as %v, %v", x, s, back, err)
		}
	}
}
