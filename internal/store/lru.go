package store

import (
	"container/list"
	"sync"
)

// lru keeps the values used last, for things that never change: a value found may be used for good, one not found is
// read again.
type lru[K comparable, V any] struct {
	mu     sync.Mutex
	max    int
	order  *list.List // of lruEntry, the latest used in front
	lookup map[K]*list.Element
}

type lruEntry[K comparable, V any] struct {
	key   K
	value V
}

func newLRU[K comparable, V any](max int) *lru[K, V] {
	return &lru[K, V]{max: max, order: list.New(), lookup: map[K]*list.Element{}}
}

func (c *lru[K, V]) get(key K) (value V, ok bool) {
	c.mu.Lock()
	defer c.mu.Unlock()
	at, ok := c.lookup[key]
	if !ok {
		return value, false
	}
	c.order.MoveToFront(at)
	return at.Value.(lruEntry[K, V]).value, true
}

func (c *lru[K, V]) put(key K, value V) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if at, ok := c.lookup[key]; ok {
		at.Value = lruEntry[K, V]{key, value}
		c.order.MoveToFront(at)
		return
	}
	c.lookup[key] = c.order.PushFront(lruEntry[K, V]{key, value})
	if c.order.Len() > c.max {
		oldest := c.order.Back()
		c.order.Remove(oldest)
		delete(c.lookup, oldest.Value.(lruEntry[K, V]).key)
	}
}
