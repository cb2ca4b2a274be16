package picture_test

import (
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"testing"

	"limitary/internal/runlength/picture"
)

// geometric is the distribution of a single limit with probability p.
func geometric(label string, p float64) picture.Distribution {
	return picture.Distribution{Label: label, Within: func(n int) float64 { return -math.Expm1(float64(n) * math.Log1p(-p)) }}
}

func TestBarsTellEachProbability(t *testing.T) {
	var out bytes.Buffer
	if err := picture.Bars(&out, []picture.Distribution{geometric("shift 0", 0.5), geometric("shift\x1b[31m 1", 1e-5)}); err != nil {
		t.Fatal(err)
	}
	got := out.String()
	for _, want := range []string{
		"shift 0: signal within n points\n",
		"          1 |" + strings.Repeat("#", 20) + strings.Repeat(" ", 20) + "| 50.0 %\n",
		"          2 |" + strings.Repeat("#", 30) + strings.Repeat(" ", 10) + "| 75.0 %\n",
		"          1 |" + strings.Repeat(" ", 40) + "| <0.1 %\n",
		"shift?[31m 1",
	} {
		if !strings.Contains(got, want) {
			t.Errorf("no %q in\n%s", want, got)
		}
	}
	if lines := strings.Count(got, "\n"); lines > 40 || strings.Contains(got, " 100.0 %") {
		t.Errorf("%d lines, or a certainty that is none:\n%s", lines, got)
	}
}

func TestSVGIsWellFormedWhateverTheTexts(t *testing.T) {
	for curves := 1; curves <= picture.CurvesMax; curves++ {
		var all []picture.Distribution
		for i := range curves {
			all = append(all, geometric(fmt.Sprintf("<shift> & %d \x00", i), math.Pow(10, -float64(2*i))/3))
		}
		var out bytes.Buffer
		if err := picture.SVG(&out, `a "title" <b>`, "rules \xff & more", all); err != nil {
			t.Fatal(err)
		}
		paths := 0
		for d := xml.NewDecoder(&out); ; {
			token, err := d.Token()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
			if e, ok := token.(xml.StartElement); ok && e.Name.Local == "path" {
				paths++
				for _, a := range e.Attr {
					if strings.Contains(a.Value, "NaN") || strings.Contains(a.Value, "Inf") {
						t.Errorf("attribute %s is %q", a.Name.Local, a.Value)
					}
				}
			}
		}
		if paths != curves {
			t.Errorf("%d paths, want %d", paths, curves)
		}
	}
	if err := picture.SVG(io.Discard, "", "", nil); err == nil {
		t.Error("a picture of nothing was drawn")
	}
}
