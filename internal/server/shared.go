package server

import (
	"context"
	"sync"
	"time"
)

// shared lets callers with the same key share one look-up of a value that may change at any moment. A caller never gets
// an answer that was asked for before the caller came: while a look-up runs, newcomers wait for the next one.
type shared[K comparable, V any] struct {
	timeout time.Duration
	mu      sync.Mutex
	groups  map[K]*group[V]
}

// group is the look-ups of one key: one running and at most one to come.
type group[V any] struct{ next *lookup[V] }

type lookup[V any] struct {
	done  chan struct{}
	find  func(context.Context) (V, error)
	value V
	err   error
}

func newShared[K comparable, V any](timeout time.Duration) *shared[K, V] {
	return &shared[K, V]{timeout: timeout, groups: map[K]*group[V]{}}
}

// do finds the value. The look-up goes on when the caller leaves, for those who wait for it too.
func (s *shared[K, V]) do(ctx context.Context, key K, find func(context.Context) (V, error)) (V, error) {
	l := s.join(key, find)
	select {
	case <-l.done:
		return l.value, l.err
	case <-ctx.Done():
		var none V
		return none, ctx.Err()
	}
}

func (s *shared[K, V]) join(key K, find func(context.Context) (V, error)) *lookup[V] {
	s.mu.Lock()
	defer s.mu.Unlock()
	g, running := s.groups[key]
	if running && g.next != nil {
		return g.next
	}
	l := &lookup[V]{done: make(chan struct{}), find: find}
	if running {
		g.next = l
		return l
	}
	s.groups[key] = &group[V]{}
	go s.run(key, l)
	return l
}

func (s *shared[K, V]) run(key K, l *lookup[V]) {
	for l != nil {
		ctx, cancel := context.WithTimeout(context.Background(), s.timeout)
		l.value, l.err = l.find(ctx)
		cancel()
		close(l.done)
		s.mu.Lock()
		g := s.groups[key]
		l, g.next = g.next, nil
		if l == nil {
			delete(s.groups, key)
		}
		s.mu.Unlock()
	}
}
