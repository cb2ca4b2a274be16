package judge_test

import (
	"bytes"
	"encoding/csv"
	"math"
	"math/big"
	"math/rand/v2"
	"slices"
	"strconv"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/rules"
	"limitary/testdata"
)

// The oracle computes statistics as rational numbers from the text of the readings, and scales from the tabled chart
// factors. Its hits come from a plan of its own for each trace, fed with those statistics; the plans themselves are
// checked by brute force where they live.

func onPaper(x float64) *big.Rat {
	r, ok := new(big.Rat).SetString(strconv.FormatFloat(x, 'g', -1, 64))
	if !ok {
		panic(x)
	}
	return r
}

func publish(r *big.Rat, places int) float64 {
	if places < 0 {
		f, _ := r.Float64()
		return f
	}
	f, err := strconv.ParseFloat(r.FloatString(places), 64)
	if err != nil {
		panic(err)
	}
	return f + 0
}

func paperMean(xs []float64) *big.Rat {
	sum := new(big.Rat)
	for _, x := range xs {
		sum.Add(sum, onPaper(x))
	}
	return sum.Quo(sum, big.NewRat(int64(len(xs)), 1))
}

func paperRange(xs []float64) *big.Rat {
	low, high := onPaper(xs[0]), onPaper(xs[0])
	for _, x := range xs {
		if r := onPaper(x); r.Cmp(low) < 0 {
			low = r
		} else if r.Cmp(high) > 0 {
			high = r
		}
	}
	return high.Sub(high, low)
}

// paperSD gives the root, exact to 300 bits and then rounded twice as the published one is: to float64, to places. Clear
// is false where the last rounding hangs on the last bits of float64.
func paperSD(xs []float64, places int) (s float64, clear bool) {
	mean, squares := paperMean(xs), new(big.Rat)
	for _, x := range xs {
		d := new(big.Rat).Sub(onPaper(x), mean)
		squares.Add(squares, d.Mul(d, d))
	}
	variance := new(big.Float).SetPrec(300).SetRat(squares.Quo(squares, big.NewRat(int64(len(xs)-1), 1)))
	root, _ := new(big.Float).SetPrec(300).Sqrt(variance).Float64()
	low, high := publish(onPaper(root*(1-1e-14)), places), publish(onPaper(root*(1+1e-14)), places)
	return publish(onPaper(root), places), low == high
}

// factors gives d2, d3 and c4 of the table in testdata: multiple precision integration, see its README.
func factors(tb testing.TB) map[int][3]float64 {
	tb.Helper()
	file, err := testdata.Files.ReadFile("constants.csv")
	if err != nil {
		tb.Fatal(err)
	}
	rows, err := csv.NewReader(bytes.NewReader(file)).ReadAll()
	if err != nil {
		tb.Fatal(err)
	}
	out := map[int][3]float64{}
	for _, row := range rows[1:] {
		n, err := strconv.Atoi(row[0])
		if err != nil {
			tb.Fatal(err)
		}
		var f [3]float64
		for i := range f {
			if f[i], err = strconv.ParseFloat(row[1+i], 64); err != nil {
				tb.Fatal(err)
			}
		}
		out[n] = f
	}
	return out
}

func near(got, want float64) bool { return math.Abs(got-want) <= 1e-12*math.Abs(want) }

// TestSubgroupsOfUnequalSizeEqualTheOracle judges subgroups with readings missing, and some with none.
func TestSubgroupsOfUnequalSizeEqualTheOracle(t *testing.T) {
	const seed = 20260301
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	table := factors(t)
	hits, skipped := 0, 0
	for range 300 {
		kind, nominal := []chart.Kind{chart.XbarR, chart.XbarS}[r.IntN(2)], 2+r.IntN(8)
		places, sigma := 1+r.IntN(4), float64(1+r.IntN(40))/10
		f := table[nominal]
		dispersion := [2]float64{f[0] * sigma, f[1] * sigma}
		if kind == chart.XbarS {
			dispersion = [2]float64{f[2] * sigma, math.Sqrt(1-f[2]*f[2]) * sigma}
		}
		l := judge.Limits{Kind: kind, SubgroupSize: nominal, Places: places, ProcessSigma: sigma, Traces: [chart.Roles]*judge.Trace{
			trace(10, sigma/math.Sqrt(float64(nominal)), set(t, "nelson-1984")...),
			trace(decimal.Round(dispersion[0], places), dispersion[1], beyond(1, 1, 3), sameSide(4), trend(4), rules.Spec{Kind: rules.Alternating, N: 5})}}
		j := mustNew(t, l)
		st := j.NewState()
		plans := [chart.Roles]*rules.Plan{}
		states := [chart.Roles]*rules.State{}
		for role, tr := range l.Traces {
			plan, err := rules.Compile(tr.Trace, places, tr.Rules)
			if err != nil {
				t.Fatal(err)
			}
			plans[role], states[role] = plan, plan.Start(false)
		}
		shift := 0.0
		for i := range 60 {
			n := max(0, nominal-max(0, r.IntN(nominal+4)-4))
			if r.IntN(12) == 0 {
				shift = r.NormFloat64() * sigma
			}
			readings := make([]float64, n)
			for k := range readings {
				readings[k] = decimal.Round(10+shift+r.NormFloat64()*sigma*(0.2+r.Float64()), places-r.IntN(2))
			}
			pt := judge.Point{Readings: readings, Break: r.IntN(25) == 0}
			var v judge.Verdict
			j.Judge(st, pt, &v)
			if pt.Break {
				for role := range plans {
					plans[role].Reset(states[role], false)
				}
			}
			if n == 0 {
				if v.Standing != judge.NotJudged || v.Reason != judge.NoResult {
					t.Fatalf("no readings: %+v", v)
				}
				continue
			}
			var want []judge.Hit
			worst := judge.Clear
			take := func(role chart.Role, x float64, centre, s float64) {
				got := v.Traces[role]
				if !got.Point || got.Statistic != x || !near(got.Scale.Centre, centre) || !near(got.Scale.Sigma, s) {
					t.Fatalf("%v of %v, %s: got %+v, want %v at %v/%v", kind, readings, role, got, x, centre, s)
				}
				plans[role].Judge(states[role], []float64{x}, []rules.Scale{got.Scale}, func(h rules.Hit) {
					want = append(want, judge.Hit{Role: role, Rule: h.Rule, Side: h.Side, WindowBack: h.WindowBack, FirstBack: h.FirstBack})
					worst = max(worst, judge.StandingOf(l.Traces[role].Rules[h.Rule].Consequence))
				})
			}
			take(chart.Location, publish(paperMean(readings), places), 10, sigma/math.Sqrt(float64(n)))
			switch {
			case n == 1:
				if v.Traces[chart.Dispersion].Point {
					t.Fatalf("one reading has a dispersion point: %+v", v)
				}
			case kind == chart.XbarR:
				f := table[n]
				take(chart.Dispersion, publish(paperRange(readings), places), decimal.Round(f[0]*sigma, places), f[1]*sigma)
			default:
				c4 := table[n][2]
				s, clear := paperSD(readings, places)
				if !clear {
					skipped++
					s = v.Traces[chart.Dispersion].Statistic
				}
				take(chart.Dispersion, s, decimal.Round(c4*sigma, places), math.Sqrt(1-c4*c4)*sigma)
			}
			if !slices.Equal(v.Hits, want) || v.Standing != worst || v.Reason != judge.Judged {
				t.Fatalf("result %d, %v: got %v %+v, want %v %+v", i, readings, v.Standing, v.Hits, worst, want)
			}
			hits += len(want)
		}
	}
	if hits < 1000 || skipped > 20 {
		t.Errorf("%d hits, %d roots too near to call", hits, skipped)
	}
}

// TestLinesAndHitsAgree: a point completes the rule about a line exactly where its published statistic lies beyond the
// published line.
func TestLinesAndHitsAgree(t *testing.T) {
	const seed = 20260304
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	line := func(kind rules.LineKind) rules.Spec { return rules.Spec{Kind: rules.BeyondLine, Line: kind} }
	hits := 0
	for range 60 {
		places := r.IntN(4)
		l := judge.Limits{Kind: chart.XbarR, SubgroupSize: 4, Places: places, ProcessSigma: 2.06, Traces: [chart.Roles]*judge.Trace{
			trace(10, 1.03, line(rules.ActionLine), line(rules.WarningLine)),
			trace(decimal.Round(4.241, places), 1.813, line(rules.ActionLine), line(rules.WarningLine))}}
		for _, tr := range l.Traces {
			if r.IntN(2) == 0 {
				tr.UpperWarning = chart.Line{Basis: chart.MethodCriterion, Value: 6 + 6*r.Float64()}
			}
			if r.IntN(3) == 0 {
				tr.LowerAction = chart.Line{Basis: chart.Absent}
			}
		}
		j := mustNew(t, l)
		st := j.NewState()
		for range 80 {
			pt := judge.Point{}
			for range 1 + r.IntN(4) {
				pt.Readings = append(pt.Readings, decimal.Round(10+3*r.NormFloat64(), 1))
			}
			v := verdictsOf(j, st, pt)[0]
			for role, tv := range v.Traces {
				if !tv.Point {
					continue
				}
				lines := j.Lines(chart.Role(role), tv.Scale)
				over := func(p *float64) bool { return p != nil && tv.Statistic > *p }
				under := func(p *float64) bool { return p != nil && tv.Statistic < *p }
				for rule, want := range [][2]bool{{over(lines.UpperAction), under(lines.LowerAction)}, {over(lines.UpperWarning), under(lines.LowerWarning)}} {
					for side, want := range map[rules.Side]bool{rules.Upper: want[0], rules.Lower: want[1]} {
						h := judge.Hit{Role: chart.Role(role), Rule: rule, Side: side}
						if got := slices.Contains(v.Hits, h); got != want {
							t.Fatalf("%+v: hit %+v is %t, want %t; lines %+v", tv, h, got, want, lines)
						}
						if want {
							hits++
						}
					}
				}
			}
		}
	}
	if hits < 500 {
		t.Errorf("only %d hits", hits)
	}
}

// TestTheLargestReadingsArePoints: the widest values a reading can have give verdicts, not panics.
func TestTheLargestReadingsArePoints(t *testing.T) {
	const huge = math.MaxFloat64
	for _, places := range []int{decimal.Unrounded, 0, 15} {
		j := mustNew(t, individuals(t, places))
		got := verdictsOf(j, j.NewState(), measured(huge), measured(-huge), measured(huge), measured(5e-324), measured(10))
		if want := []judge.Standing{judge.StopAt, judge.StopAt, judge.StopAt}; !slices.Equal(standings(got[:3]), want) {
			t.Errorf("standings %v, want STOP for the huge ones", standings(got))
		}
		j.Series([]float64{huge, -huge, huge, -huge, huge, -huge, huge, -huge, 10})
		for _, kind := range []chart.Kind{chart.XbarR, chart.XbarS} {
			l := individuals(t, places)
			l.Kind, l.SubgroupSize, l.ProcessSigma = kind, 3, 1.7
			j := mustNew(t, l)
			for _, v := range verdictsOf(j, j.NewState(), measured(huge, -huge, 1), measured(huge, huge, -huge), measured(1e200, 1, 2), measured(10, 10, -huge)) {
				if x := v.Traces[chart.Dispersion].Statistic; v.Standing != judge.StopAt || !(x > 1e199 && x <= huge) {
					t.Errorf("%s: %+v, want STOP and a finite spread", kind, v)
				}
			}
			for _, v := range verdictsOf(j, j.NewState(), measured(huge, huge, huge), measured(5e-324, -5e-324, 0)) {
				if x := v.Traces[chart.Dispersion].Statistic; x > 1e-300 {
					t.Errorf("%s: spread %v, want next to none", kind, x)
				}
			}
		}
	}
}
