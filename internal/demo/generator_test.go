package demo_test

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/demo"
)

// The seed is fixed, so the numbers are too. The digest was computed by this program when the demo was made; it changes
// only when somebody changes the demo on purpose.
func TestReadingsAreThoseOfTheSeed(t *testing.T) {
	t.Logf("seed %d", demo.Seed)
	const want = "86695d2510da9eb491eb159d2346103554a459d4d1ce6ea12479ac6562d61e01"
	h := sha256.New()
	for _, s := range demo.Group() {
		for _, r := range s.Results(base) {
			fmt.Fprintf(h, "%s %s %s\n", r.Chart, r.SourceId, strings.Join(written(r), " "))
		}
	}
	if got := hex.EncodeToString(h.Sum(nil)); got != want {
		t.Errorf("got readings with digest %s, want %s", got, want)
	}
}

// written gives what a result says: its readings, or what was counted and inspected.
func written(r *pb.Result) []string {
	if r.Count == nil {
		return r.Readings
	}
	return []string{fmt.Sprint(r.Count.Nonconforming), fmt.Sprint(r.Count.Inspected)}
}

func TestSameBaseGivesSameResults(t *testing.T) {
	for i, s := range demo.Group() {
		first, again := s.Results(base), demo.Group()[i].Results(base)
		if !slices.EqualFunc(first, again, func(a, b *pb.Result) bool { return proto.Equal(a, b) }) {
			t.Errorf("chart %s: two generations differ", s.Chart().Name)
		}
	}
}

// Another base moves every result by as much and changes nothing else.
func TestBaseOnlyMovesTimes(t *testing.T) {
	const by = 37*24*time.Hour + 5*time.Minute
	for i, s := range demo.Group() {
		later := demo.Group()[i].Results(base.Add(by))
		for j, r := range s.Results(base) {
			moved := proto.Clone(r).(*pb.Result)
			moved.MeasuredAt = measured(t, r).Add(by).Format(time.RFC3339)
			if !proto.Equal(later[j], moved) {
				t.Fatalf("got %v, want %v", later[j], moved)
			}
		}
	}
}

func measured(t *testing.T, r *pb.Result) time.Time {
	t.Helper()
	at, err := time.Parse(time.RFC3339, r.MeasuredAt)
	if err != nil {
		t.Fatal(err)
	}
	return at
}

func TestResultsOfEachChart(t *testing.T) {
	total := 0
	for _, s := range demo.Group() {
		c := s.Chart()
		results := s.Results(base)
		total += len(results)
		t.Run(c.Name, func(t *testing.T) {
			last := map[string]time.Time{} // by lot, where lots are tracks
			ids := map[string]bool{}
			for _, r := range results {
				at, track := measured(t, r), ""
				if c.LotsAreTracks {
					track = r.Lot
				}
				if !at.After(last[track]) || at.After(base) {
					t.Fatalf("%s is measured at %v, after %v of its track and with base %v", r.SourceId, at, last[track], base)
				}
				last[track] = at
				if ids[r.SourceId] {
					t.Fatalf("%s comes twice", r.SourceId)
				}
				ids[r.SourceId] = true
				if !suits(r, c) {
					t.Fatalf("got %v, which does not suit chart %v", r, c)
				}
			}
			newest := slices.MaxFunc(results, func(a, b *pb.Result) int { return measured(t, a).Compare(measured(t, b)) })
			if age := base.Sub(measured(t, newest)); age > time.Hour && !strings.Contains(c.Title, "retired") {
				t.Errorf("the data end %v before the base, want shortly before it", age)
			}
		})
	}
	if total < 2000 || total > 5000 {
		t.Errorf("got %d results in all, want a few thousand", total)
	}
}

func suits(r *pb.Result, c *pb.Chart) bool {
	if r.Unit != c.Unit || r.Chart != c.Name {
		return false
	}
	switch c.Kind {
	case pb.ChartKind_CHART_KIND_P:
		return len(r.Readings) == 0 && r.Count.Nonconforming <= r.Count.Inspected && r.Count.Inspected >= 40 && r.Count.Inspected <= 120
	case pb.ChartKind_CHART_KIND_C:
		return len(r.Readings) == 0 && r.Count.Nonconforming >= 0 && r.Count.Inspected == 1
	}
	return r.Count == nil && len(r.Readings) > 0 && len(r.Readings) <= int(c.SubgroupSize)
}

// People are two initials, places are the three invented ones: nothing in the demo names anybody or anything real.
func TestNamesAreInvented(t *testing.T) {
	initials := regexp.MustCompile(`^[A-Z]\.[A-Z]\.$`)
	sites := []string{"harwick", "ostley", "brenmoor"}
	for _, s := range demo.Group() {
		site := s.Chart().Labels["site"]
		if !slices.Contains(sites, site) {
			t.Errorf("chart %s: got site %q, want one of %q", s.Chart().Name, site, sites)
		}
		for _, r := range s.Results(base) {
			if !initials.MatchString(r.Analyst) || r.Source != "lims-"+site {
				t.Fatalf("got analyst %q and source %q, want two initials and the site's system", r.Analyst, r.Source)
			}
		}
	}
}

// Analytical runs hold the controls of several charts: those of one instrument share them, in different positions.
func TestChartsOfOneInstrumentShareRuns(t *testing.T) {
	positions := map[string]map[int32]string{} // by run
	shared := 0
	for _, s := range demo.Group() {
		for _, r := range s.Results(base) {
			if r.RunId == "" {
				if r.Count == nil {
					t.Fatalf("%s has no run", r.SourceId)
				}
				continue // it sums up a week
			}
			if positions[r.RunId] == nil {
				positions[r.RunId] = map[int32]string{}
			}
			if had := positions[r.RunId][r.Position]; had != "" {
				t.Fatalf("run %s has %s and %s in position %d", r.RunId, had, r.SourceId, r.Position)
			}
			positions[r.RunId][r.Position] = r.SourceId
			shared = max(shared, len(positions[r.RunId]))
		}
	}
	if shared < 3 {
		t.Errorf("got at most %d controls in one run, want 3", shared)
	}
}

// The kinds of chart and the cases that a newcomer should meet are there.
func TestGroupHasEachCase(t *testing.T) {
	kinds := map[pb.ChartKind]int{}
	cases := map[string]bool{}
	for _, s := range demo.Group() {
		c := s.Chart()
		kinds[c.Kind]++
		cases["lots as tracks"] = cases["lots as tracks"] || c.LotsAreTracks
		for _, r := range s.Results(base) {
			cases["less-than results"] = cases["less-than results"] || strings.HasPrefix(written(r)[0], "<")
			cases["short subgroups"] = cases["short subgroups"] || r.Count == nil && len(r.Readings) < int(c.SubgroupSize)
			cases["set-up"] = cases["set-up"] || r.Role == pb.ResultRole_RESULT_ROLE_SETUP
			cases["overlap"] = cases["overlap"] || r.Role == pb.ResultRole_RESULT_ROLE_OVERLAP
		}
	}
	for _, k := range []pb.ChartKind{pb.ChartKind_CHART_KIND_INDIVIDUALS, pb.ChartKind_CHART_KIND_XBAR_R, pb.ChartKind_CHART_KIND_XBAR_S,
		pb.ChartKind_CHART_KIND_RUN_MEANS, pb.ChartKind_CHART_KIND_P, pb.ChartKind_CHART_KIND_C, pb.ChartKind_CHART_KIND_DUPLICATE_RANGE} {
		if kinds[k] == 0 {
			t.Errorf("there is no chart of kind %s", k)
		}
	}
	for name, there := range cases {
		if !there {
			t.Errorf("there is no case of %s", name)
		}
	}
}
