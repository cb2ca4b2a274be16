package track

import (
	"encoding/json"
	"errors"
	"time"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

// Ref names a result and its place.
type Ref struct {
	ID  int64
	Key []byte
	At  time.Time
}

// Item is one current result at its place in the track.
type Item struct {
	Ref
	// Revision is the number of the content, 1 as posted.
	Revision       int
	Point          judge.Point
	Repeat, Voided bool
	// Stored is what is stored for the item; nil where it is new to the track.
	Stored *Stored
	// Force makes the item count as changed even where it judges as before: its content is new.
	Force bool
}

// Stored is what is stored for an item.
type Stored struct {
	// Key is the place it had; a moved item has another now.
	Key     []byte
	Version int
	// Verdict and State are as Outcome.Encode and Outcome.State gave them.
	Verdict, State []byte
	// Repeat is set where the item was a repeat, whose hits belong to no episode.
	Repeat bool
}

// EpisodeKey names what an episode is of.
type EpisodeKey struct {
	Role chart.Role
	Rule string
	Side rules.Side
}

// Hit is a rule completing at an item.
type Hit struct {
	EpisodeKey
	Consequence                rules.Consequence
	WindowFirst, FirstCounting Ref
}

// Outcome is what the judge says of an item, and what it remembers afterwards.
type Outcome struct {
	// Version is the number that judged, 0 for none.
	Version  int
	Standing judge.Standing
	Reason   judge.Reason
	ByBound  bool
	Traces   [chart.Roles]judge.TraceVerdict
	Hits     []Hit
	// State resumes judging after the item.
	State []byte
}

// form is the stored form of a verdict. Its names never change.
type form struct {
	Standing   judge.Standing `json:"s"`
	Reason     judge.Reason   `json:"r,omitempty"`
	ByBound    bool           `json:"b,omitempty"`
	Location   *[3]float64    `json:"l,omitempty"` // statistic, centre, sigma
	Dispersion *[3]float64    `json:"d,omitempty"`
	Inspected  float64        `json:"i,omitempty"` // of the location trace, on a chart of counts
	Hits       []hitForm      `json:"h,omitempty"`
}

type hitForm struct {
	Role          chart.Role        `json:"t"`
	Rule          string            `json:"r"`
	Side          rules.Side        `json:"s"`
	Consequence   rules.Consequence `json:"c"`
	WindowFirst   int64             `json:"w"`
	FirstCounting int64             `json:"f"`
}

// Encode gives the stored form of the verdict, without version and state. Equal verdicts have equal forms.
func (o *Outcome) Encode() []byte {
	f := form{Standing: o.Standing, Reason: o.Reason, ByBound: o.ByBound, Inspected: o.Traces[chart.Location].Scale.Inspected}
	for role, into := range [...]**[3]float64{&f.Location, &f.Dispersion} {
		if t := o.Traces[role]; t.Point {
			*into = &[3]float64{t.Statistic, t.Scale.Centre, t.Scale.Sigma}
		}
	}
	for _, h := range o.Hits {
		f.Hits = append(f.Hits, hitForm{h.Role, h.Rule, h.Side, h.Consequence, h.WindowFirst.ID, h.FirstCounting.ID})
	}
	b, err := json.Marshal(f)
	if err != nil {
		panic(err) // the judge gives finite numbers only
	}
	return b
}

// Decode reads what Encode wrote; references have ids only.
func Decode(b []byte) (*Outcome, error) {
	var f form
	if err := json.Unmarshal(b, &f); err != nil {
		return nil, errors.New("track: stored verdict: " + err.Error())
	}
	o := &Outcome{Standing: f.Standing, Reason: f.Reason, ByBound: f.ByBound}
	for role, from := range [...]*[3]float64{f.Location, f.Dispersion} {
		if from != nil {
			o.Traces[role] = judge.TraceVerdict{Point: true, Statistic: from[0], Scale: rules.Scale{Centre: from[1], Sigma: from[2]}}
		}
	}
	o.Traces[chart.Location].Scale.Inspected = f.Inspected
	for _, h := range f.Hits {
		o.Hits = append(o.Hits, Hit{EpisodeKey{h.Role, h.Rule, h.Side}, h.Consequence, Ref{ID: h.WindowFirst}, Ref{ID: h.FirstCounting}})
	}
	return o, nil
}

// Earlier gives up to n points of a trace just before a run's first item, oldest first.
type Earlier func(role chart.Role, n int) ([]Ref, error)

// Runner judges the items of one track in order.
type Runner struct {
	timeline Timeline
	earlier  Earlier
	span     int
	version  *Version
	state    *judge.State
	verdict  judge.Verdict
	// points are the references of the segment's points known so far, the newest last.
	points [chart.Roles][]Ref
	// read is how many of them lie before the run's first item.
	read [chart.Roles]int
	// last are the rules that completed at the newest point of each trace.
	last [chart.Roles][]EpisodeKey
	// began is set where the latest item began a segment.
	began bool
}

// NewRunner starts at the first item of a track. Earlier may be nil where nothing is resumed.
func NewRunner(t Timeline, earlier Earlier) *Runner {
	return &Runner{timeline: t, earlier: earlier, span: -1}
}

// Resume continues after an item measured at a moment, whose stored state is given.
func (r *Runner) Resume(after time.Time, state []byte) error {
	r.span = r.timeline.At(after)
	r.version = r.timeline.Spans[r.span].Version
	if r.version == nil {
		return nil
	}
	r.state = r.version.Compiled.NewState()
	rest, err := r.loadLast(state)
	if err != nil {
		return err
	}
	return r.version.Compiled.LoadState(rest, r.state)
}

// Step judges the next item. The state in the outcome is the caller's.
func (r *Runner) Step(it *Item) (*Outcome, error) {
	r.enter(it.At)
	o := &Outcome{}
	switch {
	case it.Voided:
		o.Reason = judge.Voided
	case r.version == nil:
		o.Reason = judge.NoVersion
	default:
		o.Version = r.version.Number
		if err := r.judge(it, o); err != nil {
			return nil, err
		}
	}
	o.State = r.appendState(nil)
	return o, nil
}

// enter moves to the span of a moment and starts a new segment where one begins.
func (r *Runner) enter(at time.Time) {
	r.began = false
	span := r.timeline.At(at)
	if span == r.span {
		return
	}
	isBreak, headStart := r.timeline.boundary(r.span, span)
	r.span, r.version = span, r.timeline.Spans[span].Version
	if !isBreak {
		return
	}
	r.began = true
	r.points, r.read, r.last = [chart.Roles][]Ref{}, [chart.Roles]int{}, [chart.Roles][]EpisodeKey{}
	r.earlier = nil
	if r.version != nil {
		r.state = r.version.Compiled.NewState()
		r.version.Compiled.Reset(r.state, headStart)
	}
}

func (r *Runner) judge(it *Item, o *Outcome) error {
	j := r.version.Compiled
	if it.Repeat {
		j.Aside(r.state, it.Point, &r.verdict)
	} else {
		j.Judge(r.state, it.Point, &r.verdict)
	}
	v := &r.verdict
	o.Standing, o.Reason, o.ByBound, o.Traces = v.Standing, v.Reason, v.ByBound, v.Traces
	for role := range v.Traces {
		if v.Traces[role].Point {
			r.points[role] = append(r.points[role], it.Ref)
		}
	}
	for _, h := range v.Hits {
		spec := &j.Plan(h.Role).Specs()[h.Rule]
		hit := Hit{EpisodeKey: EpisodeKey{h.Role, spec.ID, h.Side}, Consequence: spec.Consequence}
		var err error
		if hit.WindowFirst, err = r.back(h.Role, h.WindowBack); err != nil {
			return err
		}
		if hit.FirstCounting, err = r.back(h.Role, h.FirstBack); err != nil {
			return err
		}
		o.Hits = append(o.Hits, hit)
	}
	for role := range v.Traces {
		switch {
		case !v.Traces[role].Point:
		case it.Repeat:
			r.points[role] = r.points[role][:len(r.points[role])-1]
		default:
			r.last[role] = keysOf(o.Hits, chart.Role(role))
			r.forget(chart.Role(role))
		}
	}
	return nil
}

// pointsKept is how many references a run keeps before it forgets those no hit can reach.
const pointsKept = 16 * rules.WindowPointsMax

// forget drops references that no coming hit can reach, so that a long track takes no more room than a short one.
func (r *Runner) forget(role chart.Role) {
	points, reach := r.points[role], r.reach(role)
	if len(points) > pointsKept && len(points) > 4*reach {
		dropped := len(points) - 2*reach
		r.points[role] = append([]Ref(nil), points[dropped:]...)
		r.read[role] = max(0, r.read[role]-dropped)
	}
}

func keysOf(hits []Hit, role chart.Role) (keys []EpisodeKey) {
	for _, h := range hits {
		if h.Role == role {
			keys = append(keys, h.EpisodeKey)
		}
	}
	return keys
}

// back gives the point of a trace n points before the newest, asking for earlier ones where the run began later.
func (r *Runner) back(role chart.Role, n int) (Ref, error) {
	have := r.points[role]
	if n < len(have) {
		return have[len(have)-1-n], nil
	}
	if r.earlier == nil {
		return Ref{}, errors.New("track: a window reaches back beyond the segment's points")
	}
	// One word more than asked for: neighbours of this hit will ask again.
	own := have[r.read[role]:]
	more, err := r.earlier(role, n-len(own)+1+rules.WindowPointsMax)
	if err != nil {
		return Ref{}, err
	}
	if len(more)+len(own) <= n {
		return Ref{}, errors.New("track: a window reaches back beyond the stored points")
	}
	r.points[role], r.read[role] = append(more, own...), len(more)
	return r.points[role][len(r.points[role])-1-n], nil
}

// appendState appends what resumes judging: the rules that completed at the newest points, then the judge's state.
func (r *Runner) appendState(b []byte) []byte {
	if r.version == nil {
		return append(b, 0, 0)
	}
	for role, keys := range r.last {
		b = append(b, byte(len(keys)))
		for _, k := range keys {
			b = append(b, byte(r.ruleIndex(chart.Role(role), k.Rule)), byte(k.Side))
		}
	}
	return r.version.Compiled.AppendState(b, r.state)
}

func (r *Runner) ruleIndex(role chart.Role, id string) int {
	for i, s := range r.version.Compiled.Plan(role).Specs() {
		if s.ID == id {
			return i
		}
	}
	panic("track: a hit of a rule the version does not have")
}

func (r *Runner) loadLast(b []byte) ([]byte, error) {
	bad := errors.New("track: stored state does not belong to the version in force")
	for role := range r.last {
		if len(b) == 0 || len(b) < 1+2*int(b[0]) {
			return nil, bad
		}
		n := int(b[0])
		b = b[1:]
		for range n {
			plan := r.version.Compiled.Plan(chart.Role(role))
			if plan == nil || int(b[0]) >= len(plan.Specs()) {
				return nil, bad
			}
			r.last[role] = append(r.last[role], EpisodeKey{chart.Role(role), plan.Specs()[b[0]].ID, rules.Side(b[1])})
			b = b[2:]
		}
	}
	return b, nil
}

// reach is how many points back a coming hit of a trace may refer.
func (r *Runner) reach(role chart.Role) int {
	if r.version == nil || r.version.Compiled.Plan(role) == nil {
		return 0
	}
	return r.version.Compiled.Reach(role, r.state)
}

// Progress lists the patterns on their way after the latest item, of the version then in force.
func (r *Runner) Progress() []judge.Progress {
	if r.version == nil {
		return nil
	}
	return r.version.Compiled.Progress(r.state)
}

// Began reports whether the latest item began a segment.
func (r *Runner) Began() bool { return r.began }
