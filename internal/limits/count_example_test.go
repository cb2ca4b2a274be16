package limits_test

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

// printed compares figures with the prints of a worked example, in the decimals of the print.
func printed(t *testing.T, ex example, figures map[string]float64) {
	t.Helper()
	for quantity, got := range figures {
		want, places := ex.published(t, quantity)
		if decimal.Round(got, places) != want {
			t.Errorf("%s, %s: got %.10g, printed %g", ex.ID, quantity, got, want)
		}
	}
}

// beyondAction lists the samples judged beyond an action line, from 1.
func beyondAction(t *testing.T, res limits.Result, groups []limits.Group) (found []int) {
	t.Helper()
	j := judgeOf(t, res)
	for i, g := range groups {
		if side, _ := beyond(j, g.Count.Nonconforming, g.Count.Inspected); side != 0 {
			found = append(found, i+1)
		}
	}
	return found
}

func TestWorkedExamplesOfC(t *testing.T) {
	for _, c := range []struct {
		id, centre, upper, lower string
		places                   int
		lowest                   bool // the print sets the lower line to zero
		beyond                   []int
	}{
		{"nist-wafer-defects-c", "centre line", "UCL", "LCL", 3, false, []int{24}},
		// The print takes the rounded mean.
		{"montgomery-pcb-c", "c-bar", "UCL", "LCL", 2, false, []int{6, 20}},
		{"iso8258-tape-c", "c-bar", "UCL", "LCL (negative, set to 0)", 3, true, nil},
	} {
		ex := workedExample(t, c.id)
		groups := samplesOf(1, ex.Data.C...)
		req := limits.Request{Kind: chart.C, Groups: groups, PublishedDecimals: &c.places, Counts: limits.CountOptions{Method: chart.Normal}}
		res := mustCompute(t, req)
		printed(t, ex, map[string]float64{c.centre: *res.Location.Centre, c.upper: res.Location.UpperAction.Value, c.lower: res.Location.LowerAction.Value})
		if absent := res.Location.LowerAction.Basis == chart.Absent; absent != c.lowest {
			t.Errorf("%s: lower action line absent: got %v, want %v", c.id, absent, c.lowest)
		}
		if got := beyondAction(t, res, groups); !slices.Equal(got, c.beyond) {
			t.Errorf("%s: got samples %v beyond, want %v", c.id, got, c.beyond)
		}
	}
}

func TestWorkedExampleOfCRevised(t *testing.T) {
	ex := workedExample(t, "montgomery-pcb-c")
	groups := samplesOf(1, ex.Data.C...)
	for _, i := range []int{6, 20} {
		groups[i-1].Excluded, groups[i-1].ExclusionReason = true, "cause found"
	}
	res := mustCompute(t, limits.Request{Kind: chart.C, Groups: groups, PublishedDecimals: ptr(6)})
	printed(t, ex, map[string]float64{
		"revised c-bar": *res.Location.Centre, "revised UCL": res.Location.UpperAction.Value, "revised LCL": res.Location.LowerAction.Value,
	})
}

func TestWorkedExampleOfPAndNP(t *testing.T) {
	ex := workedExample(t, "cans-p-and-np")
	groups := samplesOf(ex.Data.N, ex.Data.Nonconforming...)
	res := mustCompute(t, limits.Request{Kind: chart.P, Groups: groups, PublishedDecimals: ptr(4)})
	printed(t, ex, map[string]float64{"p-bar": *res.Location.Centre, "UCL p": res.Location.UpperAction.Value, "LCL p": res.Location.LowerAction.Value})
	if got := beyondAction(t, res, groups); !slices.Equal(got, []int{15, 23}) {
		t.Errorf("p: got samples %v beyond, want 15, 23", got)
	}
	// The print takes p-bar rounded, which is a centre of 11.565 items.
	np := mustCompute(t, limits.Request{Kind: chart.NP, SubgroupSize: 50, Groups: groups, Centre: ptr(11.565), PublishedDecimals: ptr(3)})
	printed(t, ex, map[string]float64{"np UCL": np.Location.UpperAction.Value, "np LCL": np.Location.LowerAction.Value})
	if got := beyondAction(t, np, groups); !slices.Equal(got, []int{15, 23}) {
		t.Errorf("np: got samples %v beyond, want 15, 23", got)
	}
	for _, i := range []int{15, 23} {
		groups[i-1].Excluded, groups[i-1].ExclusionReason = true, "cause found"
	}
	res = mustCompute(t, limits.Request{Kind: chart.P, Groups: groups, PublishedDecimals: ptr(4)})
	printed(t, ex, map[string]float64{
		"revised p-bar (without samples 15 and 23)": *res.Location.Centre, "revised UCL": res.Location.UpperAction.Value, "revised LCL": res.Location.LowerAction.Value,
	})
	if got := beyondAction(t, res, groups); !slices.Equal(got, []int{15, 21, 23}) {
		t.Errorf("revised: got samples %v beyond, want 15, 21, 23", got)
	}
}

func TestWorkedExampleOfU(t *testing.T) {
	ex := workedExample(t, "montgomery-dyed-cloth-u-variable")
	var groups []limits.Group
	for i, x := range ex.Data.Nonconformities {
		groups = append(groups, counted(x, ex.Data.Units[i]))
	}
	// The print takes the rounded mean, and rounds statistics and lines to two decimals.
	res := mustCompute(t, limits.Request{Kind: chart.U, Groups: groups, PublishedDecimals: ptr(2)})
	printed(t, ex, map[string]float64{"u-bar": *res.Location.Centre})
	j := judgeOf(t, res)
	for i, g := range groups {
		sigma, _ := limits.CountSigma(chart.U, *res.Location.Centre, g.Count.Inspected, &res.Model)
		lines := j.Lines(chart.Location, rules.Scale{Centre: *res.Location.Centre, Sigma: sigma, Inspected: g.Count.Inspected})
		printed(t, ex, map[string]float64{
			fmt.Sprintf("u(%d)", i+1): chart.U.Statistic(*g.Count), fmt.Sprintf("UCL(%d)", i+1): *lines.UpperAction, fmt.Sprintf("LCL(%d)", i+1): *lines.LowerAction,
		})
	}
	if got := beyondAction(t, res, groups); got != nil {
		t.Errorf("got samples %v beyond, want none", got)
	}
	if res.Model.Inspected != 10.75 || !near(res.CentreUnrounded, 153/107.5, 1e-15) {
		t.Errorf("got size %g and centre %g, want 10.75 and %g", res.Model.Inspected, res.CentreUnrounded, 153/107.5)
	}
}

// The exact intervals: for one count seen in one unit 0.0253 to 5.5716 (printed in tables of Poisson limits, from memory),
// for 5 of 10 items 0.1871 to 0.8129 (Clopper and Pearson's limits, printed in tables, from memory).
func TestCentreIntervalsAreExact(t *testing.T) {
	c := mustCompute(t, limits.Request{Kind: chart.C, Groups: samplesOf(1, 1)}).Intervals.Centre
	if math.Abs(c.Lower-0.0253) > 5e-5 || math.Abs(c.Upper-5.5716) > 5e-5 {
		t.Errorf("c: got %v, want 0.0253 to 5.5716", *c)
	}
	p := mustCompute(t, limits.Request{Kind: chart.P, Groups: samplesOf(5, 2, 3)}).Intervals.Centre
	if math.Abs(p.Lower-0.1871) > 5e-5 || math.Abs(p.Upper-0.8129) > 5e-5 {
		t.Errorf("p: got %v, want 0.1871 to 0.8129", *p)
	}
	np := mustCompute(t, limits.Request{Kind: chart.NP, SubgroupSize: 5, Groups: samplesOf(5, 2, 3)}).Intervals.Centre
	if !near(np.Lower, 5*p.Lower, 1e-12) || !near(np.Upper, 5*p.Upper, 1e-12) {
		t.Errorf("np: got %v, want five times %v", *np, *p)
	}
}
