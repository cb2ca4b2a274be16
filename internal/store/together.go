package store

import (
	"context"
	"sync"

	"limitary/internal/definition"
)

// together puts small posts that wait at the same moment into one transaction. A post of one result costs nearly what a
// post of twenty does, since locks, look-ups and the commit cost the same; so while some are under way, those that come
// are gathered, and go together as soon as one is done. Nobody waits who need not: a post that finds a free place goes
// at once and alone.
//
// Only posts of one key go together, so that every transaction and audit entry has one principal. Rows are answered each
// to their own caller. What a transaction does to a track is told to every caller who posted to it.
type together struct {
	mu    sync.Mutex
	lanes map[string]*lane
}

const (
	// togetherRowsMax is the largest post that is put together with others, togetherSumMax the most rows of one
	// transaction: larger ones have no overhead worth sharing.
	togetherRowsMax = 100
	togetherSumMax  = 1000
	// lanePlaces is how many transactions of one key are under way before posts wait: one can judge while another
	// waits for its commit.
	lanePlaces = 2
)

// lane holds the posts of one key.
type lane struct {
	running int
	waiting []*waitingPost
}

type waitingPost struct {
	ctx     context.Context
	results []definition.Result
	pre     []*definition.Error
	done    chan struct{}
	answer  PostAnswer
	err     error
}

// post gives the answer to a post, made alone or together with others. A caller who gives up is not waited for; whether
// its rows were stored it learns by posting them again.
func (g *together) post(ctx context.Context, s *Store, a Actor, results []definition.Result, pre []*definition.Error) (PostAnswer, error) {
	w := &waitingPost{ctx: ctx, results: results, pre: pre, done: make(chan struct{})}
	key := a.Principal + "\x00" + a.Key.ID
	g.mu.Lock()
	if g.lanes == nil {
		g.lanes = map[string]*lane{}
	}
	l := g.lanes[key]
	if l == nil {
		l = &lane{}
		g.lanes[key] = l
	}
	l.waiting = append(l.waiting, w)
	if l.running < lanePlaces {
		l.running++
		go g.run(s, a, key, l)
	}
	g.mu.Unlock()
	select {
	case <-w.done:
		return w.answer, w.err
	case <-ctx.Done():
		return PostAnswer{}, ctx.Err()
	}
}

// run posts what waits in a lane until nothing does.
func (g *together) run(s *Store, a Actor, key string, l *lane) {
	for {
		g.mu.Lock()
		batch := l.take()
		if len(batch) == 0 {
			l.running--
			if l.running == 0 {
				delete(g.lanes, key)
			}
			g.mu.Unlock()
			return
		}
		g.mu.Unlock()
		s.postBatch(a, batch)
	}
}

// take gives the posts of the next transaction, in the order they came.
func (l *lane) take() []*waitingPost {
	rows, n := 0, 0
	for n < len(l.waiting) && (n == 0 || rows+len(l.waiting[n].results) <= togetherSumMax) {
		rows += len(l.waiting[n].results)
		n++
	}
	batch := l.waiting[:n:n]
	l.waiting = l.waiting[n:]
	return batch
}

// postBatch makes one post of several and answers each.
func (s *Store) postBatch(a Actor, batch []*waitingPost) {
	if len(batch) == 1 {
		w := batch[0]
		w.answer, w.err = s.postNow(w.ctx, a, w.results, false, w.pre)
		close(w.done)
		return
	}
	// The transaction is nobody's alone: it goes on while one of those who wait for it is still there.
	ctx, cancel := context.WithTimeout(context.WithoutCancel(batch[0].ctx), statementTimeout)
	defer cancel()
	var results []definition.Result
	var pre []*definition.Error
	for _, w := range batch {
		results = append(results, w.results...)
		own := make([]*definition.Error, len(w.results))
		copy(own, w.pre)
		pre = append(pre, own...)
	}
	answer, err := s.postNow(ctx, a, results, false, pre)
	from := 0
	for _, w := range batch {
		to := from + len(w.results)
		if w.err = err; err == nil {
			w.answer = PostAnswer{Rows: answer.Rows[from:to:to], Tracks: tracksOf(w.results, answer.Rows[from:to], answer.Tracks)}
		}
		from = to
		close(w.done)
	}
}

// tracksOf gives the updates of the tracks that the accepted ones of some rows lie on.
func tracksOf(results []definition.Result, rows []Posted, updates []TrackUpdate) (mine []TrackUpdate) {
	for _, u := range updates {
		for i := range results {
			if rows[i].Outcome == Accepted && results[i].Chart == u.Track.Chart && (u.Track.Lot == "" || u.Track.Lot == results[i].Lot) {
				mine = append(mine, u)
				break
			}
		}
	}
	return mine
}
