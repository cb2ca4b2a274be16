package track_test

import (
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// inForce goes through all versions for the one in force: of those for the lot or for every lot that have begun, the one
// that began last, the highest number of several; none where that one was withdrawn.
func inForce(lot string, versions []*track.Version, moment time.Time) int {
	begun := slices.DeleteFunc(slices.Clone(versions), func(v *track.Version) bool {
		return v.Lot != "" && v.Lot != lot || moment.Before(v.EffectiveFrom)
	})
	slices.SortFunc(begun, func(a, b *track.Version) int {
		if c := a.EffectiveFrom.Compare(b.EffectiveFrom); c != 0 {
			return c
		}
		return a.Number - b.Number
	})
	if len(begun) == 0 || begun[len(begun)-1].Withdrawn {
		return 0
	}
	return begun[len(begun)-1].Number
}

func TestTimelineHasTheVersionInForceAtEveryMoment(t *testing.T) {
	const rounds, seed = 5000, 20260304
	none, withdrawn := 0, 0
	for i := range rounds {
		random := rand.New(rand.NewPCG(seed, uint64(i)))
		lots := []string{"", "A", "B"}
		var versions []*track.Version
		for n := range random.IntN(7) {
			c := content(1, 1, 1, float64(random.IntN(2)), nil, nil)
			c.Number, c.Lot, c.EffectiveFrom = n+1, lots[random.IntN(3)], at(random.IntN(8))
			versions = append(versions, &track.Version{Content: c, Withdrawn: random.IntN(3) == 0})
		}
		random.Shuffle(len(versions), func(i, k int) { versions[i], versions[k] = versions[k], versions[i] })
		var marks []track.Mark
		for range random.IntN(4) {
			marks = append(marks, track.Mark{At: at(random.IntN(8)), Lot: lots[random.IntN(3)], Break: random.IntN(2) == 0, Restart: random.IntN(2) == 0})
		}
		for _, lot := range lots {
			timeline := track.BuildTimeline(lot, versions, marks)
			wantSpans(t, timeline)
			for half := -2; half < 20; half++ {
				for _, moment := range []time.Time{start.Add(time.Duration(half) * 30 * time.Second), start.Add(time.Duration(half)*30*time.Second - time.Microsecond)} {
					got, want := 0, inForce(lot, versions, moment)
					if v := timeline.InForce(moment); v != nil {
						got = v.Number
						if v.Withdrawn {
							withdrawn++
						}
					}
					if got != want {
						t.Fatalf("seed %d, round %d, lot %q at %v: version %d in force, want %d", seed, i, lot, moment, got, want)
					}
					if want == 0 {
						none++
					}
				}
			}
		}
	}
	if none == 0 || withdrawn != 0 {
		t.Errorf("%d moments with none in force, %d with a withdrawn one, want some and none", none, withdrawn)
	}
}

// wantSpans checks that the spans cover the time axis from its beginning, in order.
func wantSpans(t *testing.T, timeline track.Timeline) {
	t.Helper()
	if len(timeline.Spans) == 0 || !timeline.Spans[0].From.IsZero() || timeline.Spans[0].Break {
		t.Fatalf("spans %+v: want the first to begin with time and no segment", timeline.Spans)
	}
	for i, s := range timeline.Spans {
		if i > 0 && !s.From.After(timeline.Spans[i-1].From) {
			t.Fatalf("span %d begins at %v, want later than %v", i, s.From, timeline.Spans[i-1].From)
		}
		if got := timeline.At(s.From); got != i {
			t.Fatalf("the moment span %d begins lies in span %d", i, got)
		}
		if got, want := timeline.At(s.From.Add(-time.Microsecond)), i-1; i > 0 && got != want {
			t.Fatalf("the moment before span %d lies in span %d", i, got)
		}
	}
}

func TestTimelineSegments(t *testing.T) {
	version := func(number, minute int, centre float64, lot string) *track.Version {
		c := content(1, 1, 1, centre, nil, nil)
		c.ProcessSigma = centre // a number that differs, without traces
		c.Number, c.EffectiveFrom, c.Lot = number, at(minute), lot
		return &track.Version{Content: c}
	}
	withdrawn := func(v *track.Version) *track.Version {
		v.Withdrawn = true
		return v
	}
	type span struct {
		minute, version  int
		isBreak, headEnd bool
	}
	never := -1 // the minute of the beginning of time
	for _, c := range []struct {
		name     string
		versions []*track.Version
		marks    []track.Mark
		want     []span
	}{
		{"nothing at all", nil, nil, []span{{never, 0, false, false}}},
		{"the first version starts a segment", []*track.Version{version(1, 0, 1, "")}, nil,
			[]span{{never, 0, false, false}, {0, 1, true, true}}},
		{"equal numbers continue it", []*track.Version{version(1, 0, 1, ""), version(2, 5, 1, "")}, nil,
			[]span{{never, 0, false, false}, {0, 1, true, true}, {5, 2, false, false}}},
		{"other numbers end it", []*track.Version{version(1, 0, 1, ""), version(2, 5, 2, "")}, nil,
			[]span{{never, 0, false, false}, {0, 1, true, true}, {5, 2, true, true}}},
		{"equal numbers after a withdrawn version start anew", []*track.Version{version(1, 0, 1, ""), withdrawn(version(2, 5, 1, "")), version(3, 9, 1, "")}, nil,
			[]span{{never, 0, false, false}, {0, 1, true, true}, {5, 0, true, false}, {9, 3, true, true}}},
		{"of two that begin together the higher number is in force", []*track.Version{version(1, 0, 1, ""), version(2, 0, 2, "")}, nil,
			[]span{{never, 0, false, false}, {0, 2, true, true}}},
		{"of two that begin together, withdrawing the higher leaves none", []*track.Version{version(1, 0, 1, ""), withdrawn(version(2, 0, 2, ""))}, nil,
			[]span{{never, 0, false, false}, {0, 0, false, false}}},
		{"an earlier version that is withdrawn matters no more once a later one began", []*track.Version{withdrawn(version(1, 0, 1, "")), version(2, 5, 2, "")}, nil,
			[]span{{never, 0, false, false}, {0, 0, false, false}, {5, 2, true, true}}},
		{"a version of another lot is none of ours", []*track.Version{version(1, 0, 1, ""), version(2, 5, 2, "other")}, nil,
			[]span{{never, 0, false, false}, {0, 1, true, true}}},
		{"a mark with a break", []*track.Version{version(1, 0, 1, "")}, []track.Mark{{At: at(5), Break: true}},
			[]span{{never, 0, false, false}, {0, 1, true, true}, {5, 1, true, false}}},
		{"a mark with a restart", []*track.Version{version(1, 0, 1, "")}, []track.Mark{{At: at(5), Restart: true}},
			[]span{{never, 0, false, false}, {0, 1, true, true}, {5, 1, true, true}}},
		{"a mark that only notes something, and one of another lot", []*track.Version{version(1, 0, 1, "")},
			[]track.Mark{{At: at(5)}, {At: at(6), Break: true, Lot: "other"}}, []span{{never, 0, false, false}, {0, 1, true, true}}},
		{"two marks and a version at one moment", []*track.Version{version(1, 0, 1, ""), version(2, 5, 1, "mine")},
			[]track.Mark{{At: at(5), Break: true}, {At: at(5), Restart: true, Lot: "mine"}},
			[]span{{never, 0, false, false}, {0, 1, true, true}, {5, 2, true, true}}},
		{"a mark with a break where a version of other numbers begins keeps its head start", []*track.Version{version(1, 0, 1, "")},
			[]track.Mark{{At: at(0), Break: true}}, []span{{never, 0, false, false}, {0, 1, true, true}}},
	} {
		t.Run(c.name, func(t *testing.T) {
			var got []span
			for _, s := range track.BuildTimeline("mine", c.versions, c.marks).Spans {
				is := span{never, 0, s.Break, s.HeadStart}
				if !s.From.IsZero() {
					is.minute = int(s.From.Sub(start) / time.Minute)
				}
				if s.Version != nil {
					is.version = s.Version.Number
				}
				got = append(got, is)
			}
			if !slices.Equal(got, c.want) {
				t.Errorf("got  %v\nwant %v", got, c.want)
			}
			for minute := -1; minute < 12; minute++ { // a segment begins at the latest break not after the moment
				var want time.Time
				for _, s := range c.want {
					if s.isBreak && s.minute <= minute {
						want = at(s.minute)
					}
				}
				if got := track.BuildTimeline("mine", c.versions, c.marks).SegmentStart(at(minute)); !got.Equal(want) {
					t.Errorf("minute %d: the segment starts at %v, want %v", minute, got, want)
				}
			}
		})
	}
}

// TestKeysSortAsResultsDo compares the bytes of order keys with the order of what they are made of.
func TestKeysSortAsResultsDo(t *testing.T) {
	const rounds, seed = 20000, 20260305
	random := rand.New(rand.NewPCG(seed, 0))
	draw := func() definition.Result {
		texts := []string{"", "a", "a b", "ab", "a!", "b", "ä", "z", "\u00ff", "日"}
		r := definition.Result{MeasuredAt: start.Add(time.Duration(random.IntN(3)-1) * 80 * 365 * 24 * time.Hour).Add(time.Duration(random.IntN(2)) * time.Microsecond),
			RunID: texts[random.IntN(len(texts))], Source: texts[1+random.IntN(len(texts)-1)], SourceID: texts[1+random.IntN(len(texts)-1)]}
		numbers := []int32{0, 1, 2, 255, 256, 1<<31 - 1}
		r.Position, r.Replicate = numbers[random.IntN(len(numbers))], numbers[random.IntN(len(numbers))]
		return r
	}
	for range rounds {
		a, b := draw(), draw()
		if random.IntN(2) == 0 {
			b.MeasuredAt, b.RunID = a.MeasuredAt, a.RunID
		}
		if got, want := slices.Compare(a.OrderKey(), b.OrderKey()), inOrder(a, b); got != want {
			t.Fatalf("seed %d: %+v and %+v: keys compare %d, want %d", seed, a, b, got, want)
		}
		if k := definition.KeyTime(a.MeasuredAt); slices.Compare(k, a.OrderKey()) > 0 || slices.Compare(definition.KeyTime(a.MeasuredAt.Add(time.Microsecond)), a.OrderKey()) <= 0 {
			t.Fatalf("seed %d: the key of %v lies outside its moment", seed, a.MeasuredAt)
		}
	}
}
