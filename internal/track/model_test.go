package track_test

import (
	"bytes"
	"fmt"
	"maps"
	"slices"
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/track"
)

// model keeps one chart as the store keeps it, in slices and maps: it drives the package as the store does, region by
// region, and keeps what comes out.
type model struct {
	kind      chart.Kind
	size      int
	templates []definition.Content
	// forms are the canonical forms of the templates, templateOf the template of each version.
	forms      []string
	templateOf []int
	results    map[int]*current // by number
	versions   []*track.Version // by number
	marks      []*mark
	tracks     map[string]*trackModel
	lastID     int64
	lastSignal int64
	// judged counts the items of all regions of the latest operation, regions the regions; changes lists what they did
	// to signals.
	judged, regions int
	changes         []track.Change
	// agreed counts the regions of all operations that ended before their segment did.
	agreed int
	// checked has every region compared with the rules of identity.
	checked bool
	// watch, where set, is shown every region.
	watch    func(*trackModel, stir, *track.Region)
	problems []string
}

type mark struct {
	track.Mark
	void bool
}

// current is a result as it stands.
type current struct {
	row
	id       int64
	revision int
	voided   bool
}

type trackModel struct {
	lot     string
	places  []place // in order of their keys
	signals map[int64]*signal
}

// place is what is stored of a result. Keys are of its hits, none where it is a repeat.
type place struct {
	track.Item
	version        int
	verdict, state []byte
	keys           []track.EpisodeKey
}

type signal struct {
	track.Episode
	status              string
	mergedInto          int64
	changedAfterClosing bool
}

func (s *signal) live() bool { return s.status == "OPEN" || s.status == "CLOSED" }

func newModel(s *schedule) *model {
	m := &model{kind: s.kind, size: s.size, templates: s.templates, results: map[int]*current{}, tracks: map[string]*trackModel{}, checked: true}
	for _, t := range s.templates {
		m.forms = append(m.forms, string(t.Canonical()))
	}
	return m
}

func (m *model) problem(format string, args ...any) {
	m.problems = append(m.problems, fmt.Sprintf(format, args...))
}

func (m *model) track(lot string) *trackModel {
	t := m.tracks[lot]
	if t == nil {
		t = &trackModel{lot: lot, signals: map[int64]*signal{}}
		m.tracks[lot] = t
	}
	return t
}

func (m *model) lots() []string { return slices.Sorted(maps.Keys(m.tracks)) }

func (m *model) timeline(lot string) track.Timeline {
	var marks []track.Mark
	for _, each := range m.marks {
		if !each.void {
			marks = append(marks, each.Mark)
		}
	}
	return track.BuildTimeline(lot, m.versions, marks)
}

// apply carries out an operation.
func (m *model) apply(o op) {
	m.judged, m.regions, m.changes = 0, 0, nil
	switch o.kind {
	case post:
		m.post(o.rows)
	case approve:
		m.retime(func() { m.approve(o) })
	case withdraw:
		if o.n < len(m.versions) {
			m.retime(func() {
				v := *m.versions[o.n]
				v.Withdrawn = true
				m.versions[o.n] = &v
			})
		}
	case addMark:
		m.retime(func() {
			m.marks = append(m.marks, &mark{Mark: track.Mark{At: at(o.minute), Lot: o.lot, Break: o.isBreak, Restart: o.restart}})
		})
	case voidMark:
		if o.n < len(m.marks) {
			m.retime(func() { m.marks[o.n].void = true })
		}
	case closeSignal:
		m.close(o.n)
	default:
		if cur := m.results[o.n]; cur != nil && !cur.voided {
			m.revise(cur, o)
		}
	}
}

// close closes one of the open signals.
func (m *model) close(n int) {
	var open []*signal
	for _, lot := range m.lots() {
		signals := m.tracks[lot].signals
		for _, id := range slices.Sorted(maps.Keys(signals)) {
			if s := signals[id]; s.status == "OPEN" {
				open = append(open, s)
			}
		}
	}
	if len(open) > 0 {
		s := open[n%len(open)]
		s.status, s.Closed = "CLOSED", true
	}
}

func (m *model) approve(o op) {
	c := m.templates[o.template]
	c.Number, c.EffectiveFrom, c.Lot = len(m.versions)+1, at(o.minute), o.lot
	compiled, err := judge.New(c.JudgeLimits())
	if err != nil {
		return // a schedule made smaller may have lost both traces
	}
	m.versions = append(m.versions, &track.Version{Content: c, Compiled: compiled})
	m.templateOf = append(m.templateOf, o.template)
}

func (m *model) item(cur *current) *track.Item {
	res := cur.result()
	pt, err := res.Point(definition.Chart{Kind: m.kind, SubgroupSize: m.size})
	if err != nil {
		panic(err)
	}
	return &track.Item{Ref: track.Ref{ID: cur.id, Key: res.OrderKey(), At: res.MeasuredAt}, Revision: cur.revision, Point: pt,
		Repeat: cur.repeat, Voided: cur.voided, Force: true}
}

// post stores and judges the rows whose number is new.
func (m *model) post(rows []row) {
	items := map[string][]*track.Item{}
	for _, r := range rows {
		if m.results[r.n] != nil {
			continue
		}
		m.lastID++
		cur := &current{row: r, id: m.lastID, revision: 1}
		m.results[r.n] = cur
		m.track(r.lot)
		items[r.lot] = append(items[r.lot], m.item(cur))
	}
	for _, lot := range slices.Sorted(maps.Keys(items)) {
		mine := items[lot]
		slices.SortFunc(mine, func(a, b *track.Item) int { return bytes.Compare(a.Key, b.Key) })
		m.judge(m.tracks[lot], stir{changed: mine})
	}
}

// revise gives a result other content, or voids it.
func (m *model) revise(cur *current, o op) {
	old := m.tracks[cur.lot]
	switch o.kind {
	case amendReadings:
		cur.readings = o.row.readings
	case amendTime:
		cur.minute = o.row.minute
	case amendRole:
		cur.repeat = !cur.repeat
	case amendLot:
		cur.lot = o.row.lot
	case void:
		cur.voided = true
	}
	cur.revision++
	it := m.item(cur)
	i := slices.IndexFunc(old.places, func(p place) bool { return p.ID == cur.id })
	was := old.places[i]
	it.Stored = was.stored()
	gone := map[int64]bool{cur.id: true}
	dest := m.track(cur.lot)
	if dest != old {
		o, err := track.Decode(was.verdict)
		if err != nil {
			panic(err)
		}
		if was.Repeat {
			o.Hits = nil
		}
		it.Stored = nil
		m.judge(old, stir{gone: gone, removed: []track.Removed{{Key: was.Key, Hits: o.Hits}}})
	}
	st := stir{changed: []*track.Item{it}, gone: gone}
	if it.Stored != nil && !bytes.Equal(it.Key, it.Stored.Key) {
		st.until = after(slices.MaxFunc([][]byte{it.Key, it.Stored.Key}, bytes.Compare))
	}
	m.judge(dest, st)
}

// retime carries out a change of versions or marks and judges anew the stretches it touches.
func (m *model) retime(change func()) {
	before := map[string]track.Timeline{}
	for _, lot := range m.lots() {
		before[lot] = m.timeline(lot)
	}
	change()
	for _, lot := range m.lots() {
		t := m.tracks[lot]
		for _, s := range stretches(before[lot], m.timeline(lot)) {
			from, to := s.keys(t)
			if to != nil && bytes.Equal(from, to) {
				continue
			}
			m.judge(t, stir{from: orBytes(from, []byte{0}), until: orBytes(to, []byte{0xff})})
		}
	}
}

func orBytes(b, other []byte) []byte {
	if b == nil {
		return other
	}
	return b
}

// after gives the lowest key above a key.
func after(key []byte) []byte { return append(bytes.Clone(key), 0) }

// stretch is a part of a track whose version changes, to its first result after where a segment starts differently there.
type stretch struct {
	from, to time.Time
	carries  bool
}

// stretches compares two timelines as the store does.
func stretches(before, after track.Timeline) (list []stretch) {
	type segmentStart struct{ isBreak, headStart bool }
	number := func(v *track.Version) int {
		if v == nil {
			return 0
		}
		return v.Number
	}
	startOf := func(s track.Span, at time.Time) segmentStart {
		if !s.From.Equal(at) {
			return segmentStart{}
		}
		return segmentStart{s.Break, s.HeadStart}
	}
	var moments []time.Time
	for _, s := range slices.Concat(before.Spans, after.Spans) {
		moments = append(moments, s.From)
	}
	slices.SortFunc(moments, time.Time.Compare)
	moments = slices.CompactFunc(moments, time.Time.Equal)
	open := false
	for _, moment := range moments {
		was, is := before.Spans[before.At(moment)], after.Spans[after.At(moment)]
		starts := startOf(was, moment) == startOf(is, moment)
		switch differs := number(was.Version) != number(is.Version); {
		case differs && !open:
			list, open = append(list, stretch{from: moment}), true
		case differs:
		case open:
			last := &list[len(list)-1]
			last.to, last.carries, open = moment, !starts, false
		case !starts:
			list = append(list, stretch{from: moment, to: moment, carries: true})
		}
	}
	return list
}

func (s stretch) keys(t *trackModel) (from, to []byte) {
	if !s.from.IsZero() {
		from = definition.KeyTime(s.from)
	}
	if s.to.IsZero() {
		return from, nil
	}
	to = definition.KeyTime(s.to)
	if i := t.find(to); s.carries && i < len(t.places) {
		to = after(t.places[i].Key)
	}
	return from, to
}
