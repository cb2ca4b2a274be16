package store

import (
	"context"
	"errors"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// stretch is a part of a track that a change of its timeline touches.
type stretch struct {
	// The version in force changes in [from, to); a zero to is the end of time.
	from, to time.Time
	// carries is set where a segment starts differently at to, so that the results up to the next start of a segment,
	// at until (zero: none), may be judged differently too, though by the same version.
	carries bool
	until   time.Time
}

// stretches compares two timelines of one track. There is one stretch for each run of moments at which the version in
// force or the start of a segment differs.
func stretches(before, after track.Timeline) (list []stretch) {
	moments := []time.Time{}
	for _, t := range []track.Timeline{before, after} {
		for _, s := range t.Spans {
			moments = append(moments, s.From)
		}
	}
	slices.SortFunc(moments, time.Time.Compare)
	moments = slices.CompactFunc(moments, time.Time.Equal)
	open := false
	for _, at := range moments {
		was, is := before.Spans[before.At(at)], after.Spans[after.At(at)]
		startsWas, startsIs := startOf(was, at), startOf(is, at)
		differs := numberOf(was.Version) != numberOf(is.Version)
		switch {
		case differs && !open:
			list = append(list, stretch{from: at})
			open = true
		case differs:
		case open:
			last := &list[len(list)-1]
			last.to, last.carries = at, startsWas != startsIs
			open = false
		case startsWas != startsIs:
			list = append(list, stretch{from: at, to: at, carries: true})
		case startsIs.Break:
			for i := range list {
				if list[i].carries && list[i].until.IsZero() {
					list[i].until = at
				}
			}
		}
	}
	return list
}

// start says whether a segment starts at a moment, and how.
type start struct{ Break, HeadStart bool }

func startOf(s track.Span, at time.Time) start {
	if !s.From.Equal(at) {
		return start{}
	}
	return start{s.Break, s.HeadStart}
}

func numberOf(v *track.Version) int {
	if v == nil {
		return 0
	}
	return v.Number
}

// keys gives the bounds of a track's results that have to be judged anew: those of [from, to), and where the change
// carries on, the first result after, from which judging goes on by itself.
func (s stretch) keys(ctx context.Context, q querier, trackID int64) (from, to []byte, err error) {
	if !s.from.IsZero() {
		from = definition.KeyTime(s.from)
	}
	if s.to.IsZero() {
		return from, nil, nil
	}
	to = definition.KeyTime(s.to)
	if !s.carries {
		return from, to, nil
	}
	var first []byte
	err = q.QueryRow(ctx, `SELECT order_key FROM places WHERE track_id = $1 AND order_key >= $2 ORDER BY order_key LIMIT 1`, trackID, to).Scan(&first)
	switch {
	case errors.Is(err, pgx.ErrNoRows):
		return from, to, nil
	case err != nil:
		return nil, nil, err
	}
	return from, next(first), nil
}

// touches gives the bounds of the results whose verdict or version the change may alter.
func (s stretch) touches() (from, to []byte) {
	if !s.from.IsZero() {
		from = definition.KeyTime(s.from)
	}
	end := s.to
	if s.carries {
		end = s.until
	}
	if !end.IsZero() {
		to = definition.KeyTime(end)
	}
	return from, to
}

// rejudgeStretches judges anew what a change from one timeline to the chart's present one touches, track by track.
func (s *Store) rejudgeStretches(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, before *timeline, entry int64) ([]TrackUpdate, error) {
	after, err := s.timeline(ctx, w.tx, c)
	if err != nil {
		return nil, err
	}
	var updates []TrackUpdate
	for _, t := range tracks {
		var total *TrackUpdate
		for _, part := range stretches(before.forTrack(t.Lot), after.forTrack(t.Lot)) {
			from, to, err := part.keys(ctx, w.tx, t.ID)
			if err != nil {
				return nil, err
			}
			if to != nil && string(from) == string(to) {
				continue // a moment that no result follows
			}
			update, err := s.rejudge(ctx, w, c, t, from, to, entry)
			if err != nil {
				return nil, err
			}
			if total == nil {
				total = &update
				continue
			}
			total.Track = update.Track
			total.Signals = append(total.Signals, update.Signals...)
			total.Rejudged += update.Rejudged
			total.OrderNotKnown = total.OrderNotKnown || update.OrderNotKnown
		}
		if total != nil {
			updates = append(updates, *total)
		}
	}
	return updates, nil
}
