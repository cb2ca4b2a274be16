package server

import (
	"crypto/sha256"
	"strconv"
	"testing"
	"time"
)

func keyOf(i int) [sha256.Size]byte { return sha256.Sum256([]byte(strconv.Itoa(i))) }

// TestABucketFillsAtItsRate takes tokens from a bucket of 3 that gets 2 a second.
func TestABucketFillsAtItsRate(t *testing.T) {
	now := time.Unix(0, 0)
	b := newBuckets(2, 3, func() time.Time { return now })
	for i, step := range []struct {
		after, want time.Duration
	}{{0, 0}, {0, 0}, {0, 0}, {0, 500 * time.Millisecond}, {250 * time.Millisecond, 250 * time.Millisecond}, {250 * time.Millisecond, 0}, {0, 500 * time.Millisecond},
		{time.Hour, 0}, {0, 0}, {0, 0}, {0, 500 * time.Millisecond}, {-time.Hour, 500 * time.Millisecond}} { // a clock set back gives nothing and takes nothing
		now = now.Add(step.after)
		if got := b.take(keyOf(0)); got != step.want {
			t.Errorf("step %d: wait %v, want %v", i, got, step.want)
		}
	}
	if got := b.take(keyOf(1)); got != 0 {
		t.Errorf("another key waits %v", got)
	}
}

func TestBucketsAreBounded(t *testing.T) {
	now := time.Unix(0, 0)
	b := newBuckets(1, 2, func() time.Time { return now })
	for i := range bucketsMax + 100 {
		b.take(keyOf(i))
	}
	if len(b.byKey) > bucketsMax {
		t.Errorf("%d buckets, want at most %d", len(b.byKey), bucketsMax)
	}
	now = now.Add(time.Minute) // all are full again
	b.take(keyOf(-1))
	if len(b.byKey) != 1 {
		t.Errorf("%d buckets are left of those that are full again", len(b.byKey))
	}
}
