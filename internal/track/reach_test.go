package track_test

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/rules"
	"limitary/internal/track"
)

// quiet gives an individuals chart with n results a minute apart, scattered about the centre in steps of half a sigma,
// under rules whose longest window is 15 points (8 on the dispersion trace).
func quiet(tb testing.TB, n int, reading func(i int) string) *model {
	tb.Helper()
	set, ok := rules.SetByID("nelson-1984")
	if !ok {
		tb.Fatal("no set nelson-1984")
	}
	dispersion := []rules.Spec{{ID: "r", Kind: rules.Beyond, K: 1, M: 1, Z: 3, Consequence: rules.Stop}, {ID: "s", Kind: rules.SameSide, N: 8, Consequence: rules.Act}}
	s := &schedule{kind: chart.Individuals, size: 1}
	s.templates = append(s.templates, content(chart.Individuals, 1, 1, 10, set.Rules, dispersion), content(chart.Individuals, 1, 1, 10.5, set.Rules, dispersion))
	m := newModel(s)
	m.checked = false
	m.apply(op{kind: approve, minute: -1})
	rows := make([]row, n)
	for i := range rows {
		rows[i] = row{n: i, minute: 10 * i, readings: []string{reading(i)}}
	}
	m.apply(op{kind: post, rows: rows})
	if len(m.problems) > 0 {
		tb.Fatal(m.problems)
	}
	if m.judged != n {
		tb.Fatalf("judged %d, want %d", m.judged, n)
	}
	return m
}

func scattered(seed uint64) func(int) string {
	random := rand.New(rand.NewPCG(seed, 0))
	return func(int) string { return [...]string{"9", "9.5", "10", "10", "10.5", "11"}[random.IntN(6)] }
}

// longest is the longest window of quiet's rules.
const longest = 15

// TestRegionsStop changes one thing in a long quiet track and counts the results judged again: those between the first
// and the last changed place, the next moving range, and one window.
func TestRegionsStop(t *testing.T) {
	const n, seed = 10000, 7
	m := quiet(t, n, scattered(seed))
	// A region goes on for a window of points after the last one that differs, which may be the next moving range, and
	// needs one more that agrees.
	const beyond = longest + 2
	for _, c := range []struct {
		name string
		op   op
		// span is how many results lie from the first to the last changed place.
		span int
	}{
		{"late result at the head", op{kind: post, rows: []row{{n: n, minute: -1, readings: []string{"13"}}}}, 1},
		{"late result after the first", op{kind: post, rows: []row{{n: n + 1, minute: 5, readings: []string{"10"}}}}, 1},
		{"late result in the middle", op{kind: post, rows: []row{{n: n + 2, minute: 50001, readings: []string{"14"}}}}, 1},
		{"late repeat", op{kind: post, rows: []row{{n: n + 3, minute: 60001, readings: []string{"14"}, repeat: true}}}, 1},
		{"result at the end", op{kind: post, rows: []row{{n: n + 4, minute: 10 * n, readings: []string{"10"}}}}, 1},
		{"two late results far apart", op{kind: post, rows: []row{{n: n + 5, minute: 1001, readings: []string{"14"}}, {n: n + 6, minute: 90001, readings: []string{"14"}}}}, 2 + beyond},
		{"reading amended", op{kind: amendReadings, n: 100, row: row{readings: []string{"7"}}}, 1},
		{"same reading amended", op{kind: amendReadings, n: 100, row: row{readings: []string{"7"}}}, 1},
		{"voided", op{kind: void, n: 200}, 1},
		{"made a repeat", op{kind: amendRole, n: 300}, 1},
		{"moved later by 50 results", op{kind: amendTime, n: 400, row: row{minute: 4501}}, 51},
		{"moved earlier by 50 results", op{kind: amendTime, n: 500, row: row{minute: 4501}}, 51},
		{"moved by less than a result", op{kind: amendTime, n: 600, row: row{minute: 6001}}, 1},
		{"mark with a break", op{kind: addMark, minute: 70001, isBreak: true}, 1},
		{"that mark voided", op{kind: voidMark, n: 0}, 1},
		{"version of the same numbers from the last 50", op{kind: approve, minute: 10 * (n - 50)}, 51},
	} {
		t.Run(c.name, func(t *testing.T) {
			m.apply(c.op)
			if len(m.problems) > 0 {
				t.Fatal(m.problems)
			}
			if m.judged < c.span || m.judged > c.span+beyond {
				t.Errorf("judged %d results, want %d to %d", m.judged, c.span, c.span+beyond)
			}
			t.Logf("judged %d", m.judged)
		})
	}
	t.Run("all of it is as posted at once and in order", func(t *testing.T) { wantAtOnce(t, m) })
}

// TestRegionsEndWithTheSegment counts what a late result just before a break has judged again.
func TestRegionsEndWithTheSegment(t *testing.T) {
	m := quiet(t, 1000, scattered(8))
	for _, o := range []op{{kind: approve, template: 1, minute: 5000}, {kind: addMark, minute: 8000, isBreak: true}} {
		m.apply(o)
	}
	for _, minute := range []int{4985, 7985} { // two results are left in the segment
		m.apply(op{kind: post, rows: []row{{n: 10000 + minute, minute: minute, readings: []string{"14"}}}})
		if m.judged != 2 {
			t.Errorf("a late result at %d judged %d results, want 2", minute, m.judged)
		}
	}
	// A version put in between judges its own stretch and the start of the next segment, which starts differently if
	// anything: here it does not.
	m.apply(op{kind: approve, template: 1, minute: 8000})
	if m.judged > 200+longest+2 {
		t.Errorf("a version from 8000 on judged %d results, want about 200", m.judged)
	}
	wantAtOnce(t, m)
}

// TestRegionsStopWithoutPoints has late results on a track where one trace, or both, have no point at all: blanks below
// what can be measured.
func TestRegionsStopWithoutPoints(t *testing.T) {
	const n = 10000
	measured := []op{
		{kind: post, rows: []row{{n: n + 1, minute: 50001, readings: []string{"14"}}}},
		{kind: amendReadings, n: 400, row: row{readings: []string{"10"}}},
	}
	for _, c := range []struct {
		name, reading string
		point         bool
		ops           []op
	}{
		// A bound beyond the lower action line proves a STOP.
		{"no moving range", "<6", true, measured},
		// One inside it proves nothing. A measured value among them is remembered to the end of the segment.
		{"no point at all", "<9", false, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			m := quiet(t, n, func(int) string { return c.reading })
			verdict := m.track("").places[n/2].verdict
			if got := bytes.Contains(verdict, []byte(`"l":`)); got != c.point || bytes.Contains(verdict, []byte(`"d":`)) {
				t.Fatalf("a verdict is %s, want a location point: %v, and none of dispersion", verdict, c.point)
			}
			for _, o := range append([]op{
				{kind: post, rows: []row{{n: n, minute: 5, readings: []string{c.reading}}}},
				{kind: amendTime, n: 600, row: row{minute: 6105}},
				{kind: void, n: 800},
			}, c.ops...) {
				m.apply(o)
				if most := longest + 13; m.judged > most {
					t.Errorf("%s: judged %d results, want at most %d", o, m.judged, most)
				}
			}
			wantAtOnce(t, m)
		})
	}
}

// TestSumsReachBackAsFarAsTheyBegan has sums that begin hundreds of points before the change, two of them at different
// points, behind more quiet results than a run keeps in mind.
func TestSumsReachBackAsFarAsTheyBegan(t *testing.T) {
	b := newBench(t, location(
		rules.Spec{ID: "late", Kind: rules.CUSUM, Reference: 0.5, Interval: 20, Consequence: rules.Act},
		rules.Spec{ID: "early", Kind: rules.CUSUM, Interval: 30, Consequence: rules.Act}))
	var rows []row
	for _, part := range []struct {
		n       int
		reading string
	}{{1500, "10"}, {150, "10.3"}, {150, "11"}} {
		for range part.n {
			rows = append(rows, b.row(b.n+1, part.reading))
		}
	}
	b.do(op{kind: post, rows: rows})
	b.wantSignals("1 OPEN 1501: 1601-1800", "2 OPEN 1651: 1691-1800")
	b.do(op{kind: amendReadings, n: 1780, row: row{readings: []string{"10.9"}}})
	if b.judged != 21 {
		t.Errorf("judged %d results, want 21", b.judged)
	}
	b.do(op{kind: amendReadings, n: 1640, row: row{readings: []string{"-90"}}})
	b.do(op{kind: void, n: 1640})
	b.series(1801, "11", "11")
}

// wantAtOnce compares with the same results, versions and marks judged from the first result on.
func wantAtOnce(t *testing.T, m *model) {
	t.Helper()
	runner := track.NewRunner(m.timeline(""), nil)
	for _, p := range m.track("").places {
		it := p.Item
		o, err := runner.Step(&it)
		if err != nil {
			t.Fatal(err)
		}
		if o.Version != p.version || !bytes.Equal(o.Encode(), p.verdict) || !bytes.Equal(o.State, p.state) {
			t.Fatalf("result %d: stored %s by version %d, want %s by %d", p.ID, p.verdict, p.version, o.Encode(), o.Version)
		}
	}
}

// TestRegionsEndWithinTheLongestWindow has every region of random schedules without sums end within a window of points
// after the last place that a post, an amendment or a void changed.
func TestRegionsEndWithinTheLongestWindow(t *testing.T) {
	const schedules, opsMax, seed = 300, 40, 20260303
	regions := 0
	for i := range schedules {
		random := rand.New(rand.NewPCG(seed, uint64(i)))
		s := drawSchedule(random.IntN, opsMax)
		for k := range s.templates {
			for role := range 2 {
				if tr := *trace(&s.templates[k], role); tr != nil {
					for r := range tr.Rules {
						withoutSums(&tr.Rules[r])
					}
				}
			}
		}
		m := newModel(s)
		m.checked = false
		m.watch = func(t *trackModel, st stir, reg *track.Region) {
			if st.from == nil {
				regions++
				if problem := tooFar(m.timeline(t.lot), st, reg); problem != "" {
					m.problem("%s", problem)
				}
			}
		}
		if problems := m.run(s, census{}); len(problems) > 0 {
			t.Fatalf("seed %d, schedule %d:\n%s%s", seed, i, s, problems)
		}
	}
	t.Logf("seed %d, %d schedules, %d regions", seed, schedules, regions)
}

// withoutSums replaces a rule that sums by one with a window.
func withoutSums(s *rules.Spec) {
	if s.Kind == rules.EWMA || s.Kind == rules.CUSUM {
		*s = rules.Spec{ID: s.ID, Kind: rules.SameSide, N: 4, Consequence: s.Consequence}
	}
}

// tooFar says so where a region went on although a window of points, the next moving range and one more lay behind it on
// every trace since the last changed place.
func tooFar(timeline track.Timeline, st stir, reg *track.Region) string {
	var since [chart.Roles]int
	for i, j := range reg.Items {
		if j.Item.Force || bytes.Compare(j.Item.Key, st.until) < 0 {
			since = [chart.Roles]int{}
			continue
		}
		for role := range since {
			if j.Traces[role].Point && !j.Item.Repeat {
				since[role]++
			}
		}
		v := timeline.InForce(j.Item.At)
		if i == len(reg.Items)-1 || v == nil {
			continue
		}
		far := true
		for role, n := range since {
			if plan := v.Compiled.Plan(chart.Role(role)); plan != nil && n <= plan.Window()+1 {
				far = false
			}
		}
		if far {
			return fmt.Sprintf("judging went on after result %d, with %v points since the last change", j.Item.ID, since)
		}
	}
	return ""
}
