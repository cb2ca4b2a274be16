package service

import (
	"fmt"
	"math"
	"math/rand/v2"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// story is a chart of single values with centre 10 and sigma 1 in mg/L, one accumulating rule, and results r1, r2, ... a
// day apart from 2020-01-01.
type story struct {
	rule      rules.Spec
	headStart bool
	size      int
	model     chart.Model
	readings  [][]string
}

func values(xs ...float64) (readings [][]string) {
	for _, x := range xs {
		readings = append(readings, []string{strconv.FormatFloat(x, 'f', -1, 64)})
	}
	return readings
}

// explainer explains the last result, of which the points shown reach back to the shown newest ones.
func (s story) explainer(tb testing.TB, shown int) *explainer {
	tb.Helper()
	centre, sigma, size := 10.0, 1.0, max(1, s.size)
	kind := chart.Individuals
	if size > 1 {
		kind, sigma = chart.XbarS, sigma/math.Sqrt(float64(size))
	}
	s.rule.ID, s.rule.Consequence = "gradual", rules.Act
	specs := []rules.Spec{s.rule, {ID: "far", Kind: rules.Beyond, Consequence: rules.Look, K: 1, M: 1, Z: 6}} // a bound can enter the second
	j, err := judge.New(judge.Limits{Kind: kind, SubgroupSize: size, Places: 2, ProcessSigma: 1, Model: s.model,
		Traces: [chart.Roles]*judge.Trace{{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: specs}, nil}})
	if err != nil {
		tb.Fatal(err)
	}
	st, v := j.NewState(), judge.Verdict{}
	j.Reset(st, s.headStart)
	var results []store.StoredResult
	var points []definition.Result
	for i, readings := range s.readings {
		r := store.StoredResult{ID: int64(i + 1), Result: definition.Result{
			Source: "lims", SourceID: fmt.Sprintf("r%d", i+1), Readings: readings, MeasuredAt: time.Date(2020, 1, 1+i, 8, 0, 0, 0, time.UTC),
		}}
		pt, err := r.Result.Point(definition.Chart{Kind: kind, SubgroupSize: size})
		if err != nil {
			tb.Fatal(err)
		}
		j.Judge(st, pt, &v)
		at := v.Traces[chart.Location]
		r.Verdict = store.Verdict{Standing: v.Standing, ByBound: v.ByBound, Version: 1}
		r.Verdict.Traces[chart.Location] = store.TraceVerdict{Point: at.Point, Statistic: at.Statistic, Scale: at.Scale}
		results = append(results, r)
		if at.Point {
			points = append(points, r.Result)
		}
		for _, h := range v.Hits {
			first := points[len(points)-1-h.FirstBack]
			results[i].Verdict.Hits = append(results[i].Verdict.Hits, store.Hit{
				Role: h.Role, Rule: specs[h.Rule].ID, Side: h.Side, FirstCounting: store.Key{Source: "lims", SourceID: first.SourceID, MeasuredAt: first.MeasuredAt},
			})
		}
	}
	last := len(results) - 1
	e := &explainer{judge: j, result: results[last], before: results[max(0, last-shown):last], whole: shown >= last}
	e.version.Decimals, e.version.Unit = 2, "mg/L"
	return e
}

func (s story) want(t *testing.T, shown int, want ...string) {
	t.Helper()
	got, err := s.explainer(t, shown).changeSentences()
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(got, want) {
		t.Errorf("got:\n%s\nwant:\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
}

var sum = rules.Spec{Kind: rules.CUSUM, Reference: 0.5, Interval: 5}

// Montgomery, Introduction to Statistical Quality Control, tables 9.1 and 9.2, printed (from memory): at observation 29
// the sum is 5.28, seven observations after it was zero, and the new mean is estimated at 11.25.
func TestASumTellsItsSizeItsBeginningAndTheNewLevel(t *testing.T) {
	xs := []float64{9.45, 7.99, 9.29, 11.66, 12.16, 10.18, 8.04, 11.46, 9.2, 10.34, 9.03, 11.47, 10.51, 9.4, 10.08,
		9.37, 10.62, 10.31, 8.52, 10.84, 10.9, 9.33, 12.29, 11.5, 10.6, 11.08, 10.38, 11.62, 11.31}
	began := "The change is estimated to have begun with result r23, measured 2020-01-23T08:00:00Z, the first since that sum was last zero."
	upper := []string{
		"The upper sum of rule gradual is 5.28 sigmas, its limit 5; it has been away from zero for 7 points.",
		began,
		"The new level since then is estimated at 10.00 + (0.5 + 5.28 / 7) x 1 = 11.25.",
	}
	s := story{rule: sum, readings: values(xs...)}
	s.want(t, len(xs), upper...)
	t.Run("as much is known where earlier points are not shown", func(t *testing.T) { s.want(t, 6, upper...) })
	t.Run("a sum that began before what is shown keeps its beginning and gives no size", func(t *testing.T) {
		s.want(t, 5, "The upper sum of rule gradual is beyond its limit of 5 sigmas; it began before the 6 points shown here, so its size is not told.", began)
	})
	t.Run("the lower side is the mirror image", func(t *testing.T) {
		mirrored := make([]float64, len(xs))
		for i, x := range xs {
			mirrored[i] = math.Round(100*(20-x)) / 100
		}
		story{rule: sum, readings: values(mirrored...)}.want(t, len(xs),
			strings.Replace(upper[0], "upper", "lower", 1), began, "The new level since then is estimated at 10.00 - (0.5 + 5.28 / 7) x 1 = 8.75.")
	})
	t.Run("a rule that did not complete tells nothing", func(t *testing.T) { story{rule: sum, readings: values(xs[:28]...)}.want(t, 28) })
}

func TestASumOfOnePoint(t *testing.T) {
	story{rule: sum, readings: values(10, 15.6)}.want(t, 1,
		"The upper sum of rule gradual is 5.1 sigmas, its limit 5; it has been away from zero for 1 point.",
		"The change is estimated to have begun with result r2, measured 2020-01-02T08:00:00Z, the first since that sum was last zero.",
		"The new level since then is estimated at 10.00 + (0.5 + 5.1 / 1) x 1 = 15.60.")
}

// Z are 2, a bound, 2.2 and 2.5: the bound is a point, because it proves the other rule; it enters no sum, and so no level.
func TestABoundInASumIsNotCountedForTheLevel(t *testing.T) {
	story{rule: sum, readings: [][]string{{"9"}, {"12"}, {">17"}, {"12.2"}, {"12.5"}}}.want(t, 4,
		"The upper sum of rule gradual is 5.2 sigmas, its limit 5; it has been away from zero for 3 points, bounds, which enter no sum, left out: 1.",
		"The change is estimated to have begun with result r2, measured 2020-01-02T08:00:00Z, the first since that sum was last zero.",
		"The new level since then is estimated at 10.00 + (0.5 + 5.2 / 3) x 1 = 12.23.")
}

// With a head start of 2.5 the sums are 3.5 and 5.1, 2.6 in 2 points beyond the head start: a mean of 10 + 0.5 + 1.3, that
// of the two readings.
func TestAHeadStartIsTakenOffTheLevel(t *testing.T) {
	started := sum
	started.HeadStart = 2.5
	began := "The change is estimated to have begun with result r1, measured 2020-01-01T08:00:00Z, the first since that sum was last zero."
	story{rule: started, headStart: true, readings: values(11.5, 12.1)}.want(t, 1,
		"The upper sum of rule gradual is 5.1 sigmas, its limit 5; it has been away from zero for 2 points, and began at the head start of 2.5.",
		began, "The new level since then is estimated at 10.00 + (0.5 + (5.1 - 2.5) / 2) x 1 = 11.80.")
	t.Run("without it the same points add up from zero", func(t *testing.T) {
		story{rule: started, readings: values(13.1, 13)}.want(t, 1,
			"The upper sum of rule gradual is 5.1 sigmas, its limit 5; it has been away from zero for 2 points.",
			began, "The new level since then is estimated at 10.00 + (0.5 + 5.1 / 2) x 1 = 13.05.")
	})
	t.Run("where its points fit both, that is said", func(t *testing.T) {
		for _, headStart := range []bool{false, true} {
			story{rule: started, headStart: headStart, readings: values(15.8)}.want(t, 1,
				"The upper sum of rule gradual is 5.3 sigmas, its limit 5; it has been away from zero for 1 point, counted from zero; a head start of 2.5, where its segment began with one, comes on top.",
				began, "The new level since then is estimated at 10.00 + (0.5 + 5.3 / 1) x 1 = 15.80.")
		}
	})
}

// Subgroups of 4 and of 1 have sigmas 0.5 and 1, so there is a shift in sigmas and no one level: z = 3, 2 and 3.
func TestPointsOfUnequalScaleHaveAShiftAndNoLevel(t *testing.T) {
	four := func(x string) []string { return []string{x, x, x, x} }
	story{rule: sum, size: 4, readings: [][]string{four("9"), four("11.5"), {"12"}, four("11.5")}}.want(t, 3,
		"The upper sum of rule gradual is 6.5 sigmas, its limit 5; it has been away from zero for 3 points.",
		"The change is estimated to have begun with result r2, measured 2020-01-02T08:00:00Z, the first since that sum was last zero.",
		"The mean since then is estimated at 0.5 + 6.5 / 3 = 2.66667 sigmas, each point's own, on the upper side of the centre.")
}

// On a square-root scale the level 14 is the reading 196.
func TestALevelOnAnotherScaleIsGivenInTheUnitAsWell(t *testing.T) {
	story{rule: sum, model: chart.Model{Transform: chart.Transform{Kind: chart.SquareRoot}}, readings: values(100, 196, 196)}.want(t, 2,
		"The upper sum of rule gradual is 7 sigmas, its limit 5; it has been away from zero for 2 points.",
		"The change is estimated to have begun with result r2, measured 2020-01-02T08:00:00Z, the first since that sum was last zero.",
		"The new level since then is estimated at 10.00 + (0.5 + 7 / 2) x 1 = 14.00, which is 196 mg/L.")
}

var average = rules.Spec{Kind: rules.EWMA, Lambda: 0.2, Limit: 3, Asymptotic: true}

// Averages: 0.2·(-1) = -0.2, then +0.8·(-0.2)+0.4 = 0.24, 0.592, 0.8736 and 1.09888, the limit being 3·√(0.2/1.8) = 1.
func TestAnAverageTellsItsSizeAndItsBeginning(t *testing.T) {
	s := story{rule: average, readings: values(9, 12, 12, 12, 12)}
	s.want(t, 4, "The average of rule gradual lies 1.09888 sigmas above the centre, its limit 1.",
		"The change is estimated to have begun with result r2, measured 2020-01-02T08:00:00Z, the first after the average last lay at the centre or on its other side.")
	t.Run("below", func(t *testing.T) {
		story{rule: average, readings: values(11, 8, 8, 8, 8)}.want(t, 4, "The average of rule gradual lies 1.09888 sigmas below the centre, its limit 1.",
			"The change is estimated to have begun with result r2, measured 2020-01-02T08:00:00Z, the first after the average last lay at the centre or on its other side.")
	})
	t.Run("a bound does not begin a change", func(t *testing.T) {
		story{rule: average, readings: [][]string{{"9"}, {">17"}, {"12"}, {"12"}, {"12"}, {"12"}}}.want(t, 5,
			"The average of rule gradual lies 1.09888 sigmas above the centre, its limit 1.",
			"The change is estimated to have begun with result r3, measured 2020-01-03T08:00:00Z, the first after the average last lay at the centre or on its other side.")
	})
	t.Run("on one side from the first point", func(t *testing.T) {
		story{rule: average, readings: values(16)}.want(t, 0, "The average of rule gradual lies 1.2 sigmas above the centre, its limit 1.",
			"The average has lain on this side since the first point of its segment, result r1, so the change is estimated to have begun with it or before.")
	})
	t.Run("with too little shown it is not told", func(t *testing.T) {
		// 0.8^4 = 0.4096 (computed).
		s.want(t, 3, "The average of rule gradual is beyond its limit; it began before the 4 points shown here, and what came before them still weighs 0.4096 in it, so neither its size nor the beginning of the change is told.")
	})
}

// After 42 points the weight of what came before is 0.8^42 = 8.5e-5 (computed), so a change is dated from there on only.
func TestAnAverageOfALongSegmentIsDatedWhereItIsKnown(t *testing.T) {
	const shown = 64
	level := func(n int, x float64) []float64 { return slices.Repeat([]float64{x}, n) }
	size := "The average of rule gradual lies 1.2 sigmas above the centre, its limit 1."
	t.Run("within what is known", func(t *testing.T) {
		story{rule: average, readings: values(slices.Concat(level(100, 9.9), level(5, 12))...)}.want(t, shown,
			"The average of rule gradual lies 1.31187 sigmas above the centre, its limit 1.", // 2 - 2.1·0.8^5 = 1.311872 (computed)
			"The change is estimated to have begun with result r101, measured 2020-04-10T08:00:00Z, the first after the average last lay at the centre or on its other side.")
	})
	t.Run("before what is known", func(t *testing.T) {
		story{rule: average, readings: values(slices.Concat(level(40, 9.9), level(65, 11.2))...)}.want(t, shown, size,
			"The average has lain on this side at least since result r82, measured 2020-03-22T08:00:00Z; the change began before what is shown here.")
	})
}

var (
	sumText  = regexp.MustCompile(`^The (upper|lower) sum of rule gradual is (\S+) sigmas, .* for (\d+) points?\.$`)
	dateText = regexp.MustCompile(`^The change is estimated to have begun with result r(\d+),`)
	levelEnd = regexp.MustCompile(` = (\S+)\.$`)
)

// The sentences against the definitions, on drawn series: a sum is the largest of all sums that end at the newest point,
// the level is the mean of the points in it, and an average is a weighted sum.
func TestSentencesAgreeWithTheDefinitions(t *testing.T) {
	const seed = 20261202
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	sums, averages := 0, 0
	for range 1500 {
		rule := []rules.Spec{sum, average}[r.IntN(2)]
		var zs, xs []float64
		step := 0.5 * float64(r.IntN(9)-4)
		for range 5 + r.IntN(50) {
			z := float64(r.IntN(301)-150)/100 + step*float64(len(zs)/10)/2
			zs, xs = append(zs, z), append(xs, math.Round(100*(10+z))/100)
		}
		got, err := story{rule: rule, readings: values(xs...)}.explainer(t, len(xs)).changeSentences()
		if err != nil {
			t.Fatal(err)
		}
		if len(got) < 2 {
			continue
		}
		if date := dateText.FindStringSubmatch(got[1]); rule.Kind == rules.EWMA && date != nil {
			averages++
			if want := turnOf(zs, rule.Lambda); date[1] != strconv.Itoa(want) {
				t.Fatalf("z %v: %q, want r%d", zs, got[1], want)
			}
		}
		if rule.Kind != rules.CUSUM {
			continue
		}
		sums++
		said, date, level := sumText.FindStringSubmatch(got[0]), dateText.FindStringSubmatch(got[1]), levelEnd.FindStringSubmatch(got[2])
		if said == nil || date == nil || level == nil {
			t.Fatalf("not understood: %q", got)
		}
		sign := map[string]float64{"upper": 1, "lower": -1}[said[1]]
		sum, points := largestTail(zs, sign, rule.Reference)
		mean := 0.0
		for _, x := range xs[len(xs)-points:] {
			mean += x / float64(points)
		}
		saidSum, _ := strconv.ParseFloat(said[2], 64)
		saidLevel, _ := strconv.ParseFloat(level[1], 64)
		if math.Abs(saidSum-sum) > 1e-4 || said[3] != strconv.Itoa(points) || date[1] != strconv.Itoa(len(xs)-points+1) || math.Abs(saidLevel-mean) > 0.0050001 {
			t.Fatalf("z %v: %q, want %g over %d points with mean %g", zs, got, sum, points, mean)
		}
	}
	if sums < 100 || averages < 100 {
		t.Errorf("only %d sums and %d averages", sums, averages)
	}
}

func largestTail(zs []float64, sign, k float64) (sum float64, points int) {
	tail := 0.0
	for i := len(zs) - 1; i >= 0; i-- {
		if tail += sign*zs[i] - k; tail > sum+1e-9 {
			sum, points = tail, len(zs)-i
		}
	}
	return sum, points
}

// turnOf gives the first of the points, counted from 1, since which the average has stayed on the side it has now.
func turnOf(zs []float64, lambda float64) int {
	at := func(n int) (e float64) {
		for i, z := range zs[:n] {
			e += lambda * math.Pow(1-lambda, float64(n-1-i)) * z
		}
		return e
	}
	n := len(zs)
	for n > 1 && at(n-1)*at(len(zs)) > 0 {
		n--
	}
	return n
}
