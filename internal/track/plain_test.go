package track_test

import (
	"bytes"
	"cmp"
	"fmt"
	"maps"
	"slices"
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/track"
)

// The plain route: what a track should be, from results, versions and marks alone. It shares the judge of points with the
// package and nothing else: it finds versions and segments by going through them all, judges every segment from its
// first result, and finds episodes by the sentence that defines them.

// plainResult is a result with its verdict, the points its verdict refers to by id.
type plainResult struct {
	*current
	key     []byte
	verdict track.Outcome
	form    []byte
}

func (m *model) plain(lot string) (list []*plainResult, episodes []track.Episode) {
	for _, cur := range m.results {
		if cur.lot == lot {
			list = append(list, &plainResult{current: cur, key: cur.row.key()})
		}
	}
	slices.SortFunc(list, func(a, b *plainResult) int { return inOrder(a.result(), b.result()) })
	for i := 0; i < len(list); {
		began, headStart := m.begins(lot, list, i)
		n := 1
		for ; i+n < len(list); n++ {
			if again, _ := m.begins(lot, list, i+n); again {
				break
			}
		}
		segment := list[i : i+n]
		m.plainSegment(lot, segment, began && headStart)
		episodes = append(episodes, plainEpisodes(segment)...)
		i += n
	}
	return list, episodes
}

// inOrder compares results by the order of a track.
func inOrder(a, b definition.Result) int {
	return cmp.Or(a.MeasuredAt.Compare(b.MeasuredAt), cmp.Compare(a.RunID, b.RunID), cmp.Compare(a.Position, b.Position),
		cmp.Compare(a.Replicate, b.Replicate), cmp.Compare(a.Source, b.Source), cmp.Compare(a.SourceID, b.SourceID))
}

// versionAt gives the version in force at a moment, nil where there is none.
func versionAt(lot string, versions []*track.Version, moment time.Time) (found *track.Version) {
	for _, v := range versions {
		if v.Lot != "" && v.Lot != lot || v.EffectiveFrom.After(moment) {
			continue
		}
		if found == nil || !v.EffectiveFrom.Before(found.EffectiveFrom) { // versions come by number
			found = v
		}
	}
	if found != nil && found.Withdrawn {
		return nil
	}
	return found
}

// begins reports whether a result begins a segment, and whether that starts at head starts: something between the result
// before it and itself ends a segment, and the last of what does decides.
func (m *model) begins(lot string, list []*plainResult, i int) (begins, headStart bool) {
	to := at(list[i].minute)
	from := start.AddDate(-1, 0, 0)
	if i > 0 {
		from = at(list[i-1].minute)
	}
	for moment := from.Add(time.Minute); !moment.After(to); moment = moment.Add(time.Minute) {
		// Everything here happens at whole minutes, but nothing before minute -10.
		if moment.Before(at(-10)) {
			moment = at(-10)
		}
		if ends, restart := m.endsAt(lot, moment); ends {
			begins, headStart = true, restart
		}
	}
	return begins, headStart
}

func (m *model) endsAt(lot string, moment time.Time) (ends, headStart bool) {
	before, here := versionAt(lot, m.versions, moment.Add(-time.Microsecond)), versionAt(lot, m.versions, moment)
	switch {
	case before == nil && here == nil:
	case here == nil:
		ends = true
	case before == nil, !m.sameNumbers(before, here):
		ends, headStart = true, true
	}
	for _, k := range m.marks {
		if !k.void && (k.Lot == "" || k.Lot == lot) && k.At.Equal(moment) && (k.Break || k.Restart) {
			ends, headStart = true, headStart || k.Restart
		}
	}
	return ends, headStart
}

// sameNumbers reports whether two versions were made from equal limits and rules.
func (m *model) sameNumbers(a, b *track.Version) bool {
	return m.forms[m.templateOf[a.Number-1]] == m.forms[m.templateOf[b.Number-1]]
}

// plainSegment judges the results of one segment from its start.
func (m *model) plainSegment(lot string, segment []*plainResult, headStart bool) {
	var points [chart.Roles][]int64
	var last [chart.Roles][]judge.Hit
	var j *judge.Judge
	var st *judge.State
	var taken []judge.Point
	if v := versionAt(lot, m.versions, at(segment[0].minute)); v != nil {
		j = v.Compiled
		st = j.NewState()
		j.Reset(st, headStart)
	}
	for _, r := range segment {
		o := &r.verdict
		switch {
		case r.voided:
			o.Reason = judge.Voided
		case j == nil:
			o.Reason = judge.NoVersion
		default:
			pt := m.item(r.current).Point
			var v judge.Verdict
			if r.repeat {
				// It has the verdict it would have as the next point, and is none.
				again := j.NewState()
				j.Reset(again, headStart)
				for _, each := range taken {
					j.Judge(again, each, &v)
				}
				j.Judge(again, pt, &v)
			} else {
				j.Judge(st, pt, &v)
				taken = append(taken, pt)
			}
			o.Version = versionAt(lot, m.versions, at(r.minute)).Number
			points, last = r.take(j, &v, points, last)
		}
		o.State = plainState(j, st, last)
		r.form = o.Encode()
	}
}

// take fills in a verdict and gives the points and the newest hits after it.
func (r *plainResult) take(j *judge.Judge, v *judge.Verdict, points [chart.Roles][]int64, last [chart.Roles][]judge.Hit) ([chart.Roles][]int64, [chart.Roles][]judge.Hit) {
	o := &r.verdict
	o.Standing, o.Reason, o.ByBound, o.Traces = v.Standing, v.Reason, v.ByBound, v.Traces
	pointsAfter, lastAfter := points, last
	for role, t := range v.Traces {
		if t.Point {
			pointsAfter[role] = append(slices.Clone(points[role]), r.id)
			lastAfter[role] = nil
		}
	}
	for _, h := range v.Hits {
		of := pointsAfter[h.Role]
		spec := j.Plan(h.Role).Specs()[h.Rule]
		o.Hits = append(o.Hits, track.Hit{EpisodeKey: track.EpisodeKey{Role: h.Role, Rule: spec.ID, Side: h.Side}, Consequence: spec.Consequence,
			WindowFirst: track.Ref{ID: of[len(of)-1-h.WindowBack]}, FirstCounting: track.Ref{ID: of[len(of)-1-h.FirstBack]}})
		lastAfter[h.Role] = append(lastAfter[h.Role], h)
	}
	if r.repeat {
		return points, last
	}
	return pointsAfter, lastAfter
}

// plainState is the stored form of what is remembered: of each trace the number of rules that completed at its newest
// point, and for each its index and side; then the judge's own.
func plainState(j *judge.Judge, st *judge.State, last [chart.Roles][]judge.Hit) (b []byte) {
	for _, hits := range last {
		b = append(b, byte(len(hits)))
		for _, h := range hits {
			b = append(b, byte(h.Rule), byte(h.Side))
		}
	}
	if j == nil {
		return b
	}
	return j.AppendState(b, st)
}

// plainEpisodes gives the episodes of one segment: hits of one rule, trace and side at consecutive points.
func plainEpisodes(segment []*plainResult) (episodes []track.Episode) {
	for role := range chart.Roles {
		var points []*plainResult
		keys := map[track.EpisodeKey]bool{}
		for _, r := range segment {
			if r.repeat || !r.verdict.Traces[role].Point {
				continue
			}
			points = append(points, r)
			for _, h := range r.verdict.Hits {
				keys[h.EpisodeKey] = h.Role == role
			}
		}
		maps.DeleteFunc(keys, func(_ track.EpisodeKey, mine bool) bool { return !mine })
		for key := range keys {
			for i, r := range points {
				hit := r.hit(key)
				if hit == nil {
					continue
				}
				ref := track.Ref{ID: r.id, Key: r.key}
				if i > 0 && points[i-1].hit(key) != nil {
					e := &episodes[len(episodes)-1]
					e.LastHit = ref
					continue
				}
				first := segment[slices.IndexFunc(segment, func(s *plainResult) bool { return s.id == hit.FirstCounting.ID })]
				episodes = append(episodes, track.Episode{EpisodeKey: key, Consequence: hit.Consequence, Version: r.verdict.Version,
					FirstPoint: track.Ref{ID: first.id, Key: first.key}, FirstHit: ref, LastHit: ref})
			}
		}
	}
	return episodes
}

func (r *plainResult) hit(key track.EpisodeKey) *track.Hit {
	for i := range r.verdict.Hits {
		if r.verdict.Hits[i].EpisodeKey == key {
			return &r.verdict.Hits[i]
		}
	}
	return nil
}

// check compares all that is stored with the plain route.
func (m *model) check() {
	for _, lot := range m.lots() {
		t := m.tracks[lot]
		list, episodes := m.plain(lot)
		if len(list) != len(t.places) {
			m.problem("lot %q: %d places stored, want %d", lot, len(t.places), len(list))
			continue
		}
		for i, want := range list {
			m.checkPlace(&t.places[i], want)
		}
		m.checkEpisodes(t, episodes)
	}
}

func (m *model) checkPlace(got *place, want *plainResult) {
	if got.ID != want.id || !bytes.Equal(got.Key, want.key) || got.Voided != want.voided || got.Repeat != want.repeat || got.Revision != want.revision {
		m.problem("#%d revision %d: stored is %d, voided %v, repeat %v, revision %d", want.n, want.revision, got.ID, got.Voided, got.Repeat, got.Revision)
		return
	}
	if got.version != want.verdict.Version || !bytes.Equal(got.verdict, want.form) {
		m.problem("#%d: stored verdict by version %d %s, want by %d %s", want.n, got.version, got.verdict, want.verdict.Version, want.form)
	}
	if !bytes.Equal(got.state, want.verdict.State) {
		m.problem("#%d: stored state % x, want % x", want.n, got.state, want.verdict.State)
	}
}

func (m *model) checkEpisodes(t *trackModel, episodes []track.Episode) {
	var got, want []string
	for _, s := range t.signals {
		if s.live() {
			got = append(got, episodeText(&s.Episode))
		}
	}
	for i := range episodes {
		want = append(want, episodeText(&episodes[i]))
	}
	slices.Sort(got)
	slices.Sort(want)
	if !slices.Equal(got, want) {
		m.problem("lot %q: episodes\n    stored %q\n    want   %q", t.lot, got, want)
	}
}

// episodeText has everything of an episode but its id. Points are given by id and by minute.
func episodeText(e *track.Episode) string {
	ref := func(r track.Ref) string { return fmt.Sprintf("%d %x", r.ID, r.Key) }
	return fmt.Sprintf("%s %s %s %s v%d: %s, %s - %s", e.Role, e.Rule, e.Side, e.Consequence, e.Version, ref(e.FirstPoint), ref(e.FirstHit), ref(e.LastHit))
}
