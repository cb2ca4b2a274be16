package block_test

import (
	"math/big"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/sheet/block"
)

// FuzzBlock reads any text. Nothing may panic; what is read must, written again, read the same; and a number that was
// taken must be, digit for digit, the one that was written.
func FuzzBlock(f *testing.F) {
	for _, delimiter := range []byte{block.Tab, block.Comma, block.Semicolon} {
		for _, decimal := range []byte{'.', ','} {
			f.Add([]byte(inDialect(block.Dialect{Delimiter: delimiter, Decimal: decimal, CRLF: decimal == ',', BOM: delimiter == block.Comma})), byte(0), byte(0), false)
		}
	}
	for _, text := range []string{"", "a", "a,b;c\n1,2;3", "\"", "\"a\"\"\nb\"\tc\n=1\t'=1\n", "1,234\n", "v\n1,234\n0,5\n", "1,5\n", "\xef\xbb\xbfv\r\n\r\n1\r\n", "a\tb\n\n1\t2\n\n", "''=x\t＝1\n1\t2\n", "v\n-0.012\n-1-1\n", "Nitrate, mg/L\n1,5\n2,5\n", "a;b\n1.234;1\n"} {
		f.Add([]byte(text), byte(0), byte(0), false)
		f.Add([]byte(text), block.Semicolon, byte(','), true)
		f.Add([]byte(text), block.None, byte('.'), true)
	}
	f.Fuzz(func(t *testing.T, text []byte, delimiter, decimal byte, noHeader bool) {
		o := block.Options{Delimiter: pick(delimiter, 0, block.Tab, block.Comma, block.Semicolon, block.None), Decimal: pick(decimal, 0, '.', ','), NoHeader: noHeader}
		b, err := block.Read(text, o)
		if err != nil {
			return
		}
		exportReadsBackTheSame(t, b, o)
		numbersAreAsWritten(t, b)
	})
}

func pick(b byte, from ...byte) byte {
	for _, c := range from {
		if b == c {
			return b
		}
	}
	return from[int(b)%len(from)]
}

func exportReadsBackTheSame(t *testing.T, b *block.Block, o block.Options) {
	more := make([][]string, len(b.Rows))
	for i := range more {
		more[i] = []string{"CLEAR", "=cmd()"}
	}
	out := b.Extend([]string{"verdict \x01 1", "verdict \x01 2"}, more)
	if o.Delimiter = b.Dialect.Delimiter; o.Delimiter == block.None {
		o.Delimiter = block.Tab
	}
	again, err := block.Read(out, o)
	if err != nil {
		if len(b.Names)+2 > block.ColumnsMax || len(out) > block.BytesMax || len(b.Rows)*(len(b.Names)+2) > block.CellsMax {
			return
		}
		t.Fatalf("%v in %q", err, out)
	}
	n := len(b.Names)
	if b.HasHeader && !reflect.DeepEqual(again.Names[:n], b.Names) {
		t.Fatalf("names %q came back as %q", b.Names, again.Names)
	}
	if len(again.Rows) != len(b.Rows) {
		t.Fatalf("%d rows came back as %d", len(b.Rows), len(again.Rows))
	}
	for i, r := range again.Rows {
		if !reflect.DeepEqual(r.Cells[:n], b.Rows[i].Cells) || r.Cells[n+1] != "=cmd()" {
			t.Fatalf("row %q came back as %q", b.Rows[i].Cells, r.Cells)
		}
	}
}

// numbersAreAsWritten settles the decimal over every column in turn and compares what is taken with the exact value of
// the text under that decimal.
func numbersAreAsWritten(t *testing.T, b *block.Block) {
	for c := range b.Names {
		d := b.Dialect
		var cells []block.Cell
		for _, r := range b.Rows {
			cells = append(cells, block.Cell{Row: r.Number, Text: r.Cells[c]})
		}
		if d.SettleDecimal(cells) != nil {
			continue
		}
		for _, r := range b.Rows {
			got, err := d.Number(r.Cells[c])
			if err != nil {
				continue
			}
			want := strings.Trim(r.Cells[c], " \u00a0\u202f")
			if strings.Contains(want, ",") && (d.Decimal != ',' && d.Decimal != 0 || strings.Contains(want, ".")) {
				t.Fatalf("%q was taken as %q where the decimal is %q", r.Cells[c], got, d.Decimal)
			}
			if strings.ContainsAny(want, "eEpP") || len(want) > 60 { // the exact value may be too large to compute
				continue
			}
			x, ok := new(big.Rat).SetString(got)
			y, ok2 := new(big.Rat).SetString(strings.Replace(want, ",", ".", 1))
			if ok != ok2 || ok && x.Cmp(y) != 0 {
				t.Fatalf("%q was taken as %q", r.Cells[c], got)
			}
		}
	}
}
