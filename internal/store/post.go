package store

import (
	"bytes"
	"context"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// posting is one post on its way through a transaction.
type posting struct {
	actor   Actor
	results []definition.Result
	rows    []Posted
	all     bool
	// charts by name and by id, tracks by id; locked once begun.
	charts map[string]*postChart
	tracks map[int64]*postTrack
	// trackIDs are the tracks of the rows, 0 where there is none.
	trackIDs []int64
	// unsound is set where an all-or-nothing post was found not to be stored before its tracks were locked.
	unsound bool
	now     time.Time
	ids     []int64
	// stored are the rows that were there before, by index of the row.
	stored map[int]*storedRow
	// twins are the rows that have the natural key of an earlier, accepted one, and which that is.
	twins  map[int]int
	ledger *ledger
	// outcomes of the new results by result id, and which row each is.
	outcomes map[int64]*track.Judged
	rowOf    map[int64]int
	updates  []TrackUpdate
}

type postChart struct {
	chartRow
	lots map[string]int64
	// lotByID is the reverse of lots, where they were read anew.
	lotByID  map[int64]string
	timeline *timeline
	head     chainHead
	// accepted results by track.
	accepted map[int64][]int
}

type postTrack struct {
	trackRow
	// lowest is the first place the post could take.
	lowest []byte
	before *track.Item
	// tail is set where nothing is stored at or after lowest.
	tail bool
}

// storedRow is a result that was stored under the natural key of a row.
type storedRow struct {
	id, trackID                 int64
	digest, currentDigest       []byte
	content                     []byte
	firstVersion, version       int
	firstVerdict, verdict       []byte
	recordedAt, currentRecorded time.Time
}

// PostResults stores and judges control results. Rows are answered in order; pre holds refusals found before (nil for
// none). A row whose natural key is stored with the same content is a duplicate, with other content a conflict; both
// change nothing. Results of one track are judged in their order, whatever the order they come in.
//
// It is safe to repeat after any failure: what was committed is answered as duplicate.
func (s *Store) PostResults(ctx context.Context, a Actor, results []definition.Result, allOrNothing bool, pre []*definition.Error) (answer PostAnswer, err error) {
	if allOrNothing || len(results) > togetherRowsMax {
		return s.postNow(ctx, a, results, allOrNothing, pre)
	}
	return s.together.post(ctx, s, a, results, pre)
}

// postNow posts in a transaction of its own.
func (s *Store) postNow(ctx context.Context, a Actor, results []definition.Result, allOrNothing bool, pre []*definition.Error) (answer PostAnswer, err error) {
	defer wrap(ctx, &err, "PostResults")
	err = retry(ctx, func() error {
		p := &posting{actor: a, results: slices.Clone(results), rows: make([]Posted, len(results)), all: allOrNothing}
		for i := range p.rows {
			if i < len(pre) && pre[i] != nil {
				p.refuse(i, pre[i])
			}
		}
		err := s.post(ctx, p)
		answer = PostAnswer{p.rows, p.updates}
		return err
	})
	if err != nil {
		return PostAnswer{}, err
	}
	return answer, nil
}

func (p *posting) refuse(i int, problem *definition.Error) {
	p.rows[i] = Posted{Outcome: Refused, Problem: problem}
}

func (s *Store) post(ctx context.Context, p *posting) error {
	if err := s.findTracks(ctx, p); err != nil {
		return err
	}
	if len(p.tracks) == 0 {
		p.decide() // by what was read to open tracks; nothing can be accepted without one
		p.finish()
		return nil
	}
	return s.pool.AcquireFunc(ctx, func(c *pgxpool.Conn) error {
		err := s.postOn(ctx, c.Conn(), p)
		if err != nil && !c.Conn().IsClosed() {
			// The transaction may be open; a connection that cannot roll back is closed by the pool.
			rollback, cancel := context.WithTimeout(context.WithoutCancel(ctx), rollbackTimeout)
			defer cancel()
			if _, rerr := c.Exec(rollback, "ROLLBACK"); rerr != nil {
				c.Conn().Close(rollback)
			}
		}
		return err
	})
}

func (s *Store) postOn(ctx context.Context, conn *pgx.Conn, p *posting) error {
	if err := p.begin(ctx, conn); err != nil {
		if connectionLost(err) && ctx.Err() == nil {
			s.pool.Reset() // the other connections are likely gone too
			return &lostError{err}
		}
		return err
	}
	p.decide()
	accepted := p.finish()
	var err error
	if accepted > 0 {
		err = s.judgePosted(ctx, conn, p)
	}
	if err == nil {
		err = s.answer(ctx, conn, p)
	}
	if err != nil {
		return err
	}
	var b pgx.Batch
	if accepted > 0 {
		p.ledger.queue(&b)
		p.seal(&b)
	}
	b.Queue("COMMIT")
	return conn.SendBatch(ctx, &b).Close()
}

// findTracks finds the chart and track of every row, without locks, and opens tracks for lots that are new.
func (s *Store) findTracks(ctx context.Context, p *posting) (err error) {
	p.tracks, p.trackIDs = map[int64]*postTrack{}, make([]int64, len(p.results))
	names := map[string]bool{}
	for i := range p.results {
		if p.rows[i].Outcome == 0 {
			names[p.results[i].Chart] = true
		}
	}
	if p.charts, err = s.chartInfos(ctx, slices.Sorted(maps.Keys(names))); err != nil {
		return err
	}
	var unknown []int // rows whose lot has no track here yet
	for i := range p.results {
		if p.rows[i].Outcome != 0 {
			continue
		}
		if p.charts[p.results[i].Chart] == nil {
			p.refuse(i, noChart(p.results[i].Chart))
		} else if !p.place(i) {
			unknown = append(unknown, i)
		}
	}
	if len(unknown) > 0 {
		return s.openTracks(ctx, p, unknown)
	}
	return nil
}

// lotOf gives the lot whose track a row belongs to.
func (c *postChart) lotOf(r *definition.Result) string {
	if c.LotsAreTracks {
		return r.Lot
	}
	return ""
}

// place puts a row on the track of its lot, if the track is known.
func (p *posting) place(i int) bool {
	r := &p.results[i]
	c := p.charts[r.Chart]
	lot := c.lotOf(r)
	id, ok := c.lots[lot]
	if ok {
		p.placeOn(i, id, lot)
	}
	return ok
}

func (p *posting) placeOn(i int, id int64, lot string) {
	r := &p.results[i]
	t := p.tracks[id]
	if t == nil {
		t = &postTrack{trackRow: trackRow{Track: Track{ID: id, Chart: r.Chart, Lot: lot}, ChartID: p.charts[r.Chart].ID}}
		p.tracks[id] = t
	}
	p.trackIDs[i] = id
	if key := r.OrderKey(); t.lowest == nil || bytes.Compare(key, t.lowest) < 0 {
		t.lowest = key
	}
}

// farFuture is after everything measured.
var farFuture = time.Date(9999, 1, 1, 0, 0, 0, 0, time.UTC)

func noChart(name string) *definition.Error {
	return &definition.Error{Reason: definition.NotFound, Field: "chart", Text: fmt.Sprintf("there is no chart %q", name)}
}

// trackOf gives the track of a row, nil for one that was not placed.
func (p *posting) trackOf(i int) *postTrack { return p.tracks[p.trackIDs[i]] }

// decide gives every row its outcome: refused, duplicate, conflict, accepted or, in a post that is not stored, not stored.
func (p *posting) decide() {
	p.twins = map[int]int{}
	p.outcome()
	if p.all && (p.unsound || p.flawed()) {
		p.refuseAll()
	}
}

// flawed reports a row for which an all-or-nothing post is not stored.
func (p *posting) flawed() bool {
	return slices.ContainsFunc(p.rows, func(r Posted) bool { return r.Outcome == Refused || r.Outcome == Conflict })
}

func (p *posting) outcome() {
	first := map[string]int{} // natural keys among the rows themselves
	for i := range p.results {
		if p.rows[i].Outcome != 0 {
			continue
		}
		r := &p.results[i]
		c := p.charts[r.Chart]
		if !p.actor.Key.Sees(c.Labels) {
			p.refuse(i, noChart(r.Chart))
			continue
		}
		// A stored row is answered even where its chart has been archived since.
		if _, stored := p.stored[i]; stored {
			c := c.Chart
			c.Archived = false
			if _, err := r.Prepare(c, p.now); err != nil {
				p.refuse(i, asDefinition(err))
			} else {
				p.compare(i)
			}
			continue
		}
		if _, err := r.Prepare(c.Chart, p.now); err != nil {
			p.refuse(i, asDefinition(err))
			continue
		}
		key := strings.Join([]string{r.Chart, r.Source, r.SourceID}, "\x00")
		if j, twice := first[key]; twice {
			p.twins[i] = j
			p.twin(i, j)
			continue
		}
		first[key] = i
		p.rows[i].Outcome = Accepted
	}
}

// compare answers a row whose natural key is stored.
func (p *posting) compare(i int) {
	digest := p.results[i].Digest()
	st := p.stored[i]
	if bytes.Equal(digest, st.digest) || bytes.Equal(digest, st.currentDigest) {
		p.rows[i].Outcome = Duplicate
		return
	}
	p.rows[i] = Posted{Outcome: Conflict, Problem: conflict(&p.results[i])}
}

// twin answers a row that has the natural key of an earlier one in the same post.
func (p *posting) twin(i, earlier int) {
	if p.results[i].SameContent(p.results[earlier]) {
		p.rows[i].Outcome = Duplicate
		return
	}
	p.rows[i] = Posted{Outcome: Conflict, Problem: conflict(&p.results[i]), Stored: p.results[earlier]}
}

func conflict(r *definition.Result) *definition.Error {
	return &definition.Error{Reason: definition.Conflict, Field: "source_id",
		Text: fmt.Sprintf("chart %q already has a result %q of source %q with other content; nothing was changed", r.Chart, r.SourceID, r.Source)}
}

// refuseAll turns the sound rows of an all-or-nothing post into not stored ones.
func (p *posting) refuseAll() {
	for i := range p.rows {
		_, stored := p.stored[i]
		if p.rows[i].Outcome == Accepted || p.rows[i].Outcome == Duplicate && !stored {
			p.rows[i] = Posted{Outcome: NotStored,
				Problem: definition.Refuse(definition.BatchRefused, "another row was refused or in conflict, and all or nothing was asked for")}
		}
	}
}

// finish counts the accepted rows and puts each with its chart.
func (p *posting) finish() (accepted int) {
	for i := range p.rows {
		if p.rows[i].Outcome != Accepted {
			continue
		}
		accepted++
		c := p.charts[p.results[i].Chart]
		if c.accepted == nil {
			c.accepted = map[int64][]int{}
		}
		id := p.trackOf(i).ID
		c.accepted[id] = append(c.accepted[id], i)
	}
	return accepted
}
