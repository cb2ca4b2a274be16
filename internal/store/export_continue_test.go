package store

import (
	"context"
	"errors"
	"time"
)

// PlaceMoves reports whether a place is read again where something happens between it and the reading of its timeline.
func PlaceMoves(ctx context.Context, s *Store, a Actor, chart string, at time.Time, between func()) (bool, error) {
	p, err := s.readPlaceOnTrack(ctx, a, chart, "", at)
	if err != nil {
		return false, err
	}
	between()
	err = s.addTimeline(ctx, p)
	return errors.Is(err, errTimelineMoved), err
}
