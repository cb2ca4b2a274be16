package limits_test

import (
	"encoding/json"
	"os"
	"strconv"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// counted makes a group of one count.
func counted(x, inspected float64) limits.Group {
	return limits.Group{Count: &chart.Count{Nonconforming: x, Inspected: inspected}}
}

// samplesOf makes a basis of counts in samples of one size.
func samplesOf(inspected float64, counts ...float64) []limits.Group {
	groups := make([]limits.Group, len(counts))
	for i, x := range counts {
		groups[i] = counted(x, inspected)
	}
	return groups
}

// judgeOf judges by a result's action and warning lines: rule 0 and rule 1.
func judgeOf(t testing.TB, res limits.Result) *judge.Judge {
	t.Helper()
	specs := []rules.Spec{
		{ID: "action", Kind: rules.BeyondLine, Line: rules.ActionLine, Consequence: rules.Act},
		{ID: "warning", Kind: rules.BeyondLine, Line: rules.WarningLine, Consequence: rules.Look},
	}
	j, err := judge.New(judge.Limits{
		Kind: res.Kind, SubgroupSize: res.SubgroupSize, Places: res.PublishedDecimals, ProcessSigma: res.ProcessSigma, Model: res.Model,
		Traces: [chart.Roles]*judge.Trace{{Trace: res.Location, Rules: specs}, nil},
	})
	if err != nil {
		t.Fatal(err)
	}
	return j
}

// beyond tells on which side a count is judged beyond the action and the warning line: -1, 0 or 1.
func beyond(j *judge.Judge, x, inspected float64) (action, warning int) {
	var v judge.Verdict
	j.Judge(j.NewState(), judge.Point{Count: &chart.Count{Nonconforming: x, Inspected: inspected}}, &v)
	sides := [2]int{}
	for _, h := range v.Hits {
		sides[h.Rule] = map[rules.Side]int{rules.Upper: 1, rules.Lower: -1}[h.Side]
	}
	return sides[0], sides[1]
}

// example is one worked example of counts, see testdata/README.md for its source.
type example struct {
	ID   string
	Data struct {
		C, Nonconforming, Nonconformities []float64
		N                                 float64
		Units                             []float64 `json:"inspection_units"`
	}
	Checks []struct {
		Quantity, Published string
		Recomputed          float64
	}
}

func workedExample(t *testing.T, id string) example {
	t.Helper()
	raw, err := os.ReadFile("../../testdata/worked-examples.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct{ Examples []json.RawMessage }
	if err := json.Unmarshal(raw, &file); err != nil {
		t.Fatal(err)
	}
	for _, one := range file.Examples {
		var named struct{ ID string }
		if err := json.Unmarshal(one, &named); err != nil {
			t.Fatal(err)
		}
		if named.ID == id {
			var ex example
			if err := json.Unmarshal(one, &ex); err != nil {
				t.Fatal(err)
			}
			return ex
		}
	}
	t.Fatalf("no example %s", id)
	return example{}
}

// published gives the print of a quantity, with the decimals it is printed with.
func (ex example) published(t *testing.T, quantity string) (value float64, places int) {
	t.Helper()
	for _, c := range ex.Checks {
		if c.Quantity != quantity {
			continue
		}
		value, err := strconv.ParseFloat(c.Published, 64)
		if err != nil {
			t.Fatal(err)
		}
		for i := range c.Published {
			if c.Published[i] == '.' {
				places = len(c.Published) - i - 1
			}
		}
		return value, places
	}
	t.Fatalf("%s: no quantity %s", ex.ID, quantity)
	return 0, 0
}

// targetLine is a line that is set.
func targetLine(value float64) *chart.Line { return &chart.Line{Value: value, Basis: chart.Target} }
