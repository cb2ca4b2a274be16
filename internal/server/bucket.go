package server

import (
	"crypto/sha256"
	"sync"
	"time"
)

// bucketsMax bounds the keys that a rate is kept for. A key that is forgotten starts with a full bucket.
const bucketsMax = 10_000

// buckets limit a rate for each of many keys: a bucket holds up to burst tokens and gets rate tokens a second. A key is
// told apart by the digest of its whole token, so that nobody without the token can empty its bucket.
type buckets struct {
	rate, burst float64
	now         func() time.Time
	mu          sync.Mutex
	byKey       map[[sha256.Size]byte]*bucket
}

type bucket struct {
	tokens float64
	at     time.Time
}

func newBuckets(rate, burst float64, now func() time.Time) *buckets {
	return &buckets{rate: rate, burst: burst, now: now, byKey: map[[sha256.Size]byte]*bucket{}}
}

// take takes a token; where there is none it gives the time until there is one.
func (b *buckets) take(key [sha256.Size]byte) (wait time.Duration) {
	b.mu.Lock()
	defer b.mu.Unlock()
	now := b.now()
	k := b.byKey[key]
	if k == nil {
		b.makeRoom(now)
		k = &bucket{tokens: b.burst, at: now}
		b.byKey[key] = k
	}
	if passed := now.Sub(k.at); passed > 0 {
		k.tokens, k.at = min(b.burst, k.tokens+passed.Seconds()*b.rate), now
	}
	if k.tokens < 1 {
		return time.Duration((1 - k.tokens) / b.rate * float64(time.Second))
	}
	k.tokens--
	return 0
}

// makeRoom forgets keys whose bucket is full again, and one more where there are none.
func (b *buckets) makeRoom(now time.Time) {
	if len(b.byKey) < bucketsMax {
		return
	}
	for key, k := range b.byKey {
		if k.tokens+now.Sub(k.at).Seconds()*b.rate >= b.burst {
			delete(b.byKey, key)
		}
	}
	for key := range b.byKey {
		if len(b.byKey) < bucketsMax {
			return
		}
		delete(b.byKey, key)
	}
}
