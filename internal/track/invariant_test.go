package track_test

import (
	"fmt"
	"math/rand/v2"
	"runtime/debug"
	"slices"
	"strings"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/track"
)

// run carries out a schedule on an empty model, compares with the plain route after every operation, and gives the first
// problems found.
func (s *schedule) run() (problems []string) {
	m := newModel(s)
	return m.run(s, census{})
}

func (m *model) run(s *schedule, seen census) (problems []string) {
	defer func() {
		if p := recover(); p != nil {
			problems = append(m.problems, fmt.Sprintf("panic: %v\n%s", p, debug.Stack()))
		}
	}()
	for i, o := range s.ops {
		m.apply(o)
		seen.count(m)
		m.check()
		if len(m.problems) > 0 {
			return append([]string{fmt.Sprintf("after operation %d, %s", i, o)}, m.problems...)
		}
	}
	return nil
}

// shrink takes out of a failing schedule every operation, posted row and rule that it fails without.
func (s *schedule) shrink() *schedule {
	small := s.clone()
	for again := true; again; {
		again = false
		less := func(without func(*schedule)) {
			try := small.clone()
			without(try)
			if len(try.run()) > 0 {
				small, again = try, true
			}
		}
		for i := len(small.ops) - 1; i >= 0; i-- {
			less(func(s *schedule) { s.ops = slices.Delete(s.ops, i, i+1) })
		}
		for i := range small.ops {
			for k := len(small.ops[i].rows) - 1; k >= 0; k-- {
				less(func(s *schedule) { s.ops[i].rows = slices.Delete(s.ops[i].rows, k, k+1) })
			}
		}
		for i := range small.templates {
			for role := range 2 {
				if t := *trace(&small.templates[i], role); t != nil {
					for k := len(t.Rules) - 1; k >= 0; k-- {
						less(func(s *schedule) { t := *trace(&s.templates[i], role); t.Rules = slices.Delete(t.Rules, k, k+1) })
					}
					less(func(s *schedule) { *trace(&s.templates[i], role) = nil })
				}
			}
		}
	}
	return small
}

func trace(c *definition.Content, role int) **definition.Trace {
	return [...]**definition.Trace{&c.Location, &c.Dispersion}[role]
}

// clone copies a schedule as deep as shrink changes it.
func (s *schedule) clone() *schedule {
	c := &schedule{s.kind, s.size, slices.Clone(s.templates), slices.Clone(s.ops)}
	for i := range c.ops {
		c.ops[i].rows = slices.Clone(c.ops[i].rows)
	}
	for i := range c.templates {
		for role := range 2 {
			if t := trace(&c.templates[i], role); *t != nil {
				copied := **t
				copied.Rules = slices.Clone(copied.Rules)
				*t = &copied
			}
		}
	}
	return c
}

// fail fails the test with a schedule made as small as it gets.
func (s *schedule) fail(t *testing.T, name string) {
	t.Helper()
	small := s.shrink()
	t.Fatalf("%s:\n%s%s", name, small, strings.Join(small.run(), "\n"))
}

// census counts what random schedules bring about, so that a test can tell that they bring about everything.
type census map[string]int

// report logs the counts and fails the test for what never came.
func (c census) report(t *testing.T, want ...string) {
	t.Helper()
	for _, what := range want {
		if c[what] == 0 {
			t.Errorf("no schedule brought about: %s", what)
		}
	}
	t.Logf("%v", c)
}

func (c census) count(m *model) {
	c["operations"]++
	for _, ch := range m.changes {
		c[ch.Kind.String()]++
		if ch.Closed && ch.Kind != track.Unchanged {
			c["closed and "+ch.Kind.String()]++
		}
		if ch.Kind != track.Unchanged && ch.Role == chart.Dispersion {
			c["of dispersion"]++
		}
	}
	switch {
	case m.regions > 2:
		c["many regions"]++
	case m.regions == 2:
		c["two regions"]++
	}
	results := 0
	for _, t := range m.tracks {
		results += len(t.places)
	}
	if m.regions > 0 && m.judged < results {
		c["part of a track"]++
	}
}

// TestStateDependsOnWhatWasPostedNotHow carries out random schedules. After every operation verdicts, states, episodes
// and ids are as the plain route and the rule of identity have them.
func TestStateDependsOnWhatWasPostedNotHow(t *testing.T) {
	const opsMax, seed = 30, 20260302
	schedules := 3000
	if testing.Short() {
		schedules = 300
	}
	seen := census{}
	for i := range schedules {
		random := rand.New(rand.NewPCG(seed, uint64(i)))
		s := drawSchedule(random.IntN, opsMax)
		m := newModel(s)
		if problems := m.run(s, seen); len(problems) > 0 {
			s.fail(t, fmt.Sprintf("seed %d, schedule %d", seed, i))
		}
		seen["region ended early"] += m.agreed
	}
	t.Logf("seed %d, %d schedules", seed, schedules)
	if testing.Short() {
		return // too few for the rare things
	}
	seen.report(t, "OPENED", "CHANGED", "MERGED", "RETRACTED", "closed and CHANGED", "closed and MERGED", "closed and RETRACTED",
		"of dispersion", "two regions", "many regions", "region ended early", "part of a track")
}
